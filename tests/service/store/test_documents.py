"""Fleets and windows, each write a revision."""

from concurrent.futures import ThreadPoolExecutor

import pytest

from service.settings import Settings
from service.store import BadCursor, Condition, DocumentStore, NoSuchDocument, PreconditionFailed, StoreFull
from service.store.documents import RedisDocumentStore
from tests.faults.deployment import Deployment

NEW = Condition(must_be_new=True)
ANY = Condition(any_of=frozenset({"*"}))


def test_the_store_keeps_the_promises_the_web_side_counts_on(empty: Deployment) -> None:
    store: DocumentStore = empty.documents
    assert store.documents("fleet").documents == []


def test_a_document_is_read_back_in_each_of_its_revisions(empty: Deployment) -> None:
    store = empty.documents
    first = store.put("fleet", "bay", b'{"a": 1}', note="as built", written_by="operator")
    second = store.put("fleet", "bay", b'{"a": 2}')
    assert (first.number, first.note, first.written_by) == (1, "as built", "operator")
    assert (second.number, second.note, second.written_by) == (2, None, None)
    assert store.get("fleet", "bay").text == b'{"a": 2}'
    assert store.get("fleet", "bay").revision == second
    assert store.get("fleet", "bay", 1).text == b'{"a": 1}'
    assert store.get("fleet", "bay", 1).revision == first
    assert first.written_at <= second.written_at
    with pytest.raises(NoSuchDocument):
        store.get("window", "bay")
    with pytest.raises(NoSuchDocument):
        store.get("fleet", "bay", 3)


def test_a_new_document_is_refused_where_one_is_stored(empty: Deployment) -> None:
    first = empty.documents.put("fleet", "bay", b"{}", condition=NEW)
    with pytest.raises(PreconditionFailed) as told:
        empty.documents.put("fleet", "bay", b"{}", condition=NEW)
    assert told.value.current_etag == first.etag


def test_a_write_on_condition_needs_the_state_it_names(empty: Deployment) -> None:
    store = empty.documents
    for condition in (ANY, Condition(any_of=frozenset({'"1-abc"'}))):
        with pytest.raises(PreconditionFailed) as told:
            store.put("fleet", "bay", b"{}", condition=condition)
        assert told.value.current_etag is None
    first = store.put("fleet", "bay", b"{}")
    second = store.put("fleet", "bay", b'{"a": 1}', condition=Condition(any_of=frozenset({first.etag, '"7-x"'})))
    with pytest.raises(PreconditionFailed) as stale:
        store.put("fleet", "bay", b"{}", condition=Condition(any_of=frozenset({first.etag})))
    assert stale.value.current_etag == second.etag
    assert store.put("fleet", "bay", b"{}", condition=ANY).number == 3


def test_of_two_writers_who_read_the_same_state_one_is_refused(empty: Deployment) -> None:
    etag = empty.documents.put("window", "day", b"{}").etag

    def write(number: int) -> bool:
        try:
            empty.documents.put("window", "day", b"%d" % number, condition=Condition(any_of=frozenset({etag})))
        except PreconditionFailed:
            return False
        return True

    with ThreadPoolExecutor(8) as pool:
        assert sorted(pool.map(write, range(8))) == [False] * 7 + [True]


def test_a_removed_document_is_gone_and_its_numbers_are_not_given_again(empty: Deployment) -> None:
    store = empty.documents
    first = store.put("fleet", "bay", b"{}")
    with pytest.raises(PreconditionFailed):
        store.remove("fleet", "bay", Condition(any_of=frozenset({'"9-x"'})))
    store.remove("fleet", "bay", Condition(any_of=frozenset({first.etag})))
    for call in (store.get, store.remove, store.revisions):
        with pytest.raises(NoSuchDocument):
            call("fleet", "bay")
    assert store.documents("fleet").documents == []
    again = store.put("fleet", "bay", b"{}", condition=NEW)
    assert again.number == 2
    assert again.etag != first.etag


def test_documents_are_listed_by_id_page_by_page(empty: Deployment) -> None:
    for name in ("c", "a", "B", "d.1", "d"):
        empty.documents.put("fleet", name, b"{}")
    empty.documents.put("fleet", "a", b"{}")
    seen: list[tuple[str, int]] = []
    cursor = None
    while True:
        page = empty.documents.documents("fleet", limit=2, cursor=cursor)
        seen += [(name, revision.number) for name, revision in page.documents]
        if (cursor := page.next) is None:
            break
    assert seen == [("B", 1), ("a", 2), ("c", 1), ("d", 1), ("d.1", 1)]


def test_revisions_are_listed_newest_first_page_by_page(empty: Deployment) -> None:
    for number in range(5):
        empty.documents.put("window", "day", b"%d" % number)
    page = empty.documents.revisions("window", "day", limit=2)
    rest = empty.documents.revisions("window", "day", limit=3, cursor=page.next)
    assert [revision.number for revision in (*page.revisions, *rest.revisions)] == [5, 4, 3, 2, 1]
    assert rest.next is None
    with pytest.raises(BadCursor):
        empty.documents.revisions("window", "other", cursor=page.next)
    with pytest.raises(BadCursor):
        empty.documents.documents("window", cursor=page.next)


def test_the_oldest_revisions_go_where_only_so_many_are_kept(empty: Deployment) -> None:
    store = RedisDocumentStore(empty.client, Settings(revisions_kept=2))
    for number in range(4):
        store.put("fleet", "bay", b"%d" % number)
    assert [revision.number for revision in store.revisions("fleet", "bay").revisions] == [4, 3]
    with pytest.raises(NoSuchDocument):
        store.get("fleet", "bay", 2)


def test_a_store_near_its_limit_takes_no_document(empty: Deployment) -> None:
    with pytest.raises(StoreFull):
        RedisDocumentStore(empty.client, Settings(memory_share=0.001)).put("fleet", "bay", b"{}")
