"""What a shunt across the rails does: residual voltage, drop shunt and pick-up shunt at every place.

Closed forms from the impedance between the rails and the clear voltage at the coil; the worst
place is found, not assumed. Says nothing of rail surface: a wheel on a film is not a clamped shunt.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, fields
from typing import TypeAlias

import numpy as np

from service.electrical.arrays import Flags, Numbers, Phasors, RealLike, Reals, not_negative
from service.electrical.chain import ratio
from service.electrical.circuit import Ends, PlainCircuit, check_reach, ends_of, phasor, share_of
from service.errors import NoAnswerError

Measure: TypeAlias = Callable[[Numbers, Numbers, Numbers], tuple[Reals, Reals]]


@dataclass(frozen=True, slots=True)
class Place:
    """The smallest value along the section [ohm] and where it is, from the feed end [m]."""

    position_m: Reals
    ohm: Reals


@dataclass(frozen=True, slots=True)
class Along:
    """A shunt limit at the feed end, in the middle, at the relay end and at the worst place [ohm]."""

    feed_end: Reals
    middle: Reals
    relay_end: Reals
    worst: Place


@dataclass(frozen=True, slots=True)
class ShuntLimits:
    """Drop shunt and pick-up shunt of a circuit.

    Attributes
    ----------
    relay_clear_v : array
        At the coil with no train [V].
    drop_shunt_ohm, pick_up_shunt_ohm : Along
        Infinite, and no number to print, where `released` or `not_picked_up` holds.
    released : array of bool
        Released with no train: there is no drop shunt.
    not_picked_up : array of bool
        Does not pick up with no train: there is no pick-up shunt.
    """

    relay_clear_v: Phasors
    drop_shunt_ohm: Along
    pick_up_shunt_ohm: Along
    released: Flags
    not_picked_up: Flags


@dataclass(frozen=True, slots=True)
class Track:
    """Ends of a circuit with what does not change along it: the common denominator W of the line.

    `under` is (Zf C + A) Zr + Zf A + B of the whole line; E Zr/W is the clear rail voltage at the relay end.
    """

    ends: Ends
    under: Numbers
    first: Reals
    last: Reals

    def seen(self, share: Reals) -> tuple[Numbers, Numbers]:
        """Impedance between the rails at a share of the line [ohm], and its slope over that share.

        Z = Nf Nr/W with Nf = Zf A + B before and Nr = Zr A + B behind; dNf = z Df with
        Df = Zf C + A, so dZ = z (Df Nr - Nf Dr)/W.
        """
        ends = self.ends
        before, behind = ends.line(share), ends.line(1 - share)
        over_f, under_f = ends.feed_ohm * before.a + before.b, ends.feed_ohm * before.c + before.a
        over_r, under_r = ends.relay_ohm * behind.a + behind.b, ends.relay_ohm * behind.c + behind.a
        return (
            over_f * over_r / self.under,
            ends.loop_ohm * (under_f * over_r - over_f * under_r) / self.under,
        )


def residual_voltage(circuit: PlainCircuit, position_m: RealLike, ohm: RealLike) -> Phasors:
    """Voltage at the coil with a resistance across the rails: V R/(R + Z).

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    position_m, ohm : array_like
        Place from the feed end [m] and resistance, zero allowed [ohm]; they broadcast.

    Returns
    -------
    array of complex
        [V].

    Raises
    ------
    NonPhysicalError
        Outside the section, or a negative resistance.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Notes
    -----
    V is the clear voltage at the coil and Z the impedance between the rails at the place, feed and
    relay in circuit; with one feed a dead short leaves nothing at the coil, hence the form.

    Examples
    --------
    HELM Workbook 30's ladder as a uniform line, 0.5 ohm at the feed end, middle and relay end, in mA:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> circuit = PlainCircuit(0.0, Feed(4.0, 5.0), Line(1000.0, 0.34, 3.0), Relay(10.0, 0.0, 0.9, 0.6))
    >>> v = residual_voltage(circuit, np.array([0.0, 500.0, 1000.0]), 0.5)
    >>> [round(i, 2) for i in (v.real * 100).tolist()]
    [28.1, 28.31, 27.43]
    """
    not_negative(("shunt", "ohm"), ohm)
    share = share_of(circuit, position_m, ("shunt", "position_m"))
    check_reach(circuit, position_m)
    track = track_of(circuit)
    seen_ohm, _ = track.seen(share)
    return phasor(
        _clear_v(track) * ratio(np.asarray(ohm), np.asarray(ohm) + seen_ohm, "the residual voltage")
    )


def shunt_limits(circuit: PlainCircuit) -> ShuntLimits:
    """Drop shunt and pick-up shunt at both ends, in the middle and at the worst place.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.

    Returns
    -------
    ShuntLimits
        Arrays of the broadcast shape.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.

    Notes
    -----
    With k = |V|/V_drop, DC gives R = Z/(k - 1); AC the positive root of
    (k^2 - 1) R^2 - 2 R Re Z - |Z|^2 = 0; a vane relay a quadratic of the same kind. Z varies along
    the section and V does not. Interior minima are bracketed by the sign of the exact slope.

    References
    ----------
    IEC 60050-821, 821-03-30, for what the drop shunt is: the *largest* resistance that releases.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import Relay
    >>> relay = Relay(20.0, 0.0, 1.62, 1.10)
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 3.0), relay)
    >>> drop = shunt_limits(circuit).drop_shunt_ohm
    >>> [round(float(r), 3) for r in (drop.feed_end, drop.middle, drop.relay_end)]
    [1.374, 1.371, 1.381]
    """
    track = track_of(circuit)
    clear_v = _clear_v(track)
    relay = circuit.relay
    grid = _grid(track)
    seen = track.seen(grid)
    length_m = np.asarray(circuit.line.length_m, dtype=np.float64)
    drop, released = _along(track, grid, seen, relay.shunt_terms(clear_v, relay.drop_away_v), length_m)
    pick_up, not_up = _along(track, grid, seen, relay.shunt_terms(clear_v, relay.pick_up_v), length_m)
    return ShuntLimits(phasor(clear_v), drop, pick_up, released, not_up)


def lifting_shunts(circuit: PlainCircuit, position_m: RealLike) -> tuple[Reals, Reals]:
    """Range of resistances that would lift a relay that is down with no train [ohm, ohm].

    Only a vane relay can be lifted: a shunt turns the control voltage towards its ideal angle.

    Parameters
    ----------
    circuit : PlainCircuit
        Any of its values may be an array.
    position_m : array_like
        Place of the shunt, from the feed end [m].

    Returns
    -------
    tuple of array
        Between the two the relay picks up; both zero where no shunt lifts it, or where it picks up
        with no train and so needs no lifting.

    Raises
    ------
    NonPhysicalError
        Outside the section.
    NoAnswerError
        Code `degenerate` or `tuned_zone`.

    Notes
    -----
    The quadratic of `shunt_limits` with a < 0: two positive roots where b > 0 and b^2 > 4 |a| |Z|^2.
    """
    share = share_of(circuit, position_m, ("shunt", "position_m"))
    check_reach(circuit, position_m)
    track = track_of(circuit)
    seen_ohm, _ = track.seen(share)
    excess, steer = circuit.relay.shunt_terms(_clear_v(track), circuit.relay.pick_up_v)
    b = np.real(steer * np.conj(seen_ohm)) - 2 * np.real(seen_ohm)
    c = np.abs(seen_ohm) ** 2
    under = b**2 + 4 * excess * c
    lifts = (excess < 0) & (b > 0) & (under > 0)
    root = np.sqrt(np.where(lifts, under, 0.0))
    low = np.divide(2 * c, b + root, out=np.zeros_like(root), where=lifts)
    high = np.divide(b + root, -2 * excess, out=np.zeros_like(root), where=lifts)
    return low, high


def track_of(circuit: PlainCircuit) -> Track:
    """Bring a circuit to what the closed forms along the line need.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.
    """
    ends = ends_of(circuit)
    whole = ends.line(1.0)
    under = (ends.feed_ohm * whole.c + whole.a) * ends.relay_ohm + ends.feed_ohm * whole.a + whole.b
    if np.any(under == 0):
        raise NoAnswerError("degenerate", "the circuit is resonant without loss: nothing limits its current")
    length_m = np.asarray(circuit.line.length_m, dtype=np.float64)
    first_m, last_m = circuit.reach_m
    return Track(ends, under, first_m / length_m, last_m / length_m)


def _clear_v(track: Track) -> Numbers:
    return track.ends.emf_v * track.ends.relay_ohm / track.under * track.ends.coil_per_rail


def _grid(track: Track) -> Reals:
    """Shares of the line at both ends, the middle and between, on a leading axis.

    In DC the impedance along the line has one stationary place, so three do. In AC it turns by twice
    the line's angle from end to end; at least four intervals a radian of that.
    """
    ends = track.ends
    shape = np.broadcast_shapes(*(np.shape(part) for part in (track.under, ends.coil_per_rail, track.first)))
    count = 2
    if np.iscomplexobj(track.under):
        count = 4 + 4 * int(np.ceil(np.max(np.sqrt(np.abs(ends.loop_ohm * ends.leakage_s)))))
    steps = np.linspace(0.0, 1.0, count + 1).reshape((-1,) + (1,) * len(shape))
    return np.broadcast_to(track.first + (track.last - track.first) * steps, (count + 1, *shape))


def _largest_shunt(terms: tuple[Reals, Numbers], seen: tuple[Numbers, Numbers]) -> tuple[Reals, Reals]:
    """Positive root R of a R^2 + b R - |Z|^2 = 0, b = Re(w Z*) - 2 Re Z, and dR/dx up to a positive factor."""
    excess, steer = terms
    seen_ohm, slope = seen
    down = excess <= 0
    a = np.where(down, 1.0, excess)
    b = np.real(steer * np.conj(seen_ohm)) - 2 * np.real(seen_ohm)
    c = np.real(seen_ohm * np.conj(seen_ohm))
    root = np.sqrt(b * b + 4 * a * c)
    ohm = np.where(b > 0, 2 * c / np.where(b > 0, b + root, 1.0), (root - b) / (2 * a))
    turn = np.real(steer * np.conj(slope)) - 2 * np.real(slope)
    rise = 2 * np.real(np.conj(seen_ohm) * slope) - turn * ohm
    return np.where(down, np.inf, ohm), np.where(down, 0.0, rise)


def _along(
    track: Track,
    grid: Reals,
    seen: tuple[Numbers, Numbers],
    terms: tuple[Reals, Numbers],
    length_m: Reals,
) -> tuple[Along, Flags]:
    ohm, rise = _largest_shunt(terms, seen)
    at = np.argmin(ohm, axis=0)[np.newaxis]
    least = np.take_along_axis(ohm, at, axis=0)[0]
    shares = np.broadcast_to(grid, ohm.shape)
    share = np.take_along_axis(shares, at, axis=0)[0]
    least, share = np.asarray(least), np.asarray(share)
    for low, high, falls, rises in zip(shares[:-1], shares[1:], rise[:-1] < 0, rise[1:] > 0, strict=True):
        rows = falls & rises
        if rows.any():
            _refine(track, terms, rows, (low[rows], high[rows]), (share, least))
    released = np.isinf(least)
    worst = Place(np.where(released, np.inf, share * length_m), least)
    return Along(ohm[0], ohm[len(ohm) // 2], ohm[-1], worst), released


def _refine(
    track: Track,
    terms: tuple[Reals, Numbers],
    rows: Flags,
    bracket: tuple[Reals, Reals],
    best: tuple[Reals, Reals],
) -> None:
    """Lower `best` (share, ohm) in `rows` to a minimum inside `bracket`: bisection, then one secant step.

    Twelve halvings and the secant leave the place within 1e-8 of the section, the value within rounding.
    """
    part = _rows(track, rows)
    few = (_pick(terms[0], rows), _pick(terms[1], rows))
    low, high = bracket

    def at(place: Reals) -> tuple[Reals, Reals]:
        return _largest_shunt(few, part.seen(place))

    for _ in range(12):
        middle = (low + high) / 2
        falling = at(middle)[1] < 0
        low, high = np.where(falling, middle, low), np.where(falling, high, middle)
    fall, rise = at(low)[1], at(high)[1]
    place = low + (high - low) * fall / (fall - np.where(rise > fall, rise, fall + 1))
    ohm, _ = at(place)
    better = ohm < best[1][rows]
    best[0][rows] = np.where(better, place, best[0][rows])
    best[1][rows] = np.where(better, ohm, best[1][rows])


def _rows(track: Track, rows: Flags) -> Track:
    ends = Ends(*(_pick(getattr(track.ends, field.name), rows) for field in fields(Ends)))
    return Track(ends, _pick(track.under, rows), track.first, track.last)


def _pick(value: Numbers, rows: Flags) -> Numbers:
    return np.broadcast_to(value, rows.shape)[rows]
