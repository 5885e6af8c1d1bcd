"""Run the demo: ask, print for a person, and tell whether everything held."""

from schemas.schedule import Schedule
from service.demo import expectations, scenario, tripped_day
from service.demo.answering import NoAnswerError
from service.demo.commitments_text import commitments_text, notes_text
from service.demo.day_strip import LEGEND
from service.demo.diagnosis_text import outages_text
from service.demo.money_text import money_text
from service.demo.page import Page
from service.demo.power_text import assets_text, meters_text, peak_text, prices_text, standby_text
from service.demo.proof_text import assumptions_text, proof_text
from service.demo.question import Answer, Asked, ask

PLANNED = ("optimal", "feasible", "violated")


def run(page: Page, answer: Answer) -> int:
    """Plan both days of the scenario, cure the second, print it all; return 0 only if everything held, else 1.

    What did not hold is said by name.
    """
    try:
        first = ask(page, answer, scenario.evening_request(), "a day that can be planned")
        schedule = Schedule.model_validate(first.reply.answer) if first.outcome in PLANNED else None
        faults = _first_day(page, first, schedule)
        faults += tripped_day.show(page, answer, schedule)
    except NoAnswerError as fault:
        faults = [str(fault)]
    page.title("everything held" if not faults else "NOT EVERYTHING HELD")
    if faults:
        page.words(*(f"- {fault}" for fault in faults))
        return 1
    page.words(
        "The first day has a schedule: every binding commitment met, no violation, figures that add up, a bound on "
        "what any other schedule could earn. After the trip it is proven impossible; the answer says why, how far it "
        "can be met and what would cure it; and the best cure, applied and sent again, gives what was promised of it."
    )
    return 0


def _first_day(page: Page, first: Asked, schedule: Schedule | None) -> list[str]:
    job = first.job
    if schedule is None:
        return [f"the first day ended {first.outcome}: {first.reply.answer.get('summary')}"]
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
