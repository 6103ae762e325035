"""The equations of a layout: exact four-terminal legs in a nodal network, one for each leakage.

Voltages, broken rails and shunts at any place in closed form from one inverse. What the layout is
and its faults are in `layout`, their judgement in `bonding`.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from service.electrical.arrays import Numbers, Reals
from service.electrical.chain import TwoPort
from service.electrical.layout import Layout, Leg, joined
from service.electrical.line import UniformLine
from service.errors import NoAnswerError

# A rail through which less than this share of its own conductance passes carries nothing: what is
# left is rounding, and its break changes nothing.
_NOTHING = 1e-10


@dataclass(frozen=True, slots=True)
class Leakage:
    """Leakage from rail to rail and from each rail to earth, one array each of the same length [S/km]."""

    rail_to_rail: Reals
    rail_to_earth: Reals


@dataclass(frozen=True, slots=True)
class Modes:
    """A leg as two lines: between its rails, and from both rails to earth."""

    between: UniformLine
    common: UniformLine


@dataclass(frozen=True, slots=True)
class Network:
    """A layout solved for several leakages; the first axis of every array is that of the leakages.

    Attributes
    ----------
    layout : Layout
        As built.
    leakage : Leakage
        As asked.
    nodes : dict
        Index of each terminal.
    inverse : array, shape (k, n, n)
        Of the nodal admittance matrix [ohm].
    volts : array, shape (k, n)
        Of every terminal, nothing across the rails [V].
    """

    layout: Layout
    leakage: Leakage
    nodes: dict[str, int]
    inverse: Numbers
    volts: Numbers

    def relay_v(self) -> Numbers:
        """Voltage at the relay, shape (k,) [V]."""
        one, other = (self.nodes[terminal] for terminal in self.layout.relay.across)
        voltage: Numbers = self.volts[:, one] - self.volts[:, other]
        return voltage

    def shunted_v(self, leg: Leg, position_m: Reals, ohm: float) -> Numbers:
        """Voltage at the relay with a resistance across a leg at places (m,), shape (k, m) [V].

        By Thevenin: between the rails at the place, w v open and w Z w' + Bl Br/B inside, with w the
        share of a current put across there that appears at the leg's four terminals.
        """
        modes = modes_of(self.layout, np.asarray([leg.length_m]), self.leakage)
        whole, near, far = _around(modes.between, position_m / leg.length_m)
        weights = _differential(far.b / whole.b, near.b / whole.b)
        inside = near.b * far.b / whole.b
        return self._changed(leg, weights, inside + ohm)

    def broken_v(self, leg: Leg, rail: int, position_m: Reals) -> Numbers:
        """Voltage at the relay with a rail of a leg open at places (m,), shape (k, m) [V].

        The gap as a series source that lets no current pass: j v flows there unbroken, j being the
        current into the leg's four terminals for one volt in the gap; y0 - j Z j' admits it.
        """
        modes = modes_of(self.layout, np.asarray([leg.length_m]), self.leakage)
        share = position_m / leg.length_m
        sign = 1 if rail == 0 else -1
        whole, near, far = _around(modes.between, share)
        start, end = far.a / whole.b, near.a / whole.b
        currents = sign * _differential(start, -end)
        passed = near.a * far.a / whole.b
        whole, near, far = _around(modes.common, share)
        start, end = far.a / (4 * whole.b), near.a / (4 * whole.b)
        currents = currents + np.stack([start, start, -end, -end], axis=-1)
        passed = passed + near.a * far.a / (4 * whole.b)
        return self._changed(leg, currents, -passed)

    def _changed(self, leg: Leg, weights: Numbers, inside: Numbers) -> Numbers:
        """Relay voltage after a change at one port of a leg: V - (r w)(w v)/(w Z w' + inside)."""
        at = [self.nodes[terminal] for terminal in (*leg.start, *leg.end)]
        one, other = (self.nodes[terminal] for terminal in self.layout.relay.across)
        block = self.inverse[:, at][:, :, at]
        to_relay = self.inverse[:, one][:, at] - self.inverse[:, other][:, at]
        there = np.einsum("kmt,kt->km", weights, self.volts[:, at])
        felt = np.einsum("kmt,kt->km", weights, to_relay)
        under = np.einsum("kmt,kts,kms->km", weights, block, weights) + inside
        carries = np.abs(under) > _NOTHING * np.abs(inside)
        change = np.divide(there * felt, under, out=np.zeros_like(under), where=carries)
        changed: Numbers = self.relay_v()[:, np.newaxis] - change
        return changed


def network(layout: Layout, leakage: Leakage) -> Network:
    """Build and solve a layout for several leakages at once.

    Parameters
    ----------
    layout : Layout
        Its own ballast and earth path are left aside.
    leakage : Leakage
        Arrays of the same length k; zero allowed.

    Returns
    -------
    Network
        Exact: no leg is cut into pieces.

    Raises
    ------
    NoAnswerError
        Code `degenerate`: the equations have no one solution.

    Notes
    -----
    A leg is two lines. Between its rails: loop impedance z, leakage g + e/2; both rails to earth:
    impedance z/4, leakage 2 e, the rails' mutual impedance with earth return not being known and
    taken as zero. I1 = Ic/2 + Id, I2 = Ic/2 - Id. Where nothing leads to earth, one terminal of each
    part is tied to it, and no current passes there.

    Examples
    --------
    10 V behind 7.2 ohm, 1 km, a 20 ohm relay; rail 1 broken in the middle with 0.2 S/km to earth:

    >>> from service.electrical.layout import LayoutFeed, LayoutRelay
    >>> leg = Leg("a", ("f1", "f2"), ("r1", "r2"), 1000.0)
    >>> feed, relay = LayoutFeed(("f1", "f2"), 10.0, 7.2), LayoutRelay(("r1", "r2"), 20.0, 1.62, 1.10)
    >>> layout = Layout(0.0, 0.0578, 10.0, None, (leg,), (), (), feed, relay)
    >>> solved = network(layout, Leakage(np.array([0.0]), np.array([0.2])))
    >>> broken_v = solved.broken_v(leg, 0, np.array([500.0]))
    >>> round(float(solved.relay_v()[0]), 2), round(float(broken_v[0, 0]), 2)
    (4.79, 1.33)
    """
    names = dict.fromkeys(terminal for pair in _pairs(layout) for terminal in pair)
    nodes = {name: at for at, name in enumerate(names)}
    count = leakage.rail_to_rail.size
    number = np.float64 if layout.frequency_hz == 0 else np.complex128
    matrix = np.zeros((count, len(nodes), len(nodes)), dtype=number)
    at = np.asarray([[nodes[terminal] for terminal in (*leg.start, *leg.end)] for leg in layout.legs])
    places: Any = (slice(None), at[:, :, np.newaxis], at[:, np.newaxis, :])
    np.add.at(matrix, places, _leg_admittances(layout, leakage))
    for bond in layout.bonds:
        _stamp(matrix, nodes, bond.between, 1 / bond.resistance_ohm)
    feed = layout.feed
    feed_s = _plain(layout, 1 / complex(feed.series_ohm))
    _stamp(matrix, nodes, feed.across, feed_s)
    _stamp(matrix, nodes, layout.relay.across, _plain(layout, 1 / complex(layout.relay.impedance_ohm)))
    _tie(matrix, nodes, layout, leakage)
    try:
        inverse = np.linalg.inv(matrix)
    except np.linalg.LinAlgError as error:
        raise NoAnswerError("degenerate", "the layout's equations have no one solution") from error
    plus, minus = (nodes[terminal] for terminal in feed.across)
    volts = (inverse[:, :, plus] - inverse[:, :, minus]) * (feed.emf_v * feed_s)
    return Network(layout, leakage, nodes, inverse, volts)


def modes_of(layout: Layout, length_m: Reals, leakage: Leakage) -> Modes:
    """Both lines of legs of lengths (m,): arrays of shape (k, m)."""
    km = length_m / 1000
    series_ohm = _plain(layout, complex(layout.loop_ohm_per_km)) * km
    g, e = leakage.rail_to_rail[:, np.newaxis], leakage.rail_to_earth[:, np.newaxis]
    return Modes(UniformLine.of(series_ohm, (g + e / 2) * km), UniformLine.of(series_ohm / 4, 2 * e * km))


def _around(line: UniformLine, share: Reals) -> tuple[TwoPort, TwoPort, TwoPort]:
    return line.part(1.0), line.part(share), line.part(1 - share)


def _differential(start: Numbers, end: Numbers) -> Numbers:
    return np.stack([start, -start, end, -end], axis=-1)


def _leg_admittances(layout: Layout, leakage: Leakage) -> Numbers:
    """Admittance matrices of the legs' four terminals, start 1, 2, end 1, 2: shape (k, legs, 4, 4)."""
    modes = modes_of(layout, np.asarray([leg.length_m for leg in layout.legs]), leakage)
    whole: Numbers = np.zeros(())
    for line, weight, rails in (
        (modes.between, 1.0, [[1, -1], [-1, 1]]),
        (modes.common, 0.25, np.ones((2, 2))),
    ):
        two = line.part(1.0)
        for own, ends in ((two.a / two.b, np.eye(2)), (-1 / two.b, 1 - np.eye(2))):
            whole = whole + weight * own[..., np.newaxis, np.newaxis] * np.kron(ends, rails)
    return whole


def _stamp(matrix: Numbers, nodes: dict[str, int], pair: tuple[str, str], siemens: Numbers | float) -> None:
    one, other = (nodes[terminal] for terminal in pair)
    for row, column, sign in ((one, one, 1), (other, other, 1), (one, other, -1), (other, one, -1)):
        matrix[:, row, column] += sign * siemens


def _tie(matrix: Numbers, nodes: dict[str, int], layout: Layout, leakage: Leakage) -> None:
    """Tie one terminal of each part that nothing leads to earth from to it, so that its volts are definite.

    One tie to a part carries no current, whatever its conductance.
    """
    rails = tuple((leg.start[rail], leg.end[rail]) for leg in layout.legs for rail in (0, 1))
    metal = (*rails, *(bond.between for bond in layout.bonds), layout.feed.across, layout.relay.across)
    through_ballast = (*metal, *(leg.start for leg in layout.legs))
    earthed = leakage.rail_to_earth > 0
    for rows, pairs, skipped in (
        (~earthed & (leakage.rail_to_rail == 0), metal, ()),
        (~earthed & (leakage.rail_to_rail > 0), through_ballast, ()),
        (earthed, through_ballast, layout.legs),
    ):
        if rows.any():
            parts = joined(pairs)
            for terminal in set(parts.values()) - {parts[leg.start[0]] for leg in skipped}:
                matrix[rows, nodes[terminal], nodes[terminal]] += 1.0


def _pairs(layout: Layout) -> Iterator[tuple[str, str]]:
    for leg in layout.legs:
        yield from (leg.start, leg.end)
    yield from (bond.between for bond in layout.bonds)
    yield from (layout.feed.across, layout.relay.across)


def _plain(layout: Layout, value: complex) -> Numbers:
    return np.asarray(value.real if layout.frequency_hz == 0 else value)
