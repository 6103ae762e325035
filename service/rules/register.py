"""What the register itself says of a configuration quantity: lengths, counts, bonds, neighbours, kinds.

Values only, each with the attribute that is lacking; limits are put to them in `verdicts`.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import NamedTuple

from service.rules.editions import Bound, Combination, Limit, Permission
from service.rules.facts import Adjacent, SectionRecord
from service.rules.words import Bonding, Hazard

PERMITTED = "circuit_kind_permitted"
"""Name and quantity of the limit that a book's permitted combinations make."""

ATTRIBUTES = {
    "length": "length_m",
    "points_ends": "points_ends",
    "insulated_joints": "insulated_joints",
    "parallel_bonded_length": "longest_parallel_m",
    "bonds_duplicated": "bonds_duplicated",
}


class Registered(NamedTuple):
    """One value to judge; `value` None where the register lacks `attribute`."""

    test_point: str | None
    value: float | None
    attribute: str


def registered(record: SectionRecord, quantity: str) -> Iterator[Registered]:
    """Every value that a configuration quantity has in the register: one, or one for each boundary.

    Yes and no are 1 and 0. A boundary without a neighbour has no value.
    """
    if quantity == "adjacent_opposed":
        for adjacent in record.adjacent:
            if adjacent.neighbour is not None:
                yield _opposed(adjacent)
    elif quantity == "interrupter":
        yield _interrupter(record)
    elif quantity in ATTRIBUTES:
        value = getattr(record, ATTRIBUTES[quantity])
        if value is None and record.bonding is Bonding.SERIES:
            value = {"parallel_bonded_length": 0.0, "bonds_duplicated": True}.get(quantity)
        yield Registered(None, None if value is None else float(value), ATTRIBUTES[quantity])
    else:
        yield Registered(None, None, quantity)


def _opposed(adjacent: Adjacent) -> Registered:
    """Across a joint polarity or phase must differ, across a tuned zone frequency; as text either way."""
    point = f"boundary:{adjacent.boundary}"
    ours, theirs = adjacent.polarity, adjacent.neighbour_polarity
    if ours is None or theirs is None:
        return Registered(point, None, "polarity" if ours is None else "neighbour's polarity")
    return Registered(point, float(ours.strip().casefold() != theirs.strip().casefold()), "polarity")


def _interrupter(record: SectionRecord) -> Registered:
    if record.interrupter_required is False or record.interrupter_fitted is True:
        return Registered(None, 1.0, "interrupter_fitted")
    if record.interrupter_required is None:
        return Registered(None, None, "interrupter_required")
    fitted = record.interrupter_fitted
    return Registered(None, None if fitted is None else 0.0, "interrupter_fitted")


def permission(record: SectionRecord, combinations: tuple[Combination, ...]) -> Permission | None:
    """Look the circuit kind under its traction up among the permitted combinations; None if there are none.

    Decided by those that permit it, else by those of this kind and traction, else by all.
    """
    if not combinations:
        return None
    of_kind = tuple(
        one
        for one in combinations
        if one.circuit_kind is record.circuit_kind and one.traction is record.traction
    )
    rails = record.return_rails
    permitting = tuple(one for one in of_kind if one.return_rails is None or rails in one.return_rails)
    if permitting:
        return Permission(True, _limit(permitting))
    if of_kind and rails is None:
        return Permission(None, _limit(of_kind))
    return Permission(False, _limit(of_kind or combinations))


def _limit(by: tuple[Combination, ...]) -> Limit:
    return Limit(
        limit=PERMITTED,
        quantity=PERMITTED,
        minimum=Bound(1.0, Hazard.WRONG_SIDE),
        maximum=None,
        clause="; ".join(dict.fromkeys(one.clause for one in by)),
        source="; ".join(dict.fromkeys(one.source for one in by)),
        confirmed=all(one.confirmed for one in by),
        standing="; ".join(dict.fromkeys(one.standing for one in by)),
        test_points=(),
    )
