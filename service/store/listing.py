"""Listing jobs, newest first, a bounded number of records at a time."""

from typing import cast

from redis import Redis

from schemas.records import JobRecord, JobState, Keys, record_of
from service.store import BadCursor, JobPage
from service.store.calls import text_of
from service.store.cursors import read_cursor, write_cursor

RECORDS_AT_ONCE = 100
MOST_RECORDS_READ = 2_000
"""A page looks at so many records at most; where few of them match, it is short and another follows."""


def list_jobs(
    redis: "Redis", keys: Keys, *, state: JobState | None, label: str | None, limit: int, cursor: str | None
) -> JobPage:
    """Walk back in time from the cursor until the page is full, or enough has been read."""
    place = _place_of(cursor)
    found: list[JobRecord] = []
    read = 0
    while True:
        entries = _older_than(redis, keys, place, RECORDS_AT_ONCE)
        with redis.pipeline(transaction=False) as pipeline:
            for job_id, _ in entries:
                pipeline.hgetall(keys.job(job_id))
            for (job_id, score), fields in zip(entries, pipeline.execute(), strict=True):
                place, read = (score, job_id), read + 1
                if not fields:
                    continue  # expired between the two reads
                record = record_of({text_of(name): text_of(value) for name, value in fields.items()})
                if (state is None or record.state == state) and (label is None or record.label == label):
                    found.append(record)
                if len(found) == limit:
                    return JobPage(found, _cursor_behind(redis, keys, place))
        if len(entries) < RECORDS_AT_ONCE or place is None:
            return JobPage(found, None)
        if read >= MOST_RECORDS_READ:
            return JobPage(found, _cursor_behind(redis, keys, place))


def _place_of(cursor: str | None) -> tuple[int, str] | None:
    if cursor is None:
        return None
    score, job_id = read_cursor(cursor, "jobs", 2)
    if not score.isdecimal():
        raise BadCursor(cursor)
    return int(score), job_id


def _cursor_behind(redis: "Redis", keys: Keys, place: tuple[int, str]) -> str | None:
    """Give a cursor if anything is older."""
    return write_cursor("jobs", str(place[0]), place[1]) if _older_than(redis, keys, place, 1) else None


def _older_than(redis: "Redis", keys: Keys, place: tuple[int, str] | None, count: int) -> list[tuple[str, int]]:
    """Give the next job ids with their time of creation in microseconds, those of the same instant by id downwards."""
    if place is None:
        return _entries(redis.zrevrange(keys.by_time, 0, count - 1, withscores=True))
    score, job_id = place
    same = _entries(redis.zrevrangebyscore(keys.by_time, score, score, withscores=True))
    rest = [entry for entry in same if entry[0].encode() < job_id.encode()][:count]
    if len(rest) < count:
        rest += _entries(
            redis.zrevrangebyscore(keys.by_time, f"({score}", "-inf", start=0, num=count - len(rest), withscores=True)
        )
    return rest


def _entries(answer: object) -> list[tuple[str, int]]:
    return [(text_of(member), int(score)) for member, score in cast(list[tuple[bytes, float]], answer)]
