"""Layouts: legs of two rails, bonds, joints, a feed and a relay, anywhere.

What a layout is, that it hangs together, and how it is changed by a fault. Its equations are in
`network`; which faults a relay reveals is asked in `bonding`.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, replace

import numpy as np

from service.electrical.arrays import Path, not_negative, passive, positive, positive_or_infinite
from service.errors import NonPhysicalError

# Beside the ohms of a feed or a relay the nodal equations lose a shorter piece of rail in rounding.
_SHORTEST_M = 1e-3


@dataclass(frozen=True, slots=True)
class Leg:
    """A length of track: rail 1 from `start[0]` to `end[0]`, rail 2 from `start[1]` to `end[1]`.

    `offset_m` is where it begins on the whole leg of this name, after a rail was cut [m].
    """

    name: str
    start: tuple[str, str]
    end: tuple[str, str]
    length_m: float
    offset_m: float = 0.0


@dataclass(frozen=True, slots=True)
class Bond:
    """A bond between two terminals and its resistance, greater than zero [ohm]."""

    name: str
    between: tuple[str, str]
    resistance_ohm: float


@dataclass(frozen=True, slots=True)
class Joint:
    """An insulated joint between two terminals: nothing, until it is shorted."""

    name: str
    between: tuple[str, str]


@dataclass(frozen=True, slots=True)
class LayoutFeed:
    """Emf [V] behind an impedance, not zero [ohm], across two terminals."""

    across: tuple[str, str]
    emf_v: float
    series_ohm: complex


@dataclass(frozen=True, slots=True)
class LayoutRelay:
    """A relay across two terminals, with all that stands before it [ohm, V, V]."""

    across: tuple[str, str]
    impedance_ohm: complex
    pick_up_v: float
    drop_away_v: float


@dataclass(frozen=True, slots=True)
class Layout:
    """A circuit through points, in plain numbers. Checked when made.

    Attributes
    ----------
    frequency_hz : float
        0 for DC [Hz].
    loop_ohm_per_km : complex
        Of two rails [ohm/km].
    ballast_ohm_km : float
        From rail to rail, `math.inf` allowed [ohm·km].
    rail_to_earth_ohm_km : float, optional
        From each rail to earth, a path beside the ballast; None where it is not known [ohm·km].
    legs, bonds, joints : tuple
        By name.
    feed : LayoutFeed
        The only source.
    relay : LayoutRelay
        The only relay.

    Raises
    ------
    NonPhysicalError
        With the path of the value that no real layout has.
    """

    frequency_hz: float
    loop_ohm_per_km: complex
    ballast_ohm_km: float
    rail_to_earth_ohm_km: float | None
    legs: tuple[Leg, ...]
    bonds: tuple[Bond, ...]
    joints: tuple[Joint, ...]
    feed: LayoutFeed
    relay: LayoutRelay

    def __post_init__(self) -> None:
        """Refuse what no real layout has."""
        not_negative(("frequency_hz",), self.frequency_hz)
        positive_or_infinite(("ballast_ohm_km",), self.ballast_ohm_km)
        if self.rail_to_earth_ohm_km is not None:
            positive_or_infinite(("rail_to_earth_ohm_km",), self.rail_to_earth_ohm_km)
        impedances: tuple[tuple[Path, complex], ...] = (
            (("loop_ohm_per_km",), self.loop_ohm_per_km),
            (("feed", "series_ohm"), self.feed.series_ohm),
            (("relay", "impedance_ohm"), self.relay.impedance_ohm),
        )
        for path, ohm in impedances:
            passive(path, ohm)
            positive(path, abs(ohm))
            if self.frequency_hz == 0 and np.imag(ohm) != 0:
                raise NonPhysicalError(path, "there is no reactance at 0 Hz")
        positive(("feed", "emf_v"), self.feed.emf_v)
        positive(("relay", "pick_up_v"), self.relay.pick_up_v)
        positive(("relay", "drop_away_v"), self.relay.drop_away_v)
        if self.relay.drop_away_v > self.relay.pick_up_v:
            raise NonPhysicalError(("relay", "drop_away_v"), "a relay does not drop away over its pick-up")
        for at, leg in enumerate(self.legs):
            positive(("legs", at, "length_m"), leg.length_m)
            if leg.length_m < _SHORTEST_M:
                raise NonPhysicalError(("legs", at, "length_m"), "a leg is at least a millimetre long")
        for at, bond in enumerate(self.bonds):
            positive(("bonds", at, "resistance_ohm"), bond.resistance_ohm)


def check_connected(layout: Layout) -> None:
    """Refuse a layout that does not hang together, in words and with the names.

    Both rails of every leg, and both sides of the relay, must be joined by metal to one side of the
    feed or the other, and nothing to both.

    Raises
    ------
    NonPhysicalError
        A name used twice; a short circuit; a feed or relay left floating; a leg to nowhere.
    """
    _check_names(layout)
    metal = conductors(layout)
    plus, minus = (metal.get(terminal) for terminal in layout.feed.across)
    if plus is None or minus is None:
        raise NonPhysicalError(("feed", "across"), "the feed is left floating: no leg or bond reaches it")
    if plus == minus:
        _name_short(layout)
    for side, terminal in enumerate(layout.relay.across):
        if metal.get(terminal) not in (plus, minus):
            reason = f"the relay is left floating: {terminal!r} is not joined to the feed"
            raise NonPhysicalError(("relay", "across", side), reason)
    if metal[layout.relay.across[0]] == metal[layout.relay.across[1]]:
        raise NonPhysicalError(
            ("relay", "across"), "both sides of the relay hang on the same side of the feed"
        )
    for at, leg in enumerate(layout.legs):
        for rail in (0, 1):
            if metal[leg.start[rail]] not in (plus, minus):
                reason = f"leg {leg.name!r} leads to nowhere: its rail {rail + 1} is not joined to the feed"
                raise NonPhysicalError(("legs", at), reason)
        if metal[leg.start[0]] == metal[leg.start[1]]:
            reason = f"both rails of leg {leg.name!r} hang on the same side of the feed"
            raise NonPhysicalError(("legs", at), reason)


def conductors(layout: Layout) -> dict[str, str]:
    """Name of the conductor each terminal belongs to: joined by rails and bonds alone."""
    rails = ((leg.start[rail], leg.end[rail]) for leg in layout.legs for rail in (0, 1))
    return joined((*rails, *(bond.between for bond in layout.bonds)))


def joined(pairs: Iterable[tuple[str, str]]) -> dict[str, str]:
    """Group names that pairs connect, directly or through others: the group's one name for each.

    Examples
    --------
    >>> found = joined((("a", "b"), ("c", "d"), ("b", "e")))
    >>> found["a"] == found["e"], found["a"] == found["c"]
    (True, False)
    """
    parent: dict[str, str] = {}

    def root(name: str) -> str:
        """Name that stands for the group."""
        while parent.setdefault(name, name) != name:
            name = parent[name]
        return name

    for one, other in pairs:
        parent[root(one)] = root(other)
    return {name: root(name) for name in list(parent)}


def without_bond(layout: Layout, name: str) -> Layout:
    """Open a bond."""
    return replace(layout, bonds=tuple(bond for bond in layout.bonds if bond.name != name))


def with_short(layout: Layout, joint: Joint) -> Layout:
    """Short an insulated joint: its two terminals become one."""
    kept, lost = joint.between

    def moved(pair: tuple[str, str]) -> tuple[str, str]:
        """Name the lost terminal by the kept one."""
        one, other = (kept if terminal == lost else terminal for terminal in pair)
        return one, other

    return replace(
        layout,
        legs=tuple(replace(leg, start=moved(leg.start), end=moved(leg.end)) for leg in layout.legs),
        bonds=tuple(replace(bond, between=moved(bond.between)) for bond in layout.bonds),
        joints=tuple(
            replace(other, between=moved(other.between)) for other in layout.joints if other != joint
        ),
        feed=replace(layout.feed, across=moved(layout.feed.across)),
        relay=replace(layout.relay, across=moved(layout.relay.across)),
    )


def with_break(layout: Layout, leg: Leg, rail: int, position_m: float) -> Layout:
    """Cut rail 0 or 1 of a leg at a place from 0 to its length [m]; both ends included.

    At an end, or within a millimetre of it, the rail parts from its terminal there; between, the leg
    becomes two of the same name.
    """
    stub = f"{leg.name}/rail{rail + 1} cut at {leg.offset_m + position_m!r} m"
    pieces: tuple[Leg, ...]
    if position_m < _SHORTEST_M:
        pieces = (replace(leg, start=_swapped(leg.start, rail, stub)),)
    elif position_m > leg.length_m - _SHORTEST_M:
        pieces = (replace(leg, end=_swapped(leg.end, rail, stub)),)
    else:
        whole = f"{stub}, other rail"
        near = _swapped((whole, whole), rail, f"{stub}, near")
        far = _swapped((whole, whole), rail, f"{stub}, far")
        rest_m = leg.length_m - position_m
        pieces = (
            replace(leg, end=near, length_m=position_m),
            replace(leg, start=far, length_m=rest_m, offset_m=leg.offset_m + position_m),
        )
    return replace(layout, legs=tuple(_replaced(layout.legs, leg, pieces)))


def _replaced(legs: tuple[Leg, ...], leg: Leg, pieces: tuple[Leg, ...]) -> Iterator[Leg]:
    for other in legs:
        yield from pieces if other == leg else (other,)


def _swapped(pair: tuple[str, str], rail: int, terminal: str) -> tuple[str, str]:
    return (terminal, pair[1]) if rail == 0 else (pair[0], terminal)


def _check_names(layout: Layout) -> None:
    if not layout.legs:
        raise NonPhysicalError(("legs",), "a layout has at least one leg")
    for kind, names in (
        ("legs", [leg.name for leg in layout.legs]),
        ("bonds", [bond.name for bond in layout.bonds]),
        ("joints", [joint.name for joint in layout.joints]),
    ):
        twice = [name for name, count in Counter(names).items() if count > 1]
        if twice:
            raise NonPhysicalError((kind,), f"the name {twice[0]!r} is used twice")
    rails = {f"{leg.name}/rail{rail}" for leg in layout.legs for rail in (1, 2)}
    for at, bond in enumerate(layout.bonds):
        if bond.name in rails:
            raise NonPhysicalError(("bonds", at, "name"), f"the name {bond.name!r} is that of a rail")


def _name_short(layout: Layout) -> None:
    """Say which bond shorts the feed, if taking one away parts its two sides."""
    for at, bond in enumerate(layout.bonds):
        metal = conductors(without_bond(layout, bond.name))
        plus, minus = (metal.get(terminal) for terminal in layout.feed.across)
        if plus != minus:
            raise NonPhysicalError(("bonds", at), f"bond {bond.name!r} shorts the feed")
    raise NonPhysicalError(("feed", "across"), "the feed is short-circuited by rails and bonds")
