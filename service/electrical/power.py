"""Voltages, currents and power at every element of a circuit, from the feed to the relay.

The same operating point as in `circuit`, walked element by element; what the elements are is said
in `presets`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Numbers, Phasors, Reals
from service.electrical.chain import series
from service.electrical.circuit import (
    Element,
    PlainCircuit,
    Shunt,
    ends_of,
    operating_point,
    phasor,
    share_of,
)


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
    here = (point.feed_end_rail_v, point.feed_current_a)
    inward, outward = list(circuit.feed_elements), list(circuit.relay_elements)
    inward.insert(0, Element("feed series", series(circuit.feed.series_ohm)))
    ports = [here]
    for element in reversed(inward):
        ports.insert(0, _towards_feed(element, ports[0]))
    walked = _walked(inward, ports)
    walked += _line(
        circuit, shunt, here, (point.relay_end_rail_v, _relay_end_a(circuit, point.relay_end_rail_v))
    )
    ports = [(point.relay_v, point.relay_current_a)]
    for element in reversed(outward):
        ports.insert(0, _towards_feed(element, ports[0]))
    walked += _walked(outward, ports)
    return (*walked, _stage("relay", ports[-1], None))


def _relay_end_a(circuit: PlainCircuit, rail_v: Phasors) -> Phasors:
    return phasor(rail_v / ends_of(circuit).relay_ohm)


def _line(
    circuit: PlainCircuit,
    shunt: Shunt | None,
    here: tuple[Phasors, Phasors],
    there: tuple[Phasors, Phasors],
) -> list[Stage]:
    if shunt is None:
        return [_stage("line", here, there)]
    share = share_of(circuit, shunt.position_m, ("shunt", "position_m"))
    line = ends_of(circuit).line
    behind = _towards_feed(Element("line behind", line.part(1 - share)), there)
    # Out of the feed's side, so that a dead short, which leaves nothing behind it, still has its current.
    before = line.part(share)
    arriving = phasor(before.a * here[1] - before.c * here[0])
    across = (behind[0], phasor(arriving - behind[1]))
    return [
        _stage("line before", here, (behind[0], arriving)),
        _stage("shunt", across, None),
        _stage("line behind", behind, there),
    ]


def _towards_feed(element: Element, port: tuple[Phasors, Phasors]) -> tuple[Phasors, Phasors]:
    two, (v, i) = element.two_port, port
    return phasor(two.a * v + two.b * i), phasor(two.c * v + two.d * i)


def _walked(elements: list[Element], ports: list[tuple[Phasors, Phasors]]) -> list[Stage]:
    return [
        _stage(element.name, into, out)
        for element, into, out in zip(elements, ports[:-1], ports[1:], strict=True)
    ]


def _stage(name: str, into: tuple[Phasors, Phasors], out: tuple[Phasors, Phasors] | None) -> Stage:
    left = 0.0 if out is None else _watt(out)
    return Stage(name, into[0], into[1], np.asarray(_watt(into) - left))


def _watt(port: tuple[Phasors, Phasors]) -> Numbers:
    return np.real(port[0] * np.conj(port[1]))
