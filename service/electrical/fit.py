"""What a circuit's readings say of its ballast, feed, rails and relay, all of them in some doubt.

Weighs the register's values and the readings by their uncertainties, many circuits at a time, DC or
AC by size alone. What follows for other weather is in `forecast`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from service.electrical.arrays import Flags, RealLike, Reals, positive, positive_or_infinite
from service.electrical.changes import with_ballast, with_emf, with_feed_ohm
from service.electrical.circuit import PlainCircuit, operating_point
from service.electrical.estimate import Reading
from service.electrical.shunt import residual_voltage
from service.errors import NoAnswerError, NonPhysicalError

# Gauss-Newton with the register's values as a start settles in about five rounds.
_ROUNDS = 30
_SETTLED = 1e-8
# No round moves a value by more than a factor of about 2.7.
_LONGEST_STEP = 1.0
_NUDGE = 1e-5


@dataclass(frozen=True, slots=True)
class Doubt:
    """Relative standard uncertainty (of the logarithm) of a circuit's values before any reading; not zero."""

    ballast: RealLike
    emf: RealLike
    feed_ohm: RealLike
    loop_ohm: RealLike
    drop_away: RealLike


@dataclass(frozen=True, slots=True)
class Sight:
    """What was measured at one visit, sizes only; None for what was not.

    In arrays, a reading that one circuit lacks has any value greater than zero and `u` of `math.inf`.

    Attributes
    ----------
    relay_v, relay_end_rail_v, feed_end_rail_v, feed_current_a : Reading, optional
        As in `OperatingPoint` [V, A].
    feed_drop_shunt_ohm, relay_drop_shunt_ohm : Reading, optional
        Measured drop shunt at the feed end and at the relay end [ohm].
    """

    relay_v: Reading | None = None
    relay_end_rail_v: Reading | None = None
    feed_end_rail_v: Reading | None = None
    feed_current_a: Reading | None = None
    feed_drop_shunt_ohm: Reading | None = None
    relay_drop_shunt_ohm: Reading | None = None


@dataclass(frozen=True, slots=True)
class Fit:
    """The circuit as the readings have it.

    Attributes
    ----------
    circuit : PlainCircuit
        With arrays for ballast, emf, feed impedance, rail impedance and drop-away.
    covariance : array, shape (..., 5, 5)
        Of the logarithms of these, in that order.
    settled : array of bool
        Whether the fit converged; where not, nothing of it may be used.
    """

    circuit: PlainCircuit
    covariance: Reals
    settled: Flags


def fit(circuit: PlainCircuit, sight: Sight, doubt: Doubt) -> Fit:
    """Fit a circuit to one visit's readings.

    Parameters
    ----------
    circuit : PlainCircuit
        The register's values, ballast finite; any may be an array.
    sight : Sight
        The readings, in the same broadcast shape.
    doubt : Doubt
        How far the register's values may be off.

    Returns
    -------
    Fit
        Most probable values, their covariance.

    Raises
    ------
    NonPhysicalError
        A doubt or a reading not greater than zero, infinite ballast.
    NoAnswerError
        Code `ill_conditioned`: doubts so wide beside the readings that nothing is left to count on.

    Notes
    -----
    Gauss-Newton on logarithms: prior x = 0 with the doubts, each reading ln(model/measured) = 0 with
    its own, a measured drop shunt as ln(pull with it across/drop-away) = 0. Linear in the result's
    neighbourhood only: a relative uncertainty over some 0.3 is an order of size.

    Examples
    --------
    A circuit whose register says 7.2 ohm, its rails read with the feed at some 5 ohm:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.6), Relay(20.0, 0.0, 1.62, 1.10))
    >>> sight = Sight(relay_v=Reading(4.1, 0.04), feed_current_a=Reading(1.15, 0.01))
    >>> found = fit(circuit, sight, Doubt(1.0, 0.02, 0.3, 0.1, 0.05))
    >>> round(float(found.circuit.feed.series_ohm), 1), round(float(found.circuit.line.ballast_ohm_km), 1)
    (5.1, 4.4)
    """
    positive(("line", "ballast_ohm_km"), circuit.line.ballast_ohm_km)
    doubts = (doubt.ballast, doubt.emf, doubt.feed_ohm, doubt.loop_ohm, doubt.drop_away)
    for name, value in zip(("ballast", "emf", "feed_ohm", "loop_ohm", "drop_away"), doubts, strict=True):
        positive((name,), value)
    prior = np.stack(
        np.broadcast_arrays(*(1 / np.asarray(value, dtype=np.float64) ** 2 for value in doubts)), -1
    )
    start, _ = _misses(circuit, sight)
    shape = np.broadcast_shapes(start.shape[:-1], prior.shape[:-1])
    x = np.zeros((*shape, 5))
    settled = np.zeros(shape, dtype=np.bool_)
    for _ in range(_ROUNDS):
        normal, pull = _normal(circuit, sight, prior, x)
        step = np.clip(-(_inverse(normal) @ pull[..., np.newaxis])[..., 0], -_LONGEST_STEP, _LONGEST_STEP)
        x = x + step
        settled = np.asarray(np.abs(step).max(axis=-1) <= _SETTLED)
        if settled.all():
            break
    return Fit(moved(circuit, x), _inverse(_normal(circuit, sight, prior, x)[0]), settled)


def moved(circuit: PlainCircuit, x: Reals) -> PlainCircuit:
    """Multiply ballast, emf, feed impedance, rail impedance and drop-away by e^x, x on the last axis."""
    ballast, emf, feed, loop, drop_away = np.moveaxis(np.exp(x), -1, 0)
    relay, line = circuit.relay, circuit.line
    changed = with_ballast(circuit, np.asarray(line.ballast_ohm_km) * ballast)
    changed = with_emf(changed, np.asarray(circuit.feed.emf_v) * emf)
    changed = with_feed_ohm(changed, np.asarray(circuit.feed.series_ohm) * feed)
    # The fit moves drop-away freely, pick-up plays no part in it and is only kept above.
    drop_away_v = np.asarray(relay.drop_away_v) * drop_away
    pick_up_v = np.maximum(np.asarray(relay.pick_up_v), drop_away_v)
    return replace(
        changed,
        line=replace(changed.line, loop_ohm_per_km=np.asarray(line.loop_ohm_per_km) * loop),
        relay=replace(relay, drop_away_v=drop_away_v, pick_up_v=pick_up_v),
    )


def _normal(circuit: PlainCircuit, sight: Sight, prior: Reals, x: Reals) -> tuple[Reals, Reals]:
    """Normal matrix and right-hand side of the weighted least squares at x."""
    miss, weight = _misses(moved(circuit, x), sight)
    slope = slopes(lambda near: _misses(moved(circuit, near), sight)[0], x, miss)
    normal = np.einsum("...ri,...r,...rj->...ij", slope, weight, slope) + prior[..., np.newaxis] * np.eye(5)
    return normal, np.einsum("...ri,...r,...r->...i", slope, weight, miss) + prior * x


def _inverse(normal: Reals) -> Reals:
    """Inverse of the normal matrix, scaled to a diagonal of ones so that only its shape can be too much."""
    scale = 1 / np.sqrt(np.diagonal(normal, axis1=-2, axis2=-1))
    scales = scale[..., :, np.newaxis] * scale[..., np.newaxis, :]
    try:
        return np.asarray(np.linalg.inv(normal * scales) * scales, dtype=np.float64)
    except np.linalg.LinAlgError as error:
        raise NoAnswerError("ill_conditioned", "the doubts are too wide to fit these readings") from error


def slopes(answer: Callable[[Reals], Reals], x: Reals, here: Reals) -> Reals:
    """Derivatives of an answer by each of the five logarithms, on a new last axis; `here` is answer(x)."""
    columns = []
    for at in range(5):
        near = x.copy()
        near[..., at] += _NUDGE
        columns.append((answer(near) - here) / _NUDGE)
    return np.stack(columns, axis=-1)


def _misses(circuit: PlainCircuit, sight: Sight) -> tuple[Reals, Reals]:
    """What each reading misses the model by, relative, and its weight; the readings on the last axis."""
    point = operating_point(circuit)
    first_m, last_m = circuit.reach_m
    found: list[tuple[Reals, Reals]] = []
    for name in ("relay_v", "relay_end_rail_v", "feed_end_rail_v", "feed_current_a"):
        reading = getattr(sight, name)
        if reading is not None:
            value, u = _checked(name, reading)
            found.append((np.log(np.abs(getattr(point, name)) / value), (value / u) ** 2))
    for name, position_m in (("feed_drop_shunt_ohm", first_m), ("relay_drop_shunt_ohm", last_m)):
        reading = getattr(sight, name)
        if reading is not None:
            value, u = _checked(name, reading)
            miss = _left(circuit, position_m, value)
            steep = (_left(circuit, position_m, value * (1 + _NUDGE)) - miss) / _NUDGE
            found.append((miss, (value / (u * steep)) ** 2))
    if not found:
        raise NonPhysicalError(("sight",), "there is no reading to fit")
    shape = np.broadcast_shapes(*(np.shape(part) for pair in found for part in pair))
    misses, weights = (
        np.stack([np.broadcast_to(pair[side], shape) for pair in found], axis=-1) for side in (0, 1)
    )
    return misses, weights


def _left(circuit: PlainCircuit, position_m: Reals, ohm: Reals) -> Reals:
    """Pull over drop-away with a resistance across, less one: zero at the drop shunt."""
    pull = circuit.relay.pull_v(residual_voltage(circuit, position_m, ohm))
    left: Reals = pull / np.asarray(circuit.relay.drop_away_v) - 1
    return left


def _checked(name: str, reading: Reading) -> tuple[Reals, Reals]:
    positive((name,), reading.value)
    positive_or_infinite((name, "u"), reading.u)
    return np.asarray(reading.value, dtype=np.float64), np.asarray(reading.u, dtype=np.float64)
