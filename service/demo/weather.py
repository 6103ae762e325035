"""Two years of invented weather: how wet the ballast is on each day, and when it is frozen.

A first-order random walk with rain and seasons. What wetness does to a section's ballast is in `tracks`.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from datetime import date, timedelta

import numpy as np

from service.rules.words import Ballast

WET_SPELL = range(30, 41)
DRY_SPELL = range(8, 17)
"""Days before today on which it is wet and dry in every build, so that planted faults have their weather."""

_DRIES = 0.72
"""Share of its wetness that ballast keeps from one day to the next."""


@dataclass(frozen=True, slots=True)
class Day:
    """`wetness` runs from 0, the driest ballast, to 1, the wettest; degrees Celsius."""

    wetness: float
    temperature_c: float

    @property
    def ballast(self) -> Ballast:
        """The word a technician writes down."""
        if self.temperature_c < -1.5:
            return Ballast.FROZEN
        for limit, word in ((0.3, Ballast.DRY), (0.55, Ballast.DAMP), (0.97, Ballast.WET)):
            if self.wetness < limit:
                return word
        return Ballast.FLOODED


def weather(today: date, days: int, rng: np.random.Generator) -> dict[date, Day]:
    """The days before today, today included."""
    found: dict[date, Day] = {}
    wetness, swing = 0.4, 0.0
    for ago in range(days, -1, -1):
        day = today - timedelta(days=ago)
        winter = math.cos(2 * math.pi * (day.timetuple().tm_yday - 15) / 365)
        rain = rng.exponential(0.45) if rng.random() < 0.27 + 0.12 * winter else 0.0
        wetness = min(1.0, (_DRIES + 0.08 * winter) * wetness + rain)
        swing = 0.8 * swing + rng.normal(0.0, 1.8)
        temperature_c = 10 - 8 * winter + swing
        if ago in WET_SPELL:
            wetness, temperature_c = 0.85, max(temperature_c, 4.0)
        elif ago in DRY_SPELL:
            wetness, temperature_c = 0.08, max(temperature_c, 2.0)
        found[day] = Day(wetness, round(temperature_c, 1))
    return found
