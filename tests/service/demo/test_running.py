"""The demo as a person sees it, and each way in which it must fail."""

import copy
import json
import re
from collections.abc import Callable, Sequence
from io import BytesIO, TextIOWrapper
from math import fsum

import pytest

from schemas.cautions import CAUTIONS
from service.demo import running, scenario
from service.demo.answering import NoAnswerError, Reply
from service.demo.page import Page
from tests.service.demo.conftest import CURED, EVENING, TRIPPED, Document, Replies

WIDTH = 100


def shown(replies: Replies, encoding: str = "ascii") -> tuple[int, str]:
    """Print the demo with replies that are already there; return its status and what it printed."""

    def said(job: Document, _patch: Sequence[Document] = (), /) -> Reply:
        return copy.deepcopy(replies[re.sub(r"[^a-z0-9]+", "-", job["label"])])

    buffer = BytesIO()
    stream = TextIOWrapper(buffer, encoding=encoding)
    status = running.run(Page(stream), said)
    stream.flush()
    return status, buffer.getvalue().decode(encoding)


def part(printed: str, heading: str) -> list[str]:
    """Return the lines under a heading."""
    lines = printed.splitlines()
    first = next(place for place, line in enumerate(lines) if line.startswith(heading))
    length = lines[first:].index("") if "" in lines[first:] else None
    return lines[first + 1 : None if length is None else first + length]


def test_it_fits_into_100_columns(printed: str) -> None:
    assert max(len(line) for line in printed.splitlines()) <= WIDTH


def test_cautions_stand_beside_both_schedules_and_beside_the_refusal(printed: str) -> None:
    for day in printed.split("== Pellow Bay co-operative")[1:]:
        assert [" ".join(day.split()).count(caution) for caution in CAUTIONS] == [1, 1]
    assert printed.count("== Pellow Bay co-operative") == 3


def test_money_adds_up_in_rows_and_columns_and_to_the_margin(printed: str) -> None:
    head, *lines = part(printed, "MONEY")
    names = head.split()[1:]
    assert names[:2] == ["sales", "purchases"]
    # "peak fee" is one column of two words
    columns = len(names) - 1
    rows = {line.split()[0]: line.split()[1:] for line in lines}
    money = {name: [0.0 if cell == "." else float(cell) for cell in cells] for name, cells in rows.items()}
    half_a_cent = 0.005
    for name, amounts in money.items():
        assert len(amounts) == columns
        assert fsum(amounts[:-1]) == pytest.approx(amounts[-1], abs=half_a_cent * columns), name
    together = money.pop("all")
    for column, total in enumerate(together):
        parts = fsum(amounts[column] for amounts in money.values())
        assert parts == pytest.approx(total, abs=half_a_cent * (len(money) + 1))
    stated = re.search(r"Margin of the day, at forecast prices: (\d+\.\d\d) EUR", printed)
    assert stated is not None
    assert float(stated[1]) == together[-1]


def test_every_asset_meter_and_commitment_has_its_line(printed: str) -> None:
    request = scenario.evening_request()
    drawn = {line.split()[0] for line in part(printed, "STORES AND LOADS")}
    assert {asset["id"] for asset in request["fleet"]["assets"]} <= drawn
    assert {site["id"] for site in request["fleet"]["sites"]} <= {line.split()[0] for line in part(printed, "METERS")}
    asked = {line.split()[0] for line in part(printed, "COMMITMENTS")}
    assert {commitment["id"] for commitment in request["commitments"]} <= asked


def test_it_says_what_is_proven_and_how_it_was_checked(printed: str) -> None:
    words = " ".join(part(printed, "PROOF"))
    assert re.search(r"Proven: no schedule of this request earns more than \d+\.\d\d EUR", words)
    assert "Planned by method milp (assets are coupled" in words
    assert re.search(r"\d{4} checks, 0 violations", words)


def test_the_second_day_names_the_trip_the_figures_and_the_commitment(printed: str) -> None:
    words = " ".join(printed.split())
    assert "lw-b1: forced outage from Mon 2027-03-15 21:40 until 09:00" in words
    assert "(at /commitments/0)" in words
    assert "(at /outages/2)" in words


def test_how_far_the_commitment_can_be_met_is_what_pencil_and_paper_give(printed: str) -> None:
    # From 09:00 to 11:00 and from 13:00 on it can run: 13 h, which is 52 quarter-hours. A quarter-hour of the promise
    # takes 0.25 * 1.5 / 0.87 = 0.43103 MWh, one of charging brings 0.25 * 3 * 0.87 = 0.6525 MWh, and at midnight there
    # must be as much as at the start. 31 take 13.36 MWh, which 21 bring; 32 take 13.79 MWh, and 20 bring 13.05 MWh.
    assert 31 * 0.43103 <= 21 * 0.6525
    assert 32 * 0.43103 > 20 * 0.6525
    (line,) = part(printed, "HOW FAR IT CAN BE MET")[1:]
    assert line.split() == ["long-evening", "lw-b1", "-", "8", "h", "7.75", "h", "0.25", "h"]


def test_every_way_out_is_shown_with_its_margin_and_its_patch_best_first(printed: str, replies: Replies) -> None:
    ways = part(printed, "WAYS OUT")
    words = " ".join(" ".join(ways).split())
    repairs, earned = replies[TRIPPED].answer["repairs"], replies[EVENING].answer["margin"]
    assert {change["lever"] for repair in repairs for change in repair["changes"]} == {
        "commitments",
        "targets",
        "planned_outages",
    }
    shown_margins = [float(line.split()[1]) for line in ways[1:] if re.match(r" +\d+ +\d", line)]
    assert shown_margins == [round(repair["margin"], 2) for repair in repairs] == sorted(shown_margins, reverse=True)
    for repair in repairs:
        assert f"{repair['margin'] - earned:+.2f} {repair['text']}"[:60] in words
        for operation in repair["patch"]:
            assert f"{operation['op']} {operation['path']} {json.dumps(operation['value'])}" in words


def test_the_cured_day_shows_what_moved_and_money_that_adds_up(printed: str, replies: Replies) -> None:
    cured = printed.split("the same day, cured")[1]
    best = replies[TRIPPED].answer["repairs"][0]
    assert best["text"] in " ".join(cured.split())
    was, now = ({asset["id"]: asset["power_mw"] for asset in replies[day].answer["assets"]} for day in (EVENING, CURED))
    moved = {name for name in now if max(abs(a - b) for a, b in zip(was[name], now[name], strict=True)) >= 5e-4}
    drawn = [line.split()[0] for line in part(cured, "SET POINTS") if line.startswith(tuple(now))]
    assert sorted(drawn) == sorted([*moved, *moved])
    assert "lw-b1" in moved
    money = {line.split()[0]: float(line.split()[-1]) for line in part(cured, "MONEY")[1:]}
    assert money["before"] == round(replies[EVENING].answer["margin"], 2)
    assert money["now"] == round(replies[CURED].answer["margin"], 2)
    assert money["difference"] == pytest.approx(money["now"] - money["before"], abs=0.011)


def test_the_answers_of_the_planner_are_shown_as_held(replies: Replies) -> None:
    status, text = shown(replies)
    assert status == 0
    assert "== everything held ==" in text


def test_two_runs_ask_the_same_question() -> None:
    assert scenario.evening_request() == scenario.evening_request()
    assert scenario.tripped_request()["outages"][:-1] == scenario.evening_request()["outages"]


def unmet(first: Document) -> None:
    first["commitments"][0]["met"] = False


def overtold(first: Document) -> None:
    first["commitments"][0]["delivered_hours"] = 9.75


def shortened(first: Document) -> None:
    first["commitments"][0]["delivered_hours"] = 7.75


def unanswered(first: Document) -> None:
    del first["commitments"][0]


def richer(first: Document) -> None:
    first["sites"][0]["totals"]["sales"] += 0.01


def better(first: Document) -> None:
    first["margin"] += 0.01
    first["margin_bound"] += 1.0


def unbounded(first: Document) -> None:
    first["margin_bound"] = None


def unchecked(first: Document) -> None:
    first["verification"]["checks"] = 0


def careless(first: Document) -> None:
    first["cautions"] = []


def violating(first: Document) -> None:
    found = {"rule": "r", "pointer": "/fleet", "amount": 1.0, "unit": "MW", "text": "1 MW above the limit"}
    first["verification"]["violations"] = [found]


def violated(first: Document) -> None:
    first["outcome"] = "violated"


def out_of_time(first: Document) -> None:
    first.clear()
    first.update(outcome="undecided", summary="1 s was not enough")


@pytest.mark.parametrize(
    ("fault", "words"),
    [
        (unmet, "commitment long-evening binds and is not met"),
        (overtold, "9.75 h are said to be kept"),
        (shortened, "called met with 7.75 h of 8 h"),
        (unanswered, "commitment long-evening is not answered"),
        (richer, "sales: the parts add up to"),
        (better, "the totals add up to"),
        (unbounded, "the bound None does not lie above"),
        (unchecked, "nothing was checked"),
        (careless, "the schedule carries no cautions"),
        (violating, "violation: 1 MW above the limit"),
        (violated, "the outcome is violated"),
        (out_of_time, "the first day ended undecided: 1 s was not enough"),
    ],
)
def test_a_first_day_that_does_not_hold_ends_with_1_and_is_named(
    replies: Replies, fault: Callable[[Document], None], words: str
) -> None:
    assert words in complaints(replies, EVENING, fault)


def complaints(replies: Replies, day: str, fault: Callable[[Document], None]) -> str:
    """Spoil the answer of a day, see the demo fail, and return what it says of it."""
    faulty = copy.deepcopy(replies)
    fault(faulty[day].answer)
    status, text = shown(faulty)
    assert status == 1
    return " ".join(text.split("== NOT EVERYTHING HELD ==")[1].split())


def nameless(second: Document) -> None:
    second["conflicts"] = []


def wordless(second: Document) -> None:
    second["summary"] = ""


def feasible(second: Document) -> None:
    second["outcome"] = "feasible"


def cut_short(second: Document) -> None:
    second.update(complete=False, cut_off=["the nearest schedule"])


def wide(second: Document) -> None:
    second["conflicts"][0]["irreducible"] = False


def unmeasured(second: Document) -> None:
    second["attainable"] = []


def incurable(second: Document) -> None:
    second["repairs"] = []


def unverified(second: Document) -> None:
    second["repairs"][1]["verified"] = False


def worst_first(second: Document) -> None:
    second["repairs"].reverse()


def unfitting(second: Document) -> None:
    second["repairs"][2]["patch"] = [{"op": "replace", "path": "/outages/7/to", "value": None}]


def ill_formed(second: Document) -> None:
    second["repairs"][2]["patch"] = [{"op": "replace", "path": "/commitments/0/hours", "value": -1}]


def overbound(second: Document) -> None:
    second["repairs"][0]["margin_bound"] = second["repairs"][0]["margin"] - 1.0


def far_from_any(second: Document) -> None:
    second.update(nearest_schedule=None, no_nearest_schedule="It is too dark.")


def short_of_nothing(second: Document) -> None:
    second["nearest_schedule"]["shortfalls"] = []


def careless_nearest(second: Document) -> None:
    second["nearest_schedule"]["cautions"] = []


@pytest.mark.parametrize(
    ("fault", "words"),
    [
        (nameless, "the diagnosis names no commitment"),
        (wordless, "the diagnosis has no summary"),
        (careless, "the diagnosis carries no cautions"),
        (feasible, "the second day ended feasible"),
        (cut_short, "the diagnosis is not complete: the nearest schedule"),
        (wide, "more is named than needed: /commitments/0, "),
        (unmeasured, "how far long-evening lw-b1 can be met is not said"),
        (incurable, "there is no way out"),
        (unverified, ": not verified"),
        (worst_first, "stands behind what earns less"),
        (unfitting, "its patch gives no job: {'op': 'replace', 'path': '/outages/7/to'"),
        (ill_formed, "its patch gives no job: "),
        (overbound, "lies above its bound"),
        (far_from_any, "there is no nearest schedule: It is too dark."),
        (short_of_nothing, "the nearest schedule does not say what it misses"),
        (careless_nearest, "the nearest schedule carries no cautions"),
    ],
)
def test_a_diagnosis_that_is_not_as_it_should_be_ends_with_1_and_is_named(
    replies: Replies, fault: Callable[[Document], None], words: str
) -> None:
    assert words in complaints(replies, TRIPPED, fault)


def modest(second: Document) -> None:
    best = second["repairs"][0]
    best.update(margin=best["margin"] - 2.0, margin_bound=best["margin"] - 1.0)
    for repair in second["repairs"][1:]:
        repair["margin"] = min(repair["margin"], best["margin"])


def boastful(second: Document) -> None:
    second["repairs"][0]["margin"] += 2.0
    second["repairs"][0]["margin_bound"] += 2.0


@pytest.mark.parametrize(
    ("fault", "words"),
    [(modest, "more than was proven possible"), (boastful, "at most, and")],
)
def test_a_promise_of_a_repair_that_the_cured_day_does_not_bear_out_ends_with_1_and_is_named(
    replies: Replies, fault: Callable[[Document], None], words: str
) -> None:
    assert words in complaints(replies, TRIPPED, fault)


def still_infeasible(third: Document) -> None:
    third.update(outcome="infeasible", summary="It is too short still")


@pytest.mark.parametrize(
    ("fault", "words"),
    [
        (still_infeasible, "the cured day ended infeasible: It is too short still"),
        (unmet, "the cured day: commitment long-evening binds and is not met"),
        (violating, "the cured day: violation: 1 MW above the limit"),
        (careless, "the cured day: the schedule carries no cautions"),
    ],
)
def test_a_cured_day_that_does_not_hold_ends_with_1_and_is_named(
    replies: Replies, fault: Callable[[Document], None], words: str
) -> None:
    assert words in complaints(replies, CURED, fault)


def test_letters_that_the_stream_cannot_write_are_spelt_out(replies: Replies) -> None:
    foreign = copy.deepcopy(replies)
    foreign[TRIPPED].answer["summary"] = "Gr\u00f6\u00dfe \u2265 8 h"
    assert "Gr\\xf6\\xdfe \\u2265 8 h" in shown(foreign)[1]
    assert "Gr\u00f6\u00dfe \u2265 8 h" in shown(foreign, "utf-8")[1]


def test_a_question_without_an_answer_is_a_failure_with_its_words() -> None:
    def refused(_job: Document, _patch: Sequence[Document] = (), /) -> Reply:
        raise NoAnswerError("POST /v1/jobs", "status 500: a fault of ours")

    buffer = BytesIO()
    stream = TextIOWrapper(buffer, encoding="ascii")
    assert running.run(Page(stream), refused) == 1
    stream.flush()
    assert b"no answer to POST /v1/jobs: status 500: a fault of ours" in buffer.getvalue()
