"""The leakage, inside its range, and the place at which a fault hides best from a relay.

A grid narrowed around the highest relay voltage. Which faults there are and what hiding means is
said in `bonding`, the voltages come from `network`.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from service.electrical.arrays import Numbers, Reals, positive_or_infinite
from service.electrical.network import Leakage, Network, network
from service.errors import NonPhysicalError

Pair: TypeAlias = tuple[float, float]

# Steps along a range and rounds of narrowing: of the ballast alone, or of ballast and earth together.
_STEPS_ALONE, _ROUNDS_ALONE = 8, 6
_STEPS_TOGETHER, _ROUNDS_TOGETHER = 4, 10
_PLACES = 65
# So many rounds in a row that gain less than this factor end the search early.
_QUIET, _GAIN = 2, 1 + 1e-9


@dataclass(frozen=True, slots=True)
class Ranges:
    """From low to high: ballast, and each rail to earth, None where that path is not known [ohm·km]."""

    ballast_ohm_km: Pair
    rail_to_earth_ohm_km: Pair | None

    def __post_init__(self) -> None:
        """Refuse ranges upside down."""
        pairs = (("ballast_ohm_km", self.ballast_ohm_km), ("rail_to_earth_ohm_km", self.rail_to_earth_ohm_km))
        for name, pair in pairs:
            if pair is None:
                continue
            positive_or_infinite((name,), np.asarray(pair))
            if pair[0] > pair[1]:
                raise NonPhysicalError((name,), "the low end is over the high end")


@dataclass(frozen=True, slots=True)
class Worst:
    """Highest relay voltage, the place and the one leakage it has it at."""

    relay_v: complex
    place_m: float
    leakage: Leakage


@dataclass(frozen=True, slots=True)
class Box:
    """Ends of what is searched: leakage of the ballast, and of each rail to earth if known [S/km]."""

    ballast: Pair
    earth: Pair | None

    @classmethod
    def of(cls, ranges: Ranges) -> Box:
        """Whole ranges, as leakages."""
        earth = ranges.rail_to_earth_ohm_km
        low, high = ranges.ballast_ohm_km
        return cls((1 / high, 1 / low), None if earth is None else (1 / earth[1], 1 / earth[0]))

    def leakage(self) -> Leakage:
        """Every combination on the grid; a range without width has one point."""
        ballast = self._points(self.ballast)
        if self.earth is None:
            return Leakage(np.zeros_like(ballast), 2 * ballast)
        pairs = np.meshgrid(ballast, self._points(self.earth))
        return Leakage(*(axis.ravel() for axis in pairs))

    def around(self, at: Leakage) -> Box:
        """Narrow to one step of the grid on each side."""
        if self.earth is None:
            return Box(self._near(self.ballast, float(at.rail_to_earth[0]) / 2), None)
        return Box(
            self._near(self.ballast, float(at.rail_to_rail[0])),
            self._near(self.earth, float(at.rail_to_earth[0])),
        )

    @property
    def steps(self) -> int:
        """Steps of the grid along a range."""
        return _STEPS_ALONE if self.earth is None else _STEPS_TOGETHER

    def _points(self, pair: Pair) -> Reals:
        return np.linspace(*pair, self.steps + 1) if pair[0] < pair[1] else np.asarray(pair[:1])

    def _near(self, pair: Pair, at: float) -> Pair:
        step = (pair[1] - pair[0]) / self.steps
        return max(pair[0], at - step), min(pair[1], at + step)


def worst_of(
    start: Network, ranges: Ranges, answer: Callable[[Network, Reals], Numbers], length_m: float
) -> Worst:
    """Narrow leakage and place together around the highest voltage; `start` is the first grid, solved."""
    box, solved = Box.of(ranges), start
    low, high = 0.0, length_m
    worst, quiet = Worst(0j, 0.0, start.leakage), 0
    for _ in range(_ROUNDS_ALONE if box.earth is None else _ROUNDS_TOGETHER):
        places = np.linspace(low, high, _PLACES)
        volts = answer(solved, places)
        row, column = np.unravel_index(int(np.argmax(np.abs(volts))), volts.shape)
        at = Leakage(*(side[[row]] for side in (solved.leakage.rail_to_rail, solved.leakage.rail_to_earth)))
        before, worst = worst, Worst(complex(volts[row, column]), float(places[column]), at)
        quiet = quiet + 1 if abs(worst.relay_v) <= abs(before.relay_v) * _GAIN else 0
        if quiet == _QUIET:
            break
        reach = (high - low) / box.steps
        low, high = max(low, worst.place_m - reach), min(high, worst.place_m + reach)
        box = box.around(at)
        if solved.leakage.rail_to_rail.size > 1:
            solved = network(solved.layout, box.leakage())
    return worst
