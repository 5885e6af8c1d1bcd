"""Fleets and windows over HTTP: revisions, entity tags, conditions, lists."""

from typing import Any

import pytest

from tests.schemas.documents import fleet, plain, window
from tests.service.web.live import House

KINDS = [("fleets", fleet), ("windows", window)]


@pytest.mark.parametrize(("kind", "document"), KINDS)
def test_a_document_is_given_back_as_it_was_stored(house: House, kind: str, document: Any) -> None:
    written = house.call("PUT", f"/v1/{kind}/pellow-bay", document())
    assert written.status == 201
    assert written.headers["location"] == f"/v1/{kind}/pellow-bay"
    assert written.document["revision"] == 1
    assert written.document["written_at"]
    read = house.call("GET", f"/v1/{kind}/pellow-bay")
    assert read.status == 200
    assert read.document == document()
    assert read.headers["etag"] == written.headers["etag"] == written.document["etag"]
    assert read.headers["hourwright-revision"] == "1"


def test_every_write_is_a_revision_that_stays_readable(house: House) -> None:
    first, second = fleet(), fleet() | {"note": "cs-b1 out"}
    house.call("PUT", "/v1/fleets/two-writes", first)
    again = house.call("PUT", "/v1/fleets/two-writes", second)
    assert again.status == 200
    assert again.document["revision"] == 2
    assert again.document["note"] == "cs-b1 out"
    assert house.call("GET", "/v1/fleets/two-writes").document == second
    assert house.call("GET", "/v1/fleets/two-writes/revisions/1").document == first
    listed = house.call("GET", "/v1/fleets/two-writes/revisions").document
    assert [entry["revision"] for entry in listed["revisions"]] == [2, 1]
    assert [entry["note"] for entry in listed["revisions"]] == ["cs-b1 out", first["note"]]
    assert house.call("GET", listed["revisions"][1]["links"]["revision"]).document == first


@pytest.mark.parametrize("number", ["3", "0", "-1", "01x", "one", "9" * 5000, "%C2%B2"])
def test_a_revision_that_is_not_there_is_not_found(house: House, number: str) -> None:
    house.call("PUT", "/v1/fleets/one-write", fleet())
    answered = house.call("GET", f"/v1/fleets/one-write/revisions/{number}")
    assert (answered.status, answered.problem) == (404, "no-such-document")


def test_a_read_of_what_the_caller_has_is_304(house: House) -> None:
    tag = house.call("PUT", "/v1/fleets/tagged", fleet()).headers["etag"]
    unchanged = house.call("GET", "/v1/fleets/tagged", if_none_match=tag)
    assert (unchanged.status, unchanged.body) == (304, b"")
    assert unchanged.headers["etag"] == tag
    assert house.call("GET", "/v1/fleets/tagged", if_none_match='"other"').status == 200
    assert house.call("GET", "/v1/fleets/tagged", if_none_match="*").status == 304


def test_of_two_writers_the_second_is_told(house: House) -> None:
    tag = house.call("PUT", "/v1/fleets/contested", fleet()).headers["etag"]
    assert house.call("PUT", "/v1/fleets/contested", fleet(), if_match=tag).status == 200
    late = house.call("PUT", "/v1/fleets/contested", fleet(), if_match=tag)
    assert (late.status, late.problem) == (412, "precondition-failed")
    assert late.headers["etag"] == house.call("GET", "/v1/fleets/contested").headers["etag"]
    assert house.call("PUT", "/v1/fleets/contested", fleet(), if_match="*").status == 200
    assert house.call("DELETE", "/v1/fleets/contested", if_match=tag).status == 412
    assert house.call("DELETE", "/v1/fleets/contested", if_match=late.headers["etag"]).status == 412
    assert house.call("DELETE", "/v1/fleets/contested", if_match="*").status == 204


def test_a_write_for_new_documents_only_spares_what_is_there(house: House) -> None:
    assert house.call("PUT", "/v1/windows/fresh", window(), if_none_match="*").status == 201
    again = house.call("PUT", "/v1/windows/fresh", window(), if_none_match="*")
    assert (again.status, again.problem) == (412, "precondition-failed")
    assert house.call("PUT", "/v1/windows/absent", window(), if_match="*").status == 412
    odd = house.call("PUT", "/v1/windows/fresh", window(), if_none_match='"1"')
    assert (odd.status, odd.problem) == (400, "malformed-header")


def test_a_removed_document_is_gone_with_its_revisions(house: House) -> None:
    house.call("PUT", "/v1/fleets/removed", fleet())
    assert house.call("DELETE", "/v1/fleets/removed").status == 204
    for path in ("removed", "removed/revisions", "removed/revisions/1"):
        assert house.call("GET", f"/v1/fleets/{path}").status == 404
    assert house.call("DELETE", "/v1/fleets/removed").status == 404


@pytest.mark.parametrize("name", ["a" * 65, "-a", "a%20b", "a%00", "%C3%A9", ".."])
def test_a_document_is_stored_under_an_id_only(house: House, name: str) -> None:
    answered = house.call("PUT", f"/v1/fleets/{name}", fleet())
    assert (answered.status, answered.problem) == (422, "invalid-parameters")
    assert answered.document["errors"][0]["parameter"] == "id"
    assert house.call("GET", f"/v1/fleets/{name}").status == 404
    assert house.call("GET", f"/v1/fleets/{name}/revisions").status == 404
    assert house.call("DELETE", f"/v1/fleets/{name}").status == 404


def test_a_faulty_fleet_is_refused_with_pointers_into_it(house: House) -> None:
    faulty = fleet()
    faulty["assets"][0]["charge_efficiency"] = 1.5
    faulty["assets"][1]["id"] = "cs-b1"
    del faulty["assets"][5]["charge_limit_mw"]
    answered = house.call("PUT", "/v1/fleets/faulty", faulty)
    assert (answered.status, answered.problem) == (422, "invalid-request")
    found = {entry["pointer"] for entry in answered.document["errors"]}
    assert {"/assets/0/charge_efficiency", "/assets/5/charge_limit_mw"} <= found
    assert house.call("GET", "/v1/fleets/faulty").status == 404


def test_rules_across_a_fleets_members_are_checked_when_it_is_stored(house: House) -> None:
    doubled = fleet()
    doubled["assets"][1]["id"] = "cs-b1"
    answered = house.call("PUT", "/v1/fleets/doubled", doubled)
    assert [entry["pointer"] for entry in answered.document["errors"]] == ["/assets/1/id"]


def test_a_faulty_window_is_refused_with_pointers_into_it(house: House) -> None:
    faulty = window() | {"sell_price_per_mwh": [1.0, 2.0], "currency": "euro"}
    answered = house.call("PUT", "/v1/windows/faulty", faulty)
    assert (answered.status, answered.problem) == (422, "invalid-request")
    assert "/currency" in {entry["pointer"] for entry in answered.document["errors"]}
    short = house.call("PUT", "/v1/windows/faulty", window() | {"sell_price_per_mwh": [1.0, 2.0]})
    assert [entry["pointer"] for entry in short.document["errors"]] == ["/sell_price_per_mwh"]


@pytest.mark.parametrize("document", [None, [], "x", 5, {}])
def test_what_is_no_fleet_at_all_is_refused(house: House, document: object) -> None:
    body = b"null" if document is None else document
    answered = house.call("PUT", "/v1/fleets/nothing", body)
    assert (answered.status, answered.problem) == (422, "invalid-request")


def test_lists_are_paged_without_holes_or_doubles(house: House) -> None:
    names = [f"paged-{number}" for number in range(5)]
    for name in names:
        house.call("PUT", f"/v1/windows/{name}", plain()["window"])
    found: list[str] = []
    path = "/v1/windows?limit=2"
    while path:
        page = house.call("GET", path)
        assert page.status == 200
        found += [entry["id"] for entry in page.document["windows"]]
        link = page.headers.get("link", "")
        assert bool(link) == bool(page.document["next"])
        path = link.partition(">")[0].removeprefix("<")
    assert len(found) == len(set(found))
    assert [name for name in found if name.startswith("paged-")] == names


@pytest.mark.parametrize(
    "query", ["limit=0", "limit=101", "limit=x", "limit=1&limit=2", "lmit=1", "limit=", "limit=%C2%B2"]
)
def test_a_faulty_query_is_refused_by_parameter(house: House, query: str) -> None:
    answered = house.call("GET", f"/v1/fleets?{query}")
    assert (answered.status, answered.problem) == (422, "invalid-parameters")
    assert answered.document["errors"][0]["parameter"] in ("limit", "lmit")


def test_a_cursor_of_another_list_is_refused(house: House) -> None:
    answered = house.call("GET", "/v1/fleets?cursor=made-up")
    assert (answered.status, answered.problem) == (400, "bad-cursor")
