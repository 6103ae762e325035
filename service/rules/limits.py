"""Which edition is in force on a day, and what of it applies to a section.

The types are laid in `editions` and the checks of a book in `consistency`; both are offered here
too, as the one place to import limit books from. Files and JSON are read elsewhere.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Collection, Iterable, Iterator
from datetime import date
from typing import TypeVar

from service.rules.consistency import faults
from service.rules.editions import (
    Applicability,
    Applying,
    BookFault,
    Bound,
    Bounds,
    Combination,
    Edition,
    Limit,
    Shortened,
    Task,
    YearlyWindow,
)
from service.rules.facts import SectionRecord
from service.rules.register import permission
from service.rules.words import EditionState

__all__ = [
    "Applicability",
    "Applying",
    "BookFault",
    "Bound",
    "Bounds",
    "Combination",
    "Edition",
    "Limit",
    "Shortened",
    "Task",
    "YearlyWindow",
    "applying",
    "faults",
    "in_force",
    "next_change",
]


def in_force(editions: Iterable[Edition], day: date) -> Edition | None:
    """The edition in force on `day`: the last to take effect, unless withdrawn by then.

    A withdrawn edition does not bring the one before it back: that ended when this one was issued.
    One withdrawn before it took effect never was in force.
    """
    begun = [edition for edition in editions if _begins(edition, date.min, day)]
    if not begun:
        return None
    newest = max(begun, key=lambda edition: (edition.effective_on, edition.edition))
    return None if newest.withdrawn_on is not None and newest.withdrawn_on <= day else newest


def next_change(editions: Iterable[Edition], day: date) -> date | None:
    """The first day after `day` on which another edition, or none, is in force; None if never."""
    editions = tuple(editions)
    now = in_force(editions, day)
    days = [edition.effective_on for edition in editions if _begins(edition, day, date.max)]
    if now is not None and now.withdrawn_on is not None:
        days.append(now.withdrawn_on)
    return min((day for day in days if day is not None), default=None)


def _begins(edition: Edition, after: date, until: date) -> bool:
    """Whether it takes effect after one day and not after another, and is not withdrawn before that."""
    effective, withdrawn = edition.effective_on, edition.withdrawn_on
    if edition.state is EditionState.DRAFT or effective is None:
        return False
    if edition.state is EditionState.WITHDRAWN and withdrawn is None:
        return False
    return after < effective <= until and (withdrawn is None or effective < withdrawn)


def applying(edition: Edition, record: SectionRecord) -> Applying:
    """What of `edition` concerns the section, each with the attribute that the register lacks.

    Something is left out only if the register says that it does not apply; where the register is
    silent it stays, with the attribute's name. Worked out once for each distinct profile.
    """
    profile = _profile(edition, record)
    found = edition.profiles.get(profile)
    if found is None:
        found = Applying(
            limits=tuple(_kept(edition.limits, record)),
            tasks=tuple(_kept(edition.tasks, record)),
            permission=permission(record, edition.combinations),
        )
        edition.profiles[profile] = found
    return found


def _profile(edition: Edition, record: SectionRecord) -> tuple[object, ...]:
    length, current, points = record.length_m, record.catenary_current_a, record.points_ends
    return (
        record.circuit_kind,
        record.traction,
        record.return_rails,
        record.place,
        record.sleepers,
        record.relay_type,
        record.receivers,
        record.choke,
        None if points is None else points > 0,
        None if length is None else bisect_right(edition.length_cuts_m, length),
        None if current is None else bisect_right(edition.catenary_cuts_a, current),
    )


Entry = TypeVar("Entry", Limit, Task)


def _kept(entries: Iterable[Entry], record: SectionRecord) -> Iterator[tuple[Entry, str | None]]:
    for entry in entries:
        answers = tuple(_answers(entry.applies, record))
        if all(answer is not False for _, answer in answers):
            yield entry, next((attribute for attribute, answer in answers if answer is None), None)


def _answers(applies: Applicability, record: SectionRecord) -> Iterator[tuple[str, bool | None]]:
    """Whether each attribute asked for fits; None where the register is silent."""
    yield "circuit_kind", _among(record.circuit_kind, applies.circuit_kinds)
    yield "traction", _among(record.traction, applies.tractions)
    yield "return_rails", _among(record.return_rails, applies.return_rails)
    yield "place", _among(record.place, applies.places)
    yield "sleepers", _among(record.sleepers, applies.sleepers)
    yield "relay_type", _among(record.relay_type, applies.relay_types)
    yield "receivers", _among(record.receivers, applies.receivers)
    yield "choke", _among(record.choke, None if applies.choke is None else {applies.choke})
    points = None if record.points_ends is None else record.points_ends > 0
    yield "points_ends", _among(points, None if applies.points is None else {applies.points})
    yield "length_m", _between(record.length_m, applies.length_from_m, applies.length_below_m)
    current = record.catenary_current_a
    yield "catenary_current_a", _between(current, applies.catenary_from_a, applies.catenary_below_a)


def _among(value: object, wanted: Collection[object] | None) -> bool | None:
    if wanted is None:
        return True
    return None if value is None else value in wanted


def _between(value: float | None, start: float | None, below: float | None) -> bool | None:
    if start is None and below is None:
        return True
    if value is None:
        return None
    return (start is None or value >= start) and (below is None or value < below)
