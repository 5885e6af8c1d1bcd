"""What is taken as read is said, and only that."""

import pytest

from schemas.assumptions import assumptions
from schemas.reading import read_job
from tests.schemas.documents import ABSENT, Json, full, plain, with_put

ROW: Json = {"id": "c1", "kind": "hours_at_least", "applies_to": {"assets": ["b1"]}, "threshold": {"mw": 1}, "hours": 1}
DAY = 24
TARGET = {"/targets": {"b1": {"final_stored_mwh": 4.0}}}


def said(**edits: object) -> dict[str, str]:
    """Assumptions of the plain request with a target, edited; by pointer, spelled with `_` for `/`."""
    document = plain()
    for pointer, value in {**TARGET, **{name.replace("__", "/"): value for name, value in edits.items()}}.items():
        document = with_put(document, pointer, value)
    found = assumptions(read_job(document))
    assert len({entry.pointer for entry in found}) == len(found)
    return {entry.pointer: entry.text for entry in found}


def outage(begin: str, end: str | None = None) -> list[Json]:
    return [{"asset": "b1", "kind": "forced", "from": begin, "to": end}]


def test_nothing_is_said_where_nothing_is_assumed() -> None:
    assert said() == {}
    assert said(__outages=outage("2027-03-14T01:00:00Z", "2027-03-14T02:00:00Z")) == {}


def test_an_outage_off_the_borders_is_widened_and_said_in_local_time() -> None:
    found = said(__outages=outage("2027-03-14T01:07:00Z", "2027-03-14T01:52:30Z"))
    assert found == {"/outages/0/from": "01:07 widened to 01:00", "/outages/0/to": "01:52:30 widened to 02:00"}
    found = said(__outages=outage("2027-03-14T01:07:00Z"), __window__timezone="Europe/Berlin")
    assert found == {"/outages/0/from": "02:07 widened to 02:00"}


def test_a_widening_over_midnight_carries_the_date() -> None:
    edits = {
        "__window__start": "2027-03-14T22:30:00Z",
        "__outages": outage("2027-03-14T23:00:00Z", "2027-03-15T00:10:00Z"),
    }
    found = said(**edits)
    assert found["/outages/0/from"] == "23:00 widened to 22:30"
    assert found["/outages/0/to"] == "00:10 widened to 00:30"
    found = said(__window__start="2027-03-14T22:30:00Z", __outages=outage("2027-03-15T00:10:00Z"))
    assert found["/outages/0/from"] == "2027-03-15 00:10+0000 widened to 2027-03-14 23:30+0000"


def test_an_end_of_an_outage_outside_the_window_is_nothing_to_widen() -> None:
    assert said(__outages=outage("2027-03-13T01:07:00Z", "2027-03-18T02:09:00Z")) == {}


def test_energy_above_the_capacity_is_taken_to_it() -> None:
    assert said(__initial__b1__stored_mwh=8.1) == {
        "/initial/b1/stored_mwh": "8.1 MWh is above the capacity of 8 MWh: taken as 8 MWh"
    }
    found = said(__initial__b1={"state_of_charge_percent": 101.5})
    assert found == {"/initial/b1/state_of_charge_percent": "101.5 % is above the capacity of 8 MWh: taken as 8 MWh"}
    assert said(__initial__b1__stored_mwh=8.0) == {}


def test_a_state_that_is_not_given_is_said_for_each_store() -> None:
    found = said(__initial=ABSENT, __missing_initial="assume_middle", __fleet__assets__0__min_stored_mwh=2)
    assert found == {"/initial/b1": "no state given: 5 MWh, the middle of its range, and idle"}
    found = said(__initial=ABSENT, __missing_initial="hold_out", __targets={})
    assert list(found) == ["/initial/b1"]
    assert "held out" in found["/initial/b1"]
    assert "4 MWh" in found["/initial/b1"]


def test_stores_without_a_target_are_said_in_one_entry() -> None:
    asset = plain()["fleet"]["assets"][0]
    document = with_put(plain(), "/fleet/assets", [{**asset, "id": f"b{number}"} for number in range(9)])
    document["initial"] = {f"b{number}": {"stored_mwh": 1} for number in range(9)}
    document["targets"] = {"b0": {"final_stored_mwh": 1}, "b1": {"final_value_per_mwh": 9}}
    (entry,) = assumptions(read_job(document))
    assert entry.pointer == "/targets"
    assert "`b1`, `b2`, `b3` and 5 more" in entry.text


def test_a_generator_without_a_state_is_taken_as_off() -> None:
    document = with_put(with_put(full("schedule"), "/initial/cs-g1", ABSENT), "/initial_from_job_id", ABSENT)
    texts = {entry.pointer: entry.text for entry in assumptions(read_job(document))}
    assert texts["/initial/cs-g1"] == "no state given: off for longer than any limit asks"


def test_a_product_of_another_window_is_left_out_and_said() -> None:
    document = with_put(full("schedule"), "/fleet/assets/1/reserve_products/0", "down-60")
    texts = {entry.pointer: entry.text for entry in assumptions(read_job(document))}
    assert texts["/fleet/assets/1/reserve_products/0"] == "`down-60` is no product of this window: left out"


def daily(**members: object) -> list[Json]:
    return [{**ROW, "each_day": True, **members}]


def test_a_day_cut_by_the_window_owes_the_full_figure() -> None:
    found = said(__commitments=daily())
    assert found == {"/commitments/0": "the window holds a part of 2027-03-14 only: the full figure is owed in it"}
    assert said(__commitments=daily(), __window__price_per_mwh=[1.0] * DAY) == {}
    later = daily(**{"from": "2027-03-15T00:00:00Z"})
    assert said(__commitments=later, __window__price_per_mwh=[1.0] * (DAY + 4)) == {
        "/commitments/0": "the window holds a part of 2027-03-15 only: the full figure is owed in it"
    }


@pytest.mark.parametrize(
    ("between", "start", "text"),
    [
        (["22:00", "06:00"], "2027-03-14T00:00:00Z", "the stretch that began 2027-03-13 22:00, before"),
        (["16:00", "22:00"], "2027-03-14T18:00:00Z", "the stretch that began 2027-03-14 16:00, before"),
        (["16:00", "22:00"], "2027-03-14T14:00:00Z", "the window ends within the stretch of 2027-03-14"),
        (["16:00", "22:00"], "2027-03-14T16:00:00Z", "the window ends within the stretch of 2027-03-14"),
    ],
)
def test_a_stretch_across_an_edge_of_the_window_is_said(between: list[str], start: str, text: str) -> None:
    found = said(__commitments=daily(between=between), __window__start=start)
    assert list(found) == ["/commitments/0/between"]
    assert found["/commitments/0/between"].startswith(text)


def test_a_stretch_within_the_window_or_outside_it_is_not_said() -> None:
    assert said(__commitments=daily(between=["01:00", "03:00"])) == {}
    assert said(__commitments=daily(between=["00:00", "04:00"])) == {}
    assert said(__commitments=daily(between=["16:00", "22:00"])) == {}
    beyond = daily(between=["22:00", "06:00"], **{"from": "2027-03-14T06:00:00Z"})
    assert said(__commitments=beyond) == {}


def test_a_sequence_is_one_horizon() -> None:
    document = with_put(full("sequence"), "/outages/0/from", "2027-03-14T12:30:00Z")
    texts = {entry.pointer: entry.text for entry in assumptions(read_job(document))}
    assert texts["/outages/0/from"] == "12:30 widened to 12:00"


def test_a_window_given_by_id_leaves_its_assumptions_for_later() -> None:
    document = with_put(full("sequence"), "/windows/1", "afternoon")
    for member in ("forecasts", "positions", "limits", "commitments", "counted_before"):
        document[member] = [] if member == "commitments" else {}
    document["forecasts"] = {"cs-pv": 0, "cs-base": 1}
    assert {entry.pointer for entry in assumptions(read_job(document))} == {"/targets"}
    assert "/outages/0/from" in {entry.pointer for entry in assumptions(read_job(full("reschedule")))}
