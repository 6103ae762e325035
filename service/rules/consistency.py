"""Whether a limit book is consistent in itself: every fault by name, with its path.

Only what can be seen in the edition alone. Whether a figure is right for a railway is for its people to
check; units are settled where the book is read.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from datetime import date
from math import isfinite

from service.rules.bounds import resolve
from service.rules.editions import Applicability, BookFault, Bound, Combination, Edition, Limit, Task
from service.rules.evidence import RATED
from service.rules.intervals import add
from service.rules.quantities import QUANTITIES, Quantity
from service.rules.register import PERMITTED
from service.rules.words import RelativeTo

Path = tuple[str | int, ...]

SOME_DAY = date(2000, 1, 1)
"""Any day to compare the lengths of durations by."""

SETS = ("circuit_kinds", "tractions", "return_rails", "places", "sleepers", "relay_types", "receivers")
BANDS = (("length_from_m", "length_below_m"), ("catenary_from_a", "catenary_below_a"))


def faults(edition: Edition) -> tuple[BookFault, ...]:
    """Everything that makes an edition contradictory, double or impossible to judge by; empty if nothing."""
    found: list[BookFault] = []
    for index, limit in enumerate(edition.limits):
        found += _limit(("limits", index), limit)
    found += _between_limits(edition.limits)
    for index, task in enumerate(edition.tasks):
        found += _task(("tasks", index), task)
    found += _between_tasks(edition.tasks)
    found += _combinations(edition.combinations)
    dry = edition.dry_ballast_ohm_km
    if dry is not None and not (isfinite(dry) and dry > 0):
        found.append(_fault(("dry_ballast_ohm_km",), "impossible", "a dry ballast resistance is over 0 Ω·km"))
    return tuple(found)


def _fault(path: Path, code: str, reason: str) -> BookFault:
    return BookFault(path, code, reason)


def _sourced(path: Path, entry: Limit | Task | Combination) -> Iterator[BookFault]:
    for name in ("clause", "source", "standing"):
        if not getattr(entry, name).strip():
            yield _fault((*path, name), "missing", f"a {name} is needed, so that a verdict can be defended")


def _limit(path: Path, limit: Limit) -> Iterator[BookFault]:
    yield from _sourced(path, limit)
    yield from _applies((*path, "applies"), limit.applies)
    quantity = QUANTITIES.get(limit.quantity)
    if quantity is None:
        yield _fault((*path, "quantity"), "unknown_quantity", f"no such quantity: {limit.quantity}")
        return
    if PERMITTED in (limit.limit, limit.quantity):
        reason = "what circuit kind is permitted is said by the book's combinations, not by a limit"
        yield _fault((*path, "limit"), "reserved", reason)
    if limit.minimum is None and limit.maximum is None:
        yield _fault(path, "no_bound", "neither a minimum nor a maximum")
    for side, bound in (("minimum", limit.minimum), ("maximum", limit.maximum)):
        if bound is not None:
            yield from _bound((*path, side), bound, limit, quantity)
    yield from _room(path, limit)
    yield from _conditions(path, limit, quantity)


def _bound(path: Path, bound: Bound, limit: Limit, quantity: Quantity) -> Iterator[BookFault]:
    near = bound.near_margin
    if near is not None and not (isfinite(near) and near >= 0):
        yield _fault((*path, "near_margin"), "impossible", "a near margin is 0 or more")
    if not isfinite(bound.value):
        yield _fault((*path, "value"), "impossible", "not a finite number")
    elif limit.relative_to is not None:
        if bound.value <= 0:
            yield _fault((*path, "value"), "impossible", "a relative bound is a factor over 0")
    elif not quantity.lowest <= bound.value <= quantity.highest:
        reason = f"{quantity.quantity} lies between {quantity.lowest} and {quantity.highest} {quantity.unit}"
        yield _fault((*path, "value"), "impossible", reason)


def _room(path: Path, limit: Limit) -> Iterator[BookFault]:
    """Whether both bounds leave anything inside, and anything within. Relative margins need a base."""
    if limit.minimum is None or limit.maximum is None:
        return
    if limit.minimum.value > limit.maximum.value:
        yield _fault((*path, "minimum"), "contradictory", "the minimum is over the maximum")
    elif limit.relative_to is None:
        bounds = resolve(limit, None)
        low = bounds.min if bounds.near_min is None else bounds.near_min
        high = bounds.max if bounds.near_max is None else bounds.near_max
        if low is not None and high is not None and low > high:
            yield _fault(path, "nothing_within", "the near margins leave no value within")


def _conditions(path: Path, limit: Limit, quantity: Quantity) -> Iterator[BookFault]:
    if quantity.from_register:
        measured = (
            ("test_points", bool(limit.test_points)),
            ("relative_to", limit.relative_to is not None),
            ("ballast_dry", limit.ballast_dry),
            ("shunt_ohm", limit.shunt_ohm is not None),
        )
        for name, given in measured:
            if given:
                yield _fault(
                    (*path, name), "not_measured", f"{quantity.quantity} is judged from the register"
                )
        return
    yield from _test_points((*path, "test_points"), limit.test_points)
    if limit.relative_to not in (None, RelativeTo.SET_UP) and (limit.relative_to, quantity.unit) not in RATED:
        reason = f"a relay has no rated value in {quantity.unit} to be a multiple of"
        yield _fault((*path, "relative_to"), "no_rated_base", reason)
    if limit.shunt_ohm is not None:
        if not quantity.needs_shunt:
            yield _fault((*path, "shunt_ohm"), "no_shunt", f"{quantity.quantity} is measured without a shunt")
        elif not (isfinite(limit.shunt_ohm) and limit.shunt_ohm >= 0):
            yield _fault((*path, "shunt_ohm"), "impossible", "a resistance is 0 Ω or more")


def _test_points(path: Path, points: tuple[str, ...] | None) -> Iterator[BookFault]:
    if points == ():
        yield _fault(path, "no_test_point", "a quantity that is measured needs a test point")
    for point in points or ():
        if point not in ("feed_end", "relay_end", "middle", "legs") and not point.startswith("leg:"):
            yield _fault(path, "unknown_test_point", f"no such test point: {point}")


def _between_limits(limits: Sequence[Limit]) -> Iterator[BookFault]:
    names: set[str] = set()
    grounds: dict[object, list[Limit]] = {}
    for index, limit in enumerate(limits):
        path = ("limits", index)
        if limit.limit in names:
            yield _fault(
                (*path, "limit"), "duplicate", f"a limit of this name is there already: {limit.limit}"
            )
        names.add(limit.limit)
        ground = grounds.setdefault((limit.quantity, limit.relative_to, limit.shunt_ohm, limit.applies), [])
        for earlier in ground:
            yield from _against(path, limit, earlier)
        ground.append(limit)


def _against(path: Path, limit: Limit, earlier: Limit) -> Iterator[BookFault]:
    """What two limits on the same quantity of the same sections say twice, or against each other."""
    if limit.test_points and earlier.test_points and set(limit.test_points).isdisjoint(earlier.test_points):
        return
    for side in ("minimum", "maximum"):
        both = getattr(earlier, side) is not None and getattr(limit, side) is not None
        if both and earlier.ballast_dry == limit.ballast_dry:
            reason = f"{earlier.limit} has a {side} for the same sections and test points already"
            yield _fault((*path, side), "duplicate", reason)
    for low, high in ((earlier, limit), (limit, earlier)):
        if low.minimum is not None and high.maximum is not None and low.minimum.value > high.maximum.value:
            reason = f"the minimum of {low.limit} is over the maximum of {high.limit}"
            yield _fault(path, "contradictory", reason)


def _applies(path: Path, applies: Applicability) -> Iterator[BookFault]:
    for name in SETS:
        if getattr(applies, name) is not None and not getattr(applies, name):
            yield _fault((*path, name), "applies_to_nothing", "an empty list applies to no section")
    for start, end in BANDS:
        start_value, end_value = getattr(applies, start), getattr(applies, end)
        for name, value in ((start, start_value), (end, end_value)):
            if value is not None and not isfinite(value):
                yield _fault((*path, name), "impossible", "not a finite number")
        if start_value is not None and end_value is not None and not start_value < end_value:
            yield _fault((*path, end), "applies_to_nothing", "the band ends where it begins, or before")


def _task(path: Path, task: Task) -> Iterator[BookFault]:
    yield from _sourced(path, task)
    yield from _applies((*path, "applies"), task.applies)
    for name in ("interval", "grace"):
        duration = getattr(task, name)
        if duration is not None and not _is_duration(duration):
            yield _not_a_duration((*path, name))
    if task.interval is not None and task.window is not None:
        yield _fault((*path, "window"), "contradictory", "either an interval or a yearly window")
    if task.grace is not None and task.interval is None and task.window is None and not task.after_work:
        yield _fault((*path, "grace"), "contradictory", "grace with nothing that falls due")
    if task.window is not None:
        yield from _window((*path, "window"), task.window.first, task.window.last)
    for name in ("needs", "needs_anywhere"):
        yield from _needs((*path, name), getattr(task, name))
    if task.shortened is not None:
        yield from _shortened((*path, "shortened"), task)


def _is_duration(text: str) -> bool:
    try:
        return add(SOME_DAY, text) > SOME_DAY
    except ValueError:
        return False


def _not_a_duration(path: Path) -> BookFault:
    return _fault(path, "bad_duration", "whole years, months, weeks and days are needed, such as P3M or P4Y")


def _window(path: Path, first: tuple[int, int], last: tuple[int, int]) -> Iterator[BookFault]:
    for name, (month, day) in (("first", first), ("last", last)):
        try:
            date(SOME_DAY.year, month, day)
        except ValueError:
            yield _fault((*path, name), "impossible", "no such day of the year")
    if first > last:
        yield _fault((*path, "last"), "contradictory", "a yearly window does not run across New Year")


def _needs(path: Path, quantities: Iterable[str]) -> Iterator[BookFault]:
    for index, name in enumerate(quantities):
        yield from _measured((*path, index), name)


def _measured(path: Path, name: str) -> Iterator[BookFault]:
    if name not in QUANTITIES:
        yield _fault(path, "unknown_quantity", f"no such quantity: {name}")
    elif QUANTITIES[name].from_register:
        yield _fault(path, "not_measured", f"{name} is judged from the register")


def _shortened(path: Path, task: Task) -> Iterator[BookFault]:
    shortened = task.shortened
    assert shortened is not None
    yield from _measured((*path, "quantity"), shortened.quantity)
    if not (isfinite(shortened.under) and shortened.under > 0):
        yield _fault((*path, "under"), "impossible", "the value to stay over is over 0")
    if not _is_duration(shortened.interval):
        yield _not_a_duration((*path, "interval"))
    elif task.interval is None:
        yield _fault(path, "contradictory", "there is no interval to shorten")
    elif _is_duration(task.interval) and add(SOME_DAY, shortened.interval) >= add(SOME_DAY, task.interval):
        yield _fault((*path, "interval"), "contradictory", "not shorter than the interval")


def _between_tasks(tasks: Sequence[Task]) -> Iterator[BookFault]:
    seen = set()
    for index, task in enumerate(tasks):
        if (task.task, task.applies) in seen:
            reason = f"a task of this name is there already for the same sections: {task.task}"
            yield _fault(("tasks", index, "task"), "duplicate", reason)
        seen.add((task.task, task.applies))


def _combinations(permitted: Sequence[Combination]) -> Iterator[BookFault]:
    seen = set()
    for index, one in enumerate(permitted):
        path = ("combinations", index)
        yield from _sourced(path, one)
        if one.return_rails is not None and not one.return_rails:
            yield _fault((*path, "return_rails"), "applies_to_nothing", "an empty list permits no section")
        same = (one.circuit_kind, one.traction, one.return_rails)
        if same in seen:
            yield _fault(path, "duplicate", "this combination is there already")
        seen.add(same)
