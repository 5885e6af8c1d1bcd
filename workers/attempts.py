"""One attempt at a job as its record sees it: claimed, reported, ended or given back, each by one compare in Redis."""

import json
import zlib
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from threading import Event
from typing import Any, Literal
from uuid import uuid4

from redis import Redis
from redis.exceptions import OutOfMemoryError

from schemas.diagnosis import Diagnosis
from schemas.records import (
    COMPRESSION,
    AnswerKind,
    FailureReason,
    JobState,
    Keys,
    Stop,
    carried_job,
    carrier_name,
)
from schemas.schedule import Schedule, Undecided
from workers import scripts

Answer = Schedule | Diagnosis | Undecided

HALF_WRITTEN_SECONDS = 3600
"""So long what a lost attempt had begun to write lies about at most."""

CHUNK_BYTES_AT_ONCE = 1_000_000
"""Redis serves nobody else while it takes a write in."""

FULL_RETRY_SECONDS = 1.0
FULL_TRIES = 600


@dataclass(frozen=True)
class Claim:
    """An attempt that was let through, and the request it is about."""

    attempt: "Attempt"
    request: bytes


class Attempt:
    """The right to write one job's end, as long as nobody began it anew."""

    def __init__(self, redis: "Redis", keys: Keys, carrier: str, number: int) -> None:
        self.job_id = carried_job(carrier)
        self.number = number
        self._carrier = carrier
        self._redis = redis
        self._keys = keys
        self._report = redis.register_script(scripts.REPORT)
        self._give_back = redis.register_script(scripts.GIVE_BACK)

    def report(self, phase: str = "", done: float = 0.0) -> Stop | Literal["", "lost"]:
        """Write progress, unless no phase is given; hear whether to stop, or that the job is no longer ours."""
        word = self._report(keys=[self._keys.job(self.job_id)], args=[self.number, phase, f"{done:.4f}"])
        told: Stop | Literal["", "lost"] = word.decode()
        return told

    def hand_over(self, answer: Answer) -> str:
        """Write an answer and end the job as finished; returns the state that was reached, or `lost`."""
        kind, fields, chunks = _written(answer.model_copy(update={"job_id": self.job_id}))
        return _once_there_is_room(lambda: self._write(chunks, "finished", {"answer": kind, **fields}))

    def cancel(self) -> str:
        """End the job as cancelled."""
        return self._write({}, "cancelled", {"phase": ""})

    def fail(self, reason: FailureReason, detail: str) -> str:
        """End the job as failed, by a fault of ours."""
        fields = {"error_reason": reason, "error_detail": detail}
        return _once_there_is_room(lambda: self._write({}, "failed", fields))

    def give_back(self) -> str:
        """Let the keeper put the job into its queue again, at no cost of a try."""
        number = int(self._carrier.rpartition("-")[2])
        word: bytes = self._give_back(
            keys=[self._keys.job(self.job_id), self._keys.waiting, self._keys.started],
            args=[self.number, self._carrier, carrier_name(self.job_id, number + 1)],
        )
        return word.decode()

    def _write(self, chunks: Mapping[str, bytes], state: JobState, fields: Mapping[str, str]) -> str:
        """Lay the chunks down under the attempt's own name, a megabyte at a time, and end the attempt with the last."""
        own = self._keys.answer_of_attempt(self.job_id, self.number)
        pending: dict[Any, Any] = {}
        size = 0
        with self._redis.pipeline(transaction=False) as pipeline:
            for name, chunk in chunks.items():
                pending[name], size = chunk, size + len(chunk)
                if size > CHUNK_BYTES_AT_ONCE:
                    pipeline.hset(own, mapping=pending)
                    pipeline.expire(own, HALF_WRITTEN_SECONDS)
                    pipeline.execute()
                    pending, size = {}, 0
            if pending:
                pipeline.hset(own, mapping=pending)
                pipeline.expire(own, HALF_WRITTEN_SECONDS)
            # The text, not its digest: a pipeline would first ask whether Redis knows that, one round trip more.
            keys = self._keys_to_end(own)
            pipeline.eval(scripts.END, len(keys), *keys, *self._end_of(state, len(chunks), fields))
            word: bytes = pipeline.execute()[-1]
        return word.decode()

    def _keys_to_end(self, own: str) -> list[str]:
        keys = self._keys
        ended = keys.ended(self.job_id)
        return [keys.job(self.job_id), keys.started, keys.expiring, ended, own, keys.answer(self.job_id)]

    def _end_of(self, state: JobState, parts: int, fields: Mapping[str, str]) -> list[str]:
        pairs = (part for field in fields.items() for part in field)
        return [self.job_id, str(self.number), self._carrier, state, str(parts), *pairs]


def claim(redis: "Redis", keys: Keys, carrier: str) -> Claim | None:
    """Begin an attempt at the job of a carrier; None where that is no longer its carrier, or the job not queued."""
    job_id = carried_job(carrier)
    number, *request = redis.register_script(scripts.CLAIM)(
        keys=[keys.job(job_id), keys.request(job_id), keys.waiting, keys.started],
        args=[carrier.rpartition("-")[2], carrier, uuid4().hex],
    )
    if int(number) == 0:
        return None
    return Claim(Attempt(redis, keys, carrier, int(number)), zlib.decompress(request[0]))


def _written(answer: Answer) -> tuple[AnswerKind, dict[str, str], dict[str, bytes]]:
    """Write an answer as its kind, the record's fields and compressed chunks."""
    if isinstance(answer, Schedule):
        chunks = {f"asset:{asset.id}": _packed(asset.model_dump_json(by_alias=True)) for asset in answer.assets}
        chunks["order"] = _packed(json.dumps([asset.id for asset in answer.assets]))
        chunks["head"] = _packed(answer.model_dump_json(by_alias=True, exclude={"assets"}))
        figures: dict[str, Any] = {
            "margin": answer.margin,
            "margin_bound": answer.margin_bound,
            "relative_gap": answer.relative_gap,
        }
        fields = {name: repr(figure) for name, figure in figures.items() if figure is not None}
        return "schedule", {"outcome": answer.outcome, "phase": "ended", "done": "1", **fields}, chunks
    kind: AnswerKind = "diagnosis" if isinstance(answer, Diagnosis) else "undecided"
    fields = {"outcome": answer.outcome, "phase": "ended", "done": "1"}
    if isinstance(answer, Undecided) and answer.margin_bound is not None:
        fields["margin_bound"] = repr(answer.margin_bound)
    return kind, fields, {"head": _packed(answer.model_dump_json(by_alias=True))}


def _packed(text: str) -> bytes:
    return zlib.compress(text.encode(), COMPRESSION)


def _once_there_is_room(write: Callable[[], str]) -> str:
    """Write, and while Redis is full, wait: what was planned is worth more than the minute."""
    for _ in range(FULL_TRIES):
        try:
            return write()
        except OutOfMemoryError:
            pause(FULL_RETRY_SECONDS)
    return write()


def pause(seconds: float) -> None:
    """Let seconds pass."""
    Event().wait(seconds)
