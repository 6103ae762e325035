"""Where a margin is not negative along one variable, and where it is greatest.

For `season` and `setting`: their margins come from the models and are continuous. Crossings closer
together than two neighbours of the grid are not seen.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import TypeAlias

import numpy as np

from service.electrical.arrays import Reals

Span: TypeAlias = tuple[float, float]
Margin: TypeAlias = Callable[[Reals], Reals]


def spans(margin: Margin, grid: Reals) -> tuple[Span, ...]:
    """Closed intervals in which a margin is not negative, ends to a relative 1e-12.

    Parameters
    ----------
    margin : callable
        Takes an array and gives one margin for each of its members; finite.
    grid : array
        Rising; its ends bound the search.

    Returns
    -------
    tuple of (float, float)
        In rising order.

    Examples
    --------
    >>> spans(lambda x: 1 - x * x, np.linspace(-3.0, 0.5, 8))
    ((-1.0, 0.5),)
    """
    good = margin(grid) >= 0
    turns = np.flatnonzero(good[1:] != good[:-1])
    edges = [crossing(margin, float(grid[i]), float(grid[i + 1])) for i in turns]
    if good[0]:
        edges.insert(0, float(grid[0]))
    if good[-1]:
        edges.append(float(grid[-1]))
    return tuple(zip(edges[::2], edges[1::2], strict=True))


def crossing(margin: Margin, low: float, high: float) -> float:
    """Where a margin changes its sign between two places."""
    from scipy.optimize import brentq  # slow to import, and most callers never ask

    def one(place: float) -> float:
        """Margin at one place."""
        return float(margin(np.asarray([place]))[0])

    return float(brentq(one, low, high, xtol=1e-300, rtol=1e-12))


def peak(margin: Margin, grid: Reals) -> float:
    """Where a margin is greatest: the grid's best, refined between its neighbours.

    Parameters
    ----------
    margin : callable
        As for `spans`.
    grid : array
        Rising; its ends bound the search.

    Returns
    -------
    float
        The place.

    Examples
    --------
    >>> round(peak(lambda x: 1 - (x - 0.3) ** 2, np.linspace(0.0, 1.0, 8)), 6)
    0.3
    """
    from scipy.optimize import minimize_scalar

    at = int(np.argmax(margin(grid)))
    low, high = float(grid[max(at - 1, 0)]), float(grid[min(at + 1, len(grid) - 1)])
    inside = minimize_scalar(
        lambda place: -float(margin(np.asarray([place]))[0]),
        bounds=(low, high),
        method="bounded",
        options={"xatol": 1e-10 * (high - low)},
    )
    candidates = np.asarray([float(grid[at]), float(inside.x)])
    return float(candidates[int(np.argmax(margin(candidates)))])
