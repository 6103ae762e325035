"""What a technician should know of a visit just posted, beside its verdicts.

Cautions refuse nothing and change no verdict; what is refused is decided in `visit_intake`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from service.application.fact_rows import reading_of
from service.application.visit_intake import Accepted
from service.rules import doubtful, readings
from service.rules import facts as rules
from service.rules.status import Status
from service.rules.words import Hazard, VerdictWord

CLOCK_OFFSET_S = 120
"""A handheld's clock further off than this is a caution."""


@dataclass(frozen=True, slots=True)
class Caution:
    """Something the technician should know; `pointer` into the visit, where it has a place."""

    code: str
    reason: str
    pointer: str | None = None


def cautions(
    item: Accepted, found: rules.SectionFacts, status: Status, clock_offset_s: int | None
) -> Iterator[Caution]:
    """What to know of a visit, the gravest first; `found` and `status` are its section's now."""
    wrong_side = any(
        v.hazard == Hazard.WRONG_SIDE and v.verdict == VerdictWord.OUTSIDE for v in status.verdicts
    )
    if item.outside or wrong_side:
        yield Caution(
            "protect_and_report",
            "Outside a wrong-side limit: a train may not be detected. Protect and report under your rules "
            "before adjusting, and keep the settings and readings.",
        )
    if clock_offset_s is not None and abs(clock_offset_s) > CLOCK_OFFSET_S:
        yield Caution("clock_offset", f"The device's clock differs by {clock_offset_s} s from the server's.")
    yield from _reading_cautions(item, found, status)
    yield from _task_cautions(item, found, status)
    if any(visit.visited_at > item.rule.visited_at for visit in readings.counting(found.visits)):
        yield Caution(
            "newer_visit", "A newer visit of this section is stored and decides where both measured."
        )


def _reading_cautions(item: Accepted, found: rules.SectionFacts, status: Status) -> Iterator[Caution]:
    for index, values in enumerate(item.rows):
        if values["doubtful"] is not None:
            yield Caution(values["doubtful"], doubtful.WORDS[values["doubtful"]], f"/readings/{index}")
            continue
        doubt = readings.trust(reading_of(**values), item.rule.visited_on, found.instruments, status.as_of)
        if doubt is not None:
            yield Caution(doubt.code, doubt.reason, f"/readings/{index}/instrument")
    if any(reading.quantity == "drop_shunt" for reading in item.draft.readings):
        yield Caution(
            "rail_surface_not_shown",
            "A clamped shunt does not meet the film that a wheel meets: a drop shunt says nothing of the "
            "rail surface.",
        )


def _task_cautions(item: Accepted, found: rules.SectionFacts, status: Status) -> Iterator[Caution]:
    """Why a task said to be done is not; of a newer visit that tried it as well, nothing is told here."""
    states = {task.task: task for task in status.tasks}
    newer = [v for v in readings.counting(found.visits) if v.visited_at > item.rule.visited_at]
    tried_since = {claim.task for visit in newer for claim in visit.tasks}
    for index, claim in enumerate(item.draft.tasks):
        task = states.get(claim.task)
        if task is None:
            reason = "No task of this name applies to the section; it is kept as said."
            yield Caution("unknown_task", reason, f"/tasks/{index}/task")
        elif claim.done == "done" and claim.task not in tried_since:
            for short in task.reasons:
                yield Caution(short.code, short.reason, f"/tasks/{index}")
