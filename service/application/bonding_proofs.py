"""The bonding proof of a layout that is sent or registered.

From the layout as it is kept to the one that is worked with; which faults a relay reveals is worked out
in `electrical`.
"""

from __future__ import annotations

import math

from sqlalchemy.engine import Connection

from service.application import layouts, sections
from service.application.circuit_cases import pointed
from service.application.circuits import not_registered
from service.electrical.bonding import Proof, bonding_proof, second_faults
from service.electrical.hiding import Pair, Ranges
from service.electrical.layout import Bond, Joint, Layout, LayoutFeed, LayoutRelay, Leg
from service.errors import Fault, NotAcceptableError, TooLargeError

MODEL = (
    "Legs as exact four-terminal lines, two rails with leakage between them and to earth, in a nodal network "
    "with bonds, feed and relay, solved in the steady state."
)
ASSUMPTIONS = (
    "Rails and ballast are uniform along each leg, and sound insulated joints do not conduct.",
    "The emf is taken as the highest there is; one fault at a time, unless a first one is named.",
    "Where the path to earth is not known, all of the ballast's leakage is taken to pass through earth.",
)

MOST_FAULTS = 100
"""Bonds, rails and joints of one proof: it takes some two seconds of one core for so many."""


def registered(connection: Connection, depot: str, section: str) -> layouts.Layout:
    """The layout of a section's present record, its emf at the highest that its feed is registered with.

    Raises
    ------
    NotFoundError
        No such section.
    NotAcceptableError
        The record has no layout.
    """
    content = sections.get(connection, depot, section).content
    if content.layout is None:
        raise not_registered(("layout",))
    equipment = content.equipment
    highest = None if equipment is None or equipment.feed is None else equipment.feed.emf_high_v
    feed = content.layout.feed
    emf_v = feed.emf_v if highest is None else max(feed.emf_v, highest)
    return content.layout.model_copy(update={"feed": feed.model_copy(update={"emf_v": emf_v})})


def proof(asked: layouts.Layout, shunt_ohm: float, first_fault: str | None) -> Proof:
    """Open every bond and rail and short every joint in turn; after `first_fault`, if one is named.

    Raises
    ------
    NotAcceptableError
        The layout does not hang together, or has a value that no layout has, with a pointer.
    TooLargeError
        More bonds, rails and joints than one proof takes.
    NoAnswerError
        A degenerate layout.
    """
    if 2 * len(asked.legs) + len(asked.bonds) + len(asked.joints) > MOST_FAULTS:
        fault = Fault("too_large", f"at most {MOST_FAULTS} bonds, rails and joints", "/layout")
        raise TooLargeError("The layout is too large for one proof.", (fault,))
    with pointed("/layout"):
        layout = _layout(asked)
        ranges = _ranges(asked)
        if first_fault is None:
            return bonding_proof(layout, ranges, shunt_ohm)
        if first_fault not in _names(asked):
            reason = "the layout has no bond, rail or joint of this name"
            raise NotAcceptableError("There is no such fault.", (Fault("unknown", reason, "/first_fault"),))
        return second_faults(layout, ranges, shunt_ohm, first_fault)


def _names(asked: layouts.Layout) -> set[str]:
    rails = {f"{leg.name}/rail{rail}" for leg in asked.legs for rail in (1, 2)}
    return rails | {bond.name for bond in asked.bonds} | {joint.name for joint in asked.joints}


def _ranges(asked: layouts.Layout) -> Ranges:
    earth = asked.rail_to_earth_ohm_km
    return Ranges(_pair(asked.ballast_ohm_km), None if earth is None else _pair(earth))


def _pair(given: float | tuple[float, float]) -> Pair:
    return given if isinstance(given, tuple) else (given, given)


def _middle(given: float | tuple[float, float]) -> float:
    """The figure as given; of a range its geometric mean."""
    low, high = _pair(given)
    return math.sqrt(low * high)


def _layout(asked: layouts.Layout) -> Layout:
    earth = asked.rail_to_earth_ohm_km
    return Layout(
        frequency_hz=asked.frequency_hz,
        loop_ohm_per_km=complex(*asked.loop_ohm_per_km),
        ballast_ohm_km=_middle(asked.ballast_ohm_km),
        rail_to_earth_ohm_km=None if earth is None else _middle(earth),
        legs=tuple(Leg(leg.name, leg.start, leg.end, leg.length_m) for leg in asked.legs),
        bonds=tuple(Bond(bond.name, bond.between, bond.resistance_ohm) for bond in asked.bonds),
        joints=tuple(Joint(joint.name, joint.between) for joint in asked.joints),
        feed=LayoutFeed(asked.feed.across, asked.feed.emf_v, complex(*asked.feed.series_ohm)),
        relay=LayoutRelay(
            asked.relay.across,
            complex(*asked.relay.impedance_ohm),
            asked.relay.pick_up_v,
            asked.relay.drop_away_v,
        ),
    )
