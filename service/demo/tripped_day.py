"""The day that cannot be met: why, how far, the ways out, and the best of them applied and sent again."""

from schemas import json_patch
from schemas.diagnosis import Diagnosis, Repair
from schemas.schedule import Schedule
from service.demo import expectations, scenario
from service.demo.commitments_text import commitments_text, notes_text
from service.demo.diagnosis_text import attainable_text, conflicts_text, nearest_text, outages_text, without_text
from service.demo.money_text import difference_text
from service.demo.page import Page
from service.demo.power_text import assets_text, moved
from service.demo.proof_text import assumptions_text, proof_text
from service.demo.question import Answer, Asked, Document, ask
from service.demo.ways_text import margins_text, operations_text, ways_text


def show(page: Page, answer: Answer, untroubled: Schedule | None) -> list[str]:
    """Print the diagnosis and the cured day; return what does not hold. `untroubled`: the plan before the trip."""
    refused = ask(page, answer, scenario.tripped_request(), "the same day after a trip")
    if refused.outcome != "infeasible":
        return [f"the second day ended {refused.outcome}, and should be proven infeasible"]
    diagnosis = Diagnosis.model_validate(refused.reply.answer)
    _show_refusal(page, refused, diagnosis, untroubled)
    faults = list(expectations.shortcomings_of_refusal(refused.job, refused.reply.request, diagnosis))
    if faults:
        return faults
    best = diagnosis.repairs[0]
    cured = ask(page, answer, _cured_request(refused.reply.request, best), "the same day, cured", best.patch)
    if cured.outcome not in ("optimal", "feasible", "violated"):
        return [f"the cured day ended {cured.outcome}: {cured.reply.answer.get('summary')}"]
    schedule = Schedule.model_validate(cured.reply.answer)
    _show_cure(page, cured, schedule, best)
    if untroubled is not None:
        _show_difference(page, cured, untroubled, schedule)
    _show_proof(page, cured, schedule, best)
    return list(expectations.shortcomings_of_cure(cured.job, schedule, best))


def _cured_request(request: Document, repair: Repair) -> Document:
    """Apply a repair to the request as the service keeps it; only its label is changed besides."""
    changed: Document = json_patch.patched(request, repair.patch)
    return {**changed, "label": f"{request['label']}, cured"}


def _show_refusal(page: Page, refused: Asked, diagnosis: Diagnosis, untroubled: Schedule | None) -> None:
    page.words(*diagnosis.cautions)
    page.words("Out of service, all else as before:", *outages_text(refused.job))
    page.heading("It cannot be met, proven")
    page.words(diagnosis.summary)
    page.heading("What stands against what, with its place in the request")
    page.words(*conflicts_text(diagnosis))
    page.heading("How far it can be met, the other commitments kept")
    page.table(attainable_text(diagnosis))
    page.words(*without_text(diagnosis))
    currency = refused.job.window.currency if refused.job.window else ""
    if diagnosis.repairs:
        page.heading("Ways out, best margin first; each is enough alone")
        page.table(ways_text(diagnosis, untroubled.margin if untroubled else None))
        page.words(*margins_text(diagnosis, currency))
    page.heading("If nothing is changed, the nearest schedule misses")
    if diagnosis.nearest_schedule is not None:
        page.words(*nearest_text(diagnosis.nearest_schedule, currency))
    else:
        page.words(f"There is none. {diagnosis.no_nearest_schedule or ''}")
    known = untroubled.assumptions if untroubled else []
    if new := [assumption for assumption in diagnosis.assumptions if assumption not in known]:
        page.heading("Taken as read, besides what was before the trip")
        page.words(*assumptions_text(new))
    page.table([""])


def _show_cure(page: Page, cured: Asked, schedule: Schedule, repair: Repair) -> None:
    page.words(*schedule.cautions)
    page.words(f"Way 1, applied to the request as the service keeps it, and sent again: {repair.text}.")
    page.table(f"  {operation}" for operation in operations_text(repair))
    page.heading("Commitments")
    page.table(commitments_text(cured.job, schedule))
    page.words(*notes_text(cured.job))


def _show_difference(page: Page, cured: Asked, untroubled: Schedule, schedule: Schedule) -> None:
    changed = moved(untroubled, schedule)
    page.heading("Set points that are not those before the trip; all other assets keep theirs")
    page.words("Before the trip:")
    page.table(assets_text(cured.job, untroubled, changed))
    page.words("Now:")
    page.table(assets_text(cured.job, schedule, changed))
    page.words(*outages_text(cured.job))
    page.heading("Money beside that before the trip, each figure rounded on its own; costs are negative")
    page.table(difference_text(untroubled, schedule, ("before", "now")))


def _show_proof(page: Page, cured: Asked, schedule: Schedule, repair: Repair) -> None:
    page.heading("Proof")
    page.words(
        f"The diagnosis promised a margin of {repair.margin:.2f} {schedule.currency}, and proved that no more than "
        f"{repair.margin_bound:.2f} can be had.",
        *proof_text(cured.job, schedule),
    )
    page.table([""])
