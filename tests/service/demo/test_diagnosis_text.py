"""What the pages of the demo say of a diagnosis, for each kind of row, lever and ending."""

from typing import Any, get_args

import pytest

from schemas.diagnosis import Attainable, Change, Conflict, Diagnosis, Member, Repair
from schemas.job import Lever
from service.demo.diagnosis_text import UNITS, attainable_text, conflicts_text, without_text
from service.demo.page import WIDTH
from service.demo.ways_text import UNPRICED, margins_text, ways_text


def diagnosis(**members: Any) -> Diagnosis:
    return Diagnosis(**{"complete": True, "summary": "s", "conflicts": [], "cautions": ["c"], **members})


def repair(margin: float, text: str = "t", lever: Lever = "commitments", **operation: Any) -> Repair:
    change = Change.model_validate({"lever": lever, "pointer": "/p", "from": 2.0, "to": 1.0, "unit": "h"})
    patch = [{"op": "replace", "path": "/p", "value": 1.0, **operation}]
    return Repair(
        text=text, change=change, changes=[change], patch=patch, verified=True, margin=margin, margin_bound=margin + 0.5
    )


def test_every_figure_of_a_row_has_its_unit() -> None:
    fields = {name.removeprefix("required_") for name in Attainable.model_fields if name.startswith("required_")}
    assert set(UNITS) == fields


def test_what_each_lever_costs_beyond_the_margin_is_said() -> None:
    assert set(UNPRICED) == set(get_args(Lever))


@pytest.mark.parametrize(("figure", "unit"), UNITS.items())
def test_a_row_shows_what_is_asked_and_what_is_in_reach_in_its_own_unit(figure: str, unit: str) -> None:
    figures: dict[str, Any] = {f"required_{figure}": 8.0, f"attainable_{figure}": 7.25}
    row = Attainable(commitment="firm", asset="b-1", day="2027-03-16", left_out=["/outages/0"], **figures)
    _, line = attainable_text(diagnosis(attainable=[row]))
    assert line.split() == f"firm b-1 2027-03-16 8 {unit} 7.25 {unit} 0.75 {unit}".split()
    (words,) = without_text(diagnosis(attainable=[row]))
    assert "without /outages/0" in words


@pytest.mark.parametrize(
    ("count", "irreducible", "words"),
    [
        (1, True, "This cannot hold with the plant as it is"),
        (3, True, "These 3 cannot hold together; leave out any one"),
        (3, False, "Among these is what cannot hold together"),
    ],
)
def test_a_conflict_says_whether_all_of_its_members_are_needed(count: int, irreducible: bool, words: str) -> None:
    members = [Member(pointer=f"/outages/{place}", text=f"outage {place}") for place in range(count)]
    first, *lines = conflicts_text(diagnosis(conflicts=[Conflict(irreducible=irreducible, members=members)]))
    assert words in first
    assert lines == [f"- outage {place} (at /outages/{place})" for place in range(count)]


def test_ways_out_stand_beside_the_best_and_the_day_before_the_trip() -> None:
    found = diagnosis(repairs=[repair(100.0, "fewer hours " * 10), repair(90.0, path="/" + "x" * 120)])
    lines = list(ways_text(found, 130.0))
    assert [line.split()[:4] for line in lines if line[:3].strip().isdigit()] == [
        ["1", "100.00", ".", "-30.00"],
        ["2", "90.00", "-10.00", "-40.00"],
    ]
    assert max(map(len, lines)) <= WIDTH
    assert [line.split()[3] for line in ways_text(found, None) if line[:3].strip().isdigit()] == ["-", "-"]


def test_what_the_margins_leave_out_is_said_for_the_levers_that_are_used() -> None:
    exact, missing = margins_text(diagnosis(repairs=[repair(9.0), repair(8.0, lever="targets")]), "EUR")
    assert "at most 0.50 EUR" in exact
    assert missing == f"Not in them: {UNPRICED['commitments']}; {UNPRICED['targets']}."
