"""The demo as a person sees it, and each way in which it must fail."""

import copy
import re
from collections.abc import Callable
from io import BytesIO, TextIOWrapper
from math import fsum

import pytest

from schemas.cautions import CAUTIONS
from service.demo import running, scenario
from service.demo.answering import NoAnswerError
from service.demo.page import Page
from tests.service.demo.conftest import Answers, Document

WIDTH = 100


def shown(answers: Answers, encoding: str = "ascii") -> tuple[int, str]:
    """Print the demo with answers that are already there; return its status and what it printed."""
    buffer = BytesIO()
    stream = TextIOWrapper(buffer, encoding=encoding)
    status = running.run(Page(stream), lambda request: copy.deepcopy(answers[request["label"]]))
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


def test_cautions_stand_beside_the_schedule_and_beside_the_refusal(printed: str) -> None:
    words = " ".join(printed.split())
    assert [words.count(caution) for caution in CAUTIONS] == [2, 2]


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
    assert "lw-b1: forced outage from 05:40 until 19:30" in words
    # 19:30 to midnight: by hand.
    assert "at most 4.5 h" in words
    assert "at /commitments/0 of the request" in words


def test_the_answers_of_the_planner_are_shown_as_held(answers: Answers) -> None:
    status, text = shown(answers)
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
    answers: Answers, fault: Callable[[Document], None], words: str
) -> None:
    faulty = copy.deepcopy(answers)
    fault(faulty[scenario.evening_request()["label"]])
    status, text = shown(faulty)
    assert status == 1
    assert words in " ".join(text.split("== NOT EVERYTHING HELD ==")[1].split())


def nameless(second: Document) -> None:
    second["conflicts"] = []


def wordless(second: Document) -> None:
    second["summary"] = ""


def feasible(second: Document) -> None:
    second["outcome"] = "feasible"


@pytest.mark.parametrize(
    ("fault", "words"),
    [
        (nameless, "the diagnosis names no commitment"),
        (wordless, "the diagnosis has no summary"),
        (careless, "the diagnosis carries no cautions"),
        (feasible, "the second day ended feasible"),
    ],
)
def test_a_second_day_that_is_not_refused_as_it_should_ends_with_1_and_is_named(
    answers: Answers, fault: Callable[[Document], None], words: str
) -> None:
    faulty = copy.deepcopy(answers)
    fault(faulty[scenario.tripped_request()["label"]])
    status, text = shown(faulty)
    assert status == 1
    assert words in " ".join(text.split("== NOT EVERYTHING HELD ==")[1].split())


def test_letters_that_the_stream_cannot_write_are_spelt_out(answers: Answers) -> None:
    foreign = copy.deepcopy(answers)
    foreign[scenario.tripped_request()["label"]]["summary"] = "Gr\u00f6\u00dfe \u2265 8 h"
    assert "Gr\\xf6\\xdfe \\u2265 8 h" in shown(foreign)[1]
    assert "Gr\u00f6\u00dfe \u2265 8 h" in shown(foreign, "utf-8")[1]


def test_a_question_without_an_answer_is_a_failure_with_its_words() -> None:
    def refused(_request: Document) -> Document:
        raise NoAnswerError("POST /v1/jobs", "status 500: a fault of ours")

    buffer = BytesIO()
    stream = TextIOWrapper(buffer, encoding="ascii")
    assert running.run(Page(stream), refused) == 1
    stream.flush()
    assert b"no answer to POST /v1/jobs: status 500: a fault of ours" in buffer.getvalue()
