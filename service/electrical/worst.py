"""The worst place for a shunt: smallest limiting resistance along a line, found with its exact slope.

Works on a circuit brought down to its line, two ends and clear voltage, in blocks that fit the
processor's cache. What the resistances mean is said in `shunt`.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Flags, Numbers, Reals
from service.electrical.circuit import PlainCircuit, ends_of
from service.electrical.line import UniformLine
from service.errors import NoAnswerError

# Rounds of false position in AC: the value to rounding.
_ROUNDS = 5
# Under this attenuation the logarithm in `_crossing` loses more than the straight line does.
_FLAT_NEPER = 1e-4
# Circuits worked on at a time: their working arrays stay in the cache.
_BLOCK = 4096


@dataclass(frozen=True, slots=True)
class Track:
    """What the closed forms along a circuit work on.

    Attributes
    ----------
    line : UniformLine
        The whole line.
    feed_ohm, relay_ohm : array
        At its two ends [ohm].
    under : array
        W = (Zf C + A) Zr + Zf A + B of the whole line [ohm]; the same wherever the line is cut.
    clear_v : array
        At the coil with no train [V].
    first, last : array
        Shares of the line between which a shunt may be put.
    """

    line: UniformLine
    feed_ohm: Numbers
    relay_ohm: Numbers
    under: Numbers
    clear_v: Numbers
    first: Reals
    last: Reals

    def seen(self, share: Reals) -> tuple[Numbers, Numbers]:
        """Impedance between the rails at a share of the line [ohm], and its slope over that share.

        Z = Nf Nr/W with Nf = Zf A + B before and Nr = Zr A + B behind; dNf = z Df with
        Df = Zf C + A, so dZ = z (Df Nr - Nf Dr)/W.
        """
        before, behind = self.line.part(share), self.line.part(1 - share)
        over_f, under_f = self.feed_ohm * before.a + before.b, self.feed_ohm * before.c + before.a
        over_r, under_r = self.relay_ohm * behind.a + behind.b, self.relay_ohm * behind.c + behind.a
        inverse = 1 / self.under
        slope = self.line.series_ohm * inverse * (under_f * over_r - over_f * under_r)
        return over_f * over_r * inverse, slope

    def members(self) -> tuple[Numbers, ...]:
        """Every array of the track."""
        line = self.line
        return (
            *(line.series_ohm, line.leakage_s, line.angle, line.inverse),
            *(self.feed_ohm, self.relay_ohm, self.under, self.clear_v, self.first, self.last),
        )

    def each(self, change: Callable[[Numbers], Numbers]) -> Track:
        """Apply the same selection or reshaping to every member."""
        changed = tuple(map(change, self.members()))
        return Track(UniformLine(*changed[:4]), *changed[4:])


@dataclass(frozen=True, slots=True)
class Condition:
    """The relay just answers: a R^2 + b R - |Z|^2 = 0 with b = Re(w Z*) - 2 Re Z (`Relay.shunt_terms`)."""

    excess: Reals
    steer: Numbers

    def root(self, seen_ohm: Numbers, slope: Numbers) -> tuple[Reals, Reals]:
        """Positive root R, infinite where a is not positive, and dR/dx up to a factor.

        The factor is positive and such that in DC the second answer is proportional to dZ/dx.
        """
        down = self.excess <= 0
        a = np.where(down, 1.0, self.excess)
        b, turn = self._middle(seen_ohm), self._middle(slope)
        c = _inner(seen_ohm, seen_ohm)
        root = np.sqrt(b * b + 4 * a * c)
        ohm = (root - b) / (2 * a)
        if self.steer.any():
            # Where b is positive the difference above would lose digits.
            ohm = np.where(b > 0, 2 * c / np.where(b > 0, b + root, 1.0), ohm)
        rise = 2 * _inner(seen_ohm, slope) - turn * ohm
        rise = np.divide(rise, np.sqrt(c) + ohm, out=np.zeros_like(rise), where=c > 0)
        return np.where(down, np.inf, ohm), np.where(down, 0.0, rise)

    def between(self, seen_ohm: Numbers) -> tuple[Reals, Reals]:
        """Both positive roots where a is negative, or zero twice where there are none."""
        b = self._middle(seen_ohm)
        c = _inner(seen_ohm, seen_ohm)
        under = b * b + 4 * self.excess * c
        lifts = (self.excess < 0) & (b > 0) & (under > 0)
        root = np.sqrt(np.where(lifts, under, 0.0))
        low = np.divide(2 * c, b + root, out=np.zeros_like(root), where=lifts)
        high = np.divide(b + root, -2 * self.excess, out=np.zeros_like(root), where=lifts)
        return low, high

    def each(self, change: Callable[[Numbers], Numbers]) -> Condition:
        """Apply the same selection or reshaping to both members."""
        return Condition(change(self.excess), change(self.steer))

    def _middle(self, ohm: Numbers) -> Reals:
        real: Reals = np.real(ohm)
        if not self.steer.any():
            return -2 * real
        return _inner(self.steer, ohm) - 2 * real


def _inner(one: Numbers, other: Numbers) -> Reals:
    """Re(a b*), without the imaginary part that nobody asks for."""
    real: Reals = one.real * other.real
    return real + one.imag * other.imag if np.iscomplexobj(one) else real


@dataclass(frozen=True, slots=True)
class Found:
    """The root at the first, middle and last place [ohm], the least of all and its share of the line.

    Where `exists` is false there is no root, the resistances are infinite and the share has no meaning.
    """

    first: Reals
    middle: Reals
    last: Reals
    least: Reals
    share: Reals
    exists: Flags


def track_of(circuit: PlainCircuit) -> Track:
    """Bring a circuit to what the closed forms along the line need.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.
    """
    ends = ends_of(circuit)
    whole = ends.line.part(1.0)
    under = (ends.feed_ohm * whole.c + whole.a) * ends.relay_ohm + ends.feed_ohm * whole.a + whole.b
    if np.any(under == 0):
        raise NoAnswerError("degenerate", "resonant without loss: nothing limits the current")
    length_m = np.asarray(circuit.line.length_m, dtype=np.float64)
    first_m, last_m = circuit.reach_m
    return Track(
        line=ends.line,
        feed_ohm=ends.feed_ohm,
        relay_ohm=ends.relay_ohm,
        under=under,
        clear_v=np.asarray(ends.emf_v * ends.relay_ohm / under * ends.coil_per_rail),
        first=first_m / length_m,
        last=last_m / length_m,
    )


def search(track: Track, conditions: tuple[Condition, ...]) -> tuple[Found, ...]:
    """Find the smallest root of each condition along the line; arrays of the broadcast shape."""
    members = (*track.members(), *(condition.excess for condition in conditions))
    shape = np.broadcast_shapes(*(np.shape(member) for member in members))
    size = math.prod(shape)
    blocks = []
    for start in range(0, size, _BLOCK):
        rows = slice(start, start + _BLOCK)

        def block(part: Numbers, rows: slice = rows) -> Numbers:
            return np.broadcast_to(part, shape).ravel()[rows]

        blocks.append(_search(track.each(block), [condition.each(block) for condition in conditions]))
    return tuple(
        Found(*(np.concatenate(parts).reshape(shape) for parts in zip(*found, strict=True)))
        for found in zip(*blocks, strict=True)
    )


def _search(track: Track, conditions: list[Condition]) -> list[tuple[Numbers, ...]]:
    """Members of `Found` for one block of circuits in a row."""
    grid = _grid(track)
    seen_ohm, slope = track.seen(grid)
    everyone = np.arange(track.under.size)
    found: list[tuple[Numbers, ...]] = []
    for condition in conditions:
        ohm, rise = condition.root(seen_ohm, slope)
        at = np.argmin(ohm, axis=0)
        least, share = ohm[at, everyone], grid[at, everyone]
        for i in range(len(grid) - 1):
            rows = np.flatnonzero((rise[i] < 0) & (rise[i + 1] > 0))
            if rows.size:
                place, value = _refined(track, condition, rows, grid[i : i + 2], rise[i : i + 2])
                better = value < least[rows]
                share[rows] = np.where(better, place, share[rows])
                least[rows] = np.where(better, value, least[rows])
        found.append((ohm[0], ohm[len(ohm) // 2], ohm[-1], least, share, condition.excess > 0))
    return found


def _grid(track: Track) -> Reals:
    """Shares of the line at both ends, the middle and between, one row each.

    In DC the impedance along the line has one stationary place, so three do. In AC it turns by twice
    the line's angle from end to end: two intervals and two more for each radian of that angle.
    """
    pairs = 1
    if np.iscomplexobj(track.under):
        pairs += math.ceil(np.abs(track.line.angle).max())
    steps = np.linspace(0.0, 1.0, 2 * pairs + 1)[:, np.newaxis]
    return track.first + (track.last - track.first) * steps


def _refined(
    track: Track, condition: Condition, rows: Numbers, bracket: Reals, slopes: Reals
) -> tuple[Reals, Reals]:
    """Place and value of the minimum inside `bracket`, whose slopes are negative and positive.

    Between two places the slope is read as p e^v + q e^-v with v along the line's attenuation, which
    in DC it is; in AC the false position is repeated, never leaving the bracket.
    """
    few, condition = track.each(lambda part: part[rows]), condition.each(lambda part: part[rows])
    neper = np.real(few.line.angle)
    (low, high), (fall, rise) = bracket[:, rows], slopes[:, rows]
    stayed = np.zeros_like(low)
    for _ in range(_ROUNDS if np.iscomplexobj(few.under) else 0):
        place = _crossing(low, high, fall, rise, neper)
        slope = condition.root(*few.seen(place))[1]
        left = slope < 0
        # An end that stays twice in a row has its slope scaled down (Anderson and Bjorck).
        held = np.where(left, fall, rise)
        scale = 1 - np.divide(slope, held, out=np.zeros_like(slope), where=held != 0)
        scale = np.where(stayed == np.where(left, 1, -1), np.where(scale > 0, scale, 0.5), 1.0)
        low, high = np.where(left, place, low), np.where(left, high, place)
        fall, rise = np.where(left, slope, fall * scale), np.where(left, rise * scale, slope)
        stayed = np.where(left, 1, -1)
    place = _crossing(low, high, fall, rise, neper)
    return place, condition.root(*few.seen(place))[0]


def _crossing(low: Reals, high: Reals, fall: Reals, rise: Reals, neper: Reals) -> Reals:
    """Where p e^v + q e^-v, `fall` at `low` and `rise` at `high`, is zero; linear without attenuation."""
    span = 2 * neper * (high - low)
    shrink, grow = np.exp(-span / 2), np.exp(span / 2)
    turn = np.log((rise * shrink - fall * grow) / (rise * grow - fall * shrink)) / 2
    flat = (rise + fall) / (fall - rise) / 2
    tilt = np.divide(turn, span, out=flat, where=span > _FLAT_NEPER)
    return (low + high) / 2 + (high - low) * tilt
