"""Voltages, currents and power at every element of a circuit, and the voltage along its rails.

The same operating point as in `circuit`, walked element by element; what the elements are is said
in `presets`.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from service.electrical.arrays import Numbers, Phasors, RealLike, Reals
from service.electrical.chain import TwoPort, series
from service.electrical.circuit import (
    Element,
    OperatingPoint,
    PlainCircuit,
    Shunt,
    ends_of,
    operating_point,
    phasor,
    share_of,
)

Port: TypeAlias = tuple[Phasors, Phasors]


@dataclass(frozen=True, slots=True)
class Stage:
    """One element: voltage [V] and current [A] into its port towards the feed, power it takes [W]."""

    name: str
    voltage_v: Phasors
    current_a: Phasors
    power_w: Reals


def stages(circuit: PlainCircuit, shunt: Shunt | None = None) -> tuple[Stage, ...]:
    """Walk a circuit from its feed to its relay.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    shunt : Shunt, optional
        A resistance across the rails.

    Returns
    -------
    tuple of Stage
        `feed series`, the feed end's elements, `line` (or `line before`, `shunt`, `line behind`), the
        relay end's elements, `relay`. Their powers add up to what the emf gives, E times the current
        into the first.

    Raises
    ------
    NonPhysicalError
        The shunt lies outside the section, or is negative.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))
    >>> for stage in stages(circuit):
    ...     print(stage.name, round(float(stage.power_w), 4))
    feed series 1.4408
    line 0.5612
    relay series 0.0
    relay 0.1453
    """
    point = operating_point(circuit, shunt)
    here, there = _rail_ends(circuit, point)
    inward, outward = list(circuit.feed_elements), list(circuit.relay_elements)
    inward.insert(0, Element("feed series", series(circuit.feed.series_ohm)))
    ports = [here]
    for element in reversed(inward):
        ports.insert(0, _back(element.two_port, ports[0]))
    walked = _walked(inward, ports)
    walked += _line(circuit, shunt, here, there)
    ports = [(point.relay_v, point.relay_current_a)]
    for element in reversed(outward):
        ports.insert(0, _back(element.two_port, ports[0]))
    walked += _walked(outward, ports)
    return (*walked, _stage("relay", ports[-1], None))


def rail_voltage(circuit: PlainCircuit, position_m: RealLike, shunt: Shunt | None = None) -> Phasors:
    """Voltage between the rails at any distance from the feed end, clear or with one shunt [V].

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    position_m : array_like
        From the feed end; broadcasts with the circuit [m].
    shunt : Shunt, optional
        A resistance across the rails.

    Returns
    -------
    array of complex
        [V].

    Raises
    ------
    NonPhysicalError
        Path `("position_m",)` or `("shunt", ...)`: outside the section.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))
    >>> [round(v, 5) for v in rail_voltage(circuit, np.array([0.0, 1000.0])).real.tolist()]
    [1.31597, 1.20526]
    """
    share = share_of(circuit, position_m, ("position_m",))
    line = ends_of(circuit).line
    here, there = _rail_ends(circuit, operating_point(circuit, shunt))
    behind = _back(line.part(1 - share), there)[0]
    if shunt is None:
        return behind
    at = share_of(circuit, shunt.position_m, ("shunt", "position_m"))
    across_v, arriving_a = _at_shunt(circuit, at, here, there)[0]
    before = _back(line.part(np.maximum(at - share, 0.0)), (across_v, arriving_a))[0]
    return np.where(share < at, before, behind)


def _rail_ends(circuit: PlainCircuit, point: OperatingPoint) -> tuple[Port, Port]:
    """Voltage and current into the rails at the feed end, out of them at the relay end."""
    relay_a = phasor(point.relay_end_rail_v / ends_of(circuit).relay_ohm)
    return (point.feed_end_rail_v, point.feed_current_a), (point.relay_end_rail_v, relay_a)


def _at_shunt(circuit: PlainCircuit, share: Reals, here: Port, there: Port) -> tuple[Port, Port]:
    """Voltage at a shunt with the current that arrives there, and with the current that goes on."""
    line = ends_of(circuit).line
    on = _back(line.part(1 - share), there)
    # From the feed's side, so that a dead short, which leaves nothing behind it, still has its current.
    before = line.part(share)
    return (on[0], phasor(before.a * here[1] - before.c * here[0])), on


def _line(circuit: PlainCircuit, shunt: Shunt | None, here: Port, there: Port) -> list[Stage]:
    if shunt is None:
        return [_stage("line", here, there)]
    share = share_of(circuit, shunt.position_m, ("shunt", "position_m"))
    arriving, on = _at_shunt(circuit, share, here, there)
    return [
        _stage("line before", here, arriving),
        _stage("shunt", (on[0], phasor(arriving[1] - on[1])), None),
        _stage("line behind", on, there),
    ]


def _back(two: TwoPort, port: Port) -> Port:
    """Port 1 of a two-port from its port 2."""
    v, i = port
    return phasor(two.a * v + two.b * i), phasor(two.c * v + two.d * i)


def _walked(elements: list[Element], ports: list[Port]) -> list[Stage]:
    return [
        _stage(element.name, into, out)
        for element, into, out in zip(elements, ports[:-1], ports[1:], strict=True)
    ]


def _stage(name: str, into: Port, out: Port | None) -> Stage:
    left = 0.0 if out is None else _watt(out)
    return Stage(name, into[0], into[1], np.asarray(_watt(into) - left))


def _watt(port: Port) -> Numbers:
    return np.real(port[0] * np.conj(port[1]))
