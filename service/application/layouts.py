"""The layout of a section through points, as it stands on the wire and, as JSON text, in the register.

Legs are pairs of rails between named nodes; bonds, joints, feed and relay join or bridge nodes. The
electrical answer to a layout is not worked out here.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated

from pydantic import Field, StringConstraints

from service.application.equipment import Impedance, OhmKm, Ohms, Part, SchemaNumber, Volts
from service.errors import Fault

Node = Annotated[str, StringConstraints(pattern=r"^[A-Za-z0-9._()-]{1,40}$")]
Pair = tuple[Node, Node]
Range = OhmKm | tuple[OhmKm, OhmKm]


class Leg(Part):
    """A pair of rails: the nodes of rail 1 and rail 2 at its start and at its end."""

    name: Node
    start: Pair
    end: Pair
    length_m: Annotated[float, Field(gt=0, le=1e5)]


class Bond(Part):
    name: Node
    between: Pair
    resistance_ohm: Ohms


class Joint(Part):
    """An insulated joint between two nodes; sound, it does not conduct."""

    name: Node
    between: Pair


class LayoutFeed(Part):
    across: Pair
    emf_v: Volts
    series_ohm: Impedance


class LayoutRelay(Part):
    across: Pair
    impedance_ohm: Impedance
    pick_up_v: Volts
    drop_away_v: Volts


class Layout(Part):
    """Either resistance may be one value or [low, high]; the path to earth null where it is not known."""

    schema_: SchemaNumber = Field(1, alias="schema")
    frequency_hz: Annotated[float, Field(ge=0, le=1e5)]
    loop_ohm_per_km: Impedance
    ballast_ohm_km: Range
    rail_to_earth_ohm_km: Range | None = None
    legs: tuple[Leg, ...] = Field(min_length=1, max_length=200)
    bonds: tuple[Bond, ...] = Field((), max_length=1000)
    joints: tuple[Joint, ...] = Field((), max_length=1000)
    feed: LayoutFeed
    relay: LayoutRelay


def to_text(layout: Layout) -> str:
    """The text that is kept."""
    return layout.model_dump_json()


def of_text(text: str) -> Layout:
    """The layout that a kept text says."""
    return Layout.model_validate_json(text)


def faults(layout: Layout) -> Iterator[Fault]:
    """Names used twice, and nodes that no leg has, with pointers from the section."""
    nodes = {node for leg in layout.legs for pair in (leg.start, leg.end) for node in pair}
    for kind in ("legs", "bonds", "joints"):
        seen: set[str] = set()
        for index, part in enumerate(getattr(layout, kind)):
            if part.name in seen:
                yield Fault("duplicate", "this name is used twice", f"/layout/{kind}/{index}/name")
            seen.add(part.name)
    used = [(f"/layout/bonds/{i}/between", bond.between) for i, bond in enumerate(layout.bonds)]
    used += [(f"/layout/joints/{i}/between", joint.between) for i, joint in enumerate(layout.joints)]
    used += [("/layout/feed/across", layout.feed.across), ("/layout/relay/across", layout.relay.across)]
    for pointer, pair in used:
        if not nodes.issuperset(pair):
            yield Fault("unknown_node", "no leg begins or ends at this node", pointer)
        elif pair[0] == pair[1]:
            yield Fault("same_node", "two different nodes are needed", pointer)
    for member in ("ballast_ohm_km", "rail_to_earth_ohm_km"):
        given = getattr(layout, member)
        if isinstance(given, tuple) and given[0] > given[1]:
            yield Fault("out_of_order", "the low value comes first", f"/layout/{member}")
    if layout.relay.drop_away_v > layout.relay.pick_up_v:
        reason = "a relay does not drop away over its pick-up"
        yield Fault("out_of_order", reason, "/layout/relay/drop_away_v")
