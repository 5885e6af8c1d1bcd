"""Run the demo: ask, print for a person, and tell whether everything held."""

from collections.abc import Callable
from typing import Any

from schemas.diagnosis import Diagnosis
from schemas.job import ScheduleJob
from schemas.reading import read_job
from schemas.schedule import Schedule
from service.demo import expectations, scenario
from service.demo.answering import NoAnswerError
from service.demo.commitments_text import commitments_text, notes_text
from service.demo.day_strip import LEGEND
from service.demo.diagnosis_text import diagnosis_text, outages_text
from service.demo.money_text import money_text
from service.demo.page import Page
from service.demo.power_text import assets_text, meters_text, peak_text, prices_text, standby_text
from service.demo.proof_text import assumptions_text, proof_text

Document = dict[str, Any]
Answering = Callable[[Document], Document]


def run(page: Page, answer: Answering) -> int:
    """Plan both days of the scenario and print them; return 0 only if everything held, 1 with the reasons otherwise."""
    try:
        faults = [*_evening(page, answer), *_tripped(page, answer)]
    except NoAnswerError as fault:
        faults = [str(fault)]
    page.title("everything held" if not faults else "NOT EVERYTHING HELD")
    if faults:
        page.words(*(f"- {fault}" for fault in faults))
        return 1
    page.words(
        "The first day has a schedule: every binding commitment met, no violation, figures that add up, a bound on "
        "what any other schedule could earn. The second day is proven impossible, and the answer says why."
    )
    return 0


def _evening(page: Page, answer: Answering) -> list[str]:
    job, document = _ask(page, answer, scenario.evening_request(), "a day that can be planned")
    if document["outcome"] not in ("optimal", "feasible", "violated"):
        return [f"the first day ended {document['outcome']}: {document.get('summary')}"]
    schedule = Schedule.model_validate(document)
    page.words(*schedule.cautions)
    page.heading("Market")
    page.words(f"Invented prices ({schedule.price_basis}), {schedule.currency}/MWh:")
    page.table(prices_text(job, schedule))
    page.heading("Commitments")
    page.table(commitments_text(job, schedule))
    page.words(*notes_text(job))
    page.heading("Stores and loads")
    page.table(assets_text(job, schedule))
    page.words(*standby_text(job), *outages_text(job))
    page.heading("Meters")
    page.table(meters_text(job, schedule))
    page.words(LEGEND)
    page.heading("Set points of the two dearest hours, mean power of each interval, + out to the grid")
    page.table(peak_text(job, schedule))
    page.heading("Money, each figure rounded on its own; costs are negative")
    page.table(money_text(schedule))
    page.heading("Proof")
    page.words(*proof_text(job, schedule))
    page.heading("Taken as read")
    page.words(*assumptions_text(schedule.assumptions))
    page.table([""])
    return list(expectations.shortcomings(job, schedule))


def _tripped(page: Page, answer: Answering) -> list[str]:
    job, document = _ask(page, answer, scenario.tripped_request(), "the same day after a trip")
    if document["outcome"] != "infeasible":
        return [f"the second day ended {document['outcome']}, and should be proven infeasible"]
    diagnosis = Diagnosis.model_validate(document)
    page.words("Out of service, all else as before:", *outages_text(job))
    page.heading("Why")
    page.words(*diagnosis_text(diagnosis))
    page.heading("Taken as read")
    page.words(*assumptions_text(diagnosis.assumptions))
    page.table([""])
    page.words(*diagnosis.cautions)
    page.table([""])
    return list(expectations.shortcomings_of_refusal(job, diagnosis))


def _ask(page: Page, answer: Answering, request: Document, what: str) -> tuple[ScheduleJob, Document]:
    job = read_job(request)
    if not isinstance(job, ScheduleJob) or job.window is None or job.fleet is None:
        raise ValueError("the scenario asks for a schedule, with fleet and window inline")
    page.title(f"{job.fleet.name}: {what}")
    page.words(
        f"{job.label}, {job.window.start:%A %Y-%m-%d}, {job.window.timezone} time, {job.window.intervals} intervals of "
        f"{job.window.interval.total_seconds() / 60:g} minutes. An invented fleet."
    )
    return job, answer(request)
