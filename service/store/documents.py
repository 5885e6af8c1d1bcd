"""Fleets and windows in Redis, each write a revision."""

import hashlib
import json
import zlib
from typing import Any, cast

from redis import Redis

from schemas.records import COMPRESSION, Keys, instant_of
from service.settings import Settings
from service.store import (
    UNCONDITIONAL,
    BadCursor,
    Condition,
    DocumentKind,
    DocumentPage,
    NoSuchDocument,
    PreconditionFailed,
    Revision,
    RevisionPage,
    Stored,
    scripts,
)
from service.store.calls import Memory, text_of, translated
from service.store.cursors import read_cursor, write_cursor


class RedisDocumentStore:
    """Keeps the promises of `service.store.DocumentStore`."""

    def __init__(self, redis: "Redis", settings: Settings) -> None:
        self._redis = redis
        self._settings = settings
        self._keys = Keys(settings.key_prefix)
        self._memory = Memory(redis)
        self._put = redis.register_script(scripts.PUT_DOCUMENT)
        self._remove = redis.register_script(scripts.REMOVE_DOCUMENT)

    def put(
        self,
        kind: DocumentKind,
        document_id: str,
        text: bytes,
        *,
        note: str | None = None,
        written_by: str | None = None,
        condition: Condition = UNCONDITIONAL,
    ) -> Revision:
        """Store a document as its next revision."""
        facts = {"sha256": hashlib.sha256(text).hexdigest()}
        facts |= {name: word for name, word in (("note", note), ("written_by", written_by)) if word is not None}
        word, etags = _condition(condition)
        with translated():
            self._memory.require_room(self._settings.memory_share)
            told, *rest = self._put(
                keys=self._keys_of(kind, document_id),
                args=[
                    word,
                    etags,
                    document_id,
                    zlib.compress(text, COMPRESSION),
                    json.dumps(facts),
                    self._settings.revisions_kept,
                ],
            )
        if told == b"refused":
            raise PreconditionFailed(text_of(rest[0]) or None)
        return _revision(int(rest[0]), {**facts, "written_at": text_of(rest[1])})

    def get(self, kind: DocumentKind, document_id: str, revision: int | None = None) -> Stored:
        """Read a document in one revision; the number is read first, and a revision never changes."""
        known_key, texts_key, counter_key, _ = self._keys_of(kind, document_id)
        with translated():
            if revision is None:
                last = cast(bytes | None, self._redis.get(counter_key))
                if last is None:
                    raise NoSuchDocument(document_id)
                revision = int(last)
            with self._redis.pipeline() as pipeline:
                pipeline.hget(known_key, str(revision))
                pipeline.hget(texts_key, str(revision))
                facts, packed = pipeline.execute()
        if facts is None or packed is None:
            raise NoSuchDocument(document_id)
        return Stored(document_id, _revision(revision, json.loads(facts)), zlib.decompress(packed))

    def remove(self, kind: DocumentKind, document_id: str, condition: Condition = UNCONDITIONAL) -> None:
        """Remove a document with all its revisions."""
        word, etags = _condition(condition)
        with translated():
            told, *rest = self._remove(keys=self._keys_of(kind, document_id), args=[word, etags, document_id])
        if told == b"none":
            raise NoSuchDocument(document_id)
        if told == b"refused":
            raise PreconditionFailed(text_of(rest[0]))

    def documents(self, kind: DocumentKind, *, limit: int = 20, cursor: str | None = None) -> DocumentPage:
        """List what is stored, by id."""
        start = "-" if cursor is None else f"({read_cursor(cursor, kind, 1)[0]}"
        with translated():
            found = cast(
                list[bytes],
                self._redis.zrangebylex(self._keys.documents(kind), start, "+", start=0, num=limit + 1),
            )
            ids = [text_of(name) for name in found]
            with self._redis.pipeline(transaction=False) as pipeline:
                for name in ids[:limit]:
                    pipeline.get(self._keys.document_counter(kind, name))
                numbers = [int(number) for number in pipeline.execute()]
                for name, number in zip(ids, numbers, strict=False):
                    pipeline.hget(self._keys.document(kind, name), str(number))
                facts = pipeline.execute()
        page = [
            (name, _revision(number, json.loads(fact)))
            for name, number, fact in zip(ids, numbers, facts, strict=False)
            if fact is not None  # removed between the reads
        ]
        return DocumentPage(page, write_cursor(kind, ids[limit - 1]) if len(ids) > limit else None)

    def revisions(
        self, kind: DocumentKind, document_id: str, *, limit: int = 20, cursor: str | None = None
    ) -> RevisionPage:
        """List the revisions of a document, newest first."""
        before = None
        if cursor is not None:
            (before,) = read_cursor(cursor, f"{kind}:{document_id}", 1)
            if not before.isdecimal():
                raise BadCursor(cursor)
        with translated():
            facts = cast(dict[bytes, bytes], self._redis.hgetall(self._keys.document(kind, document_id)))
        if not facts:
            raise NoSuchDocument(document_id)
        numbers = sorted((int(number) for number in facts), reverse=True)
        if before is not None:
            numbers = [number for number in numbers if number < int(before)]
        page = [_revision(number, json.loads(facts[str(number).encode()])) for number in numbers[:limit]]
        more = len(numbers) > limit
        return RevisionPage(page, write_cursor(f"{kind}:{document_id}", str(numbers[limit - 1])) if more else None)

    def _keys_of(self, kind: DocumentKind, document_id: str) -> tuple[str, str, str, str]:
        return (
            self._keys.document(kind, document_id),
            self._keys.document_texts(kind, document_id),
            self._keys.document_counter(kind, document_id),
            self._keys.documents(kind),
        )


def _condition(condition: Condition) -> tuple[str, str]:
    if condition.must_be_new:
        return "new", ""
    if condition.any_of is None:
        return "any", ""
    return "match", "*" if "*" in condition.any_of else " ".join(sorted(condition.any_of))


def _revision(number: int, facts: dict[str, Any]) -> Revision:
    return Revision(
        number=number,
        written_at=instant_of(int(facts["written_at"])),
        written_by=facts.get("written_by"),
        note=facts.get("note"),
        sha256=facts["sha256"],
    )
