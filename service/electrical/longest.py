"""The longest circuit that meets its requirements in every ballast, its feed kept or adjusted.

The requirements and their margins are those of `setting`; lengths that traction current allows are
in `traction`.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Reals, positive
from service.electrical.changes import with_length
from service.electrical.circuit import PlainCircuit
from service.electrical.setting import NAMES, Adjust, Requirements, adjusted_by, least_of, margins_of
from service.electrical.spans import spans
from service.errors import NoAnswerError

# Lengths looked at before the edge is refined, and settings for each, in so many rounds of narrowing.
_COARSE = 33
_ROUNDS = 3


@dataclass(frozen=True, slots=True)
class Longest:
    """The longest circuit that meets the requirements [m] and what binds it, `range` where nothing does."""

    length_m: float
    binds: str


def longest(
    circuit: PlainCircuit,
    requirements: Requirements,
    upto_m: float,
    adjustment: tuple[Adjust, float, float] | None,
) -> Longest:
    """Find the longest length at which the requirements are met.

    Parameters
    ----------
    circuit : PlainCircuit
        Plain numbers; its own length and ballast are left aside.
    requirements : Requirements
        What must hold, and over which ballast.
    upto_m : float
        Where the search ends [m].
    adjustment : (str, float, float), optional
        What may be adjusted for each length, and between which ends; None keeps the feed as it is.

    Returns
    -------
    Longest
        To a relative 1e-9 where the feed is kept, to 1e-4 where it is adjusted.

    Raises
    ------
    NoAnswerError
        Code `no_length`: met at no length.

    Examples
    --------
    The 2008 exam question: 5 V, 12 ohm, 9 ohm relay of 40 mA, 2.5 ohm·km, lossless rails.

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.relay import relay_by_current
    >>> relay = relay_by_current(9.0, 0.0, 0.04, 0.0272)
    >>> circuit = PlainCircuit(0.0, Feed(5.0, 12.0), Line(1000.0, 0.0, 2.5), relay)
    >>> found = longest(circuit, Requirements(1.0, 0.06, 1.0, np.inf, 2.5, 2.5), 5000.0, None)
    >>> round(found.length_m / 1000, 3), found.binds
    (2.407, 'pick_up')
    """
    positive(("upto_m",), upto_m)
    lengths = np.linspace(upto_m / _COARSE, upto_m, _COARSE)

    def margins(lengths_m: Reals) -> Reals:
        """Margins at each length, at the best setting where it may be adjusted."""
        if adjustment is None:
            return margins_of(with_length(circuit, lengths_m[:, np.newaxis]), requirements)
        return _best_margins(
            with_length(circuit, lengths_m[:, np.newaxis, np.newaxis]), requirements, *adjustment
        )

    found = spans(lambda values: least_of(margins(values)), lengths)
    if not found:
        raise NoAnswerError("no_length", "the requirements are met at no length up to the one given")
    length_m = found[-1][1]
    if length_m == upto_m:
        return Longest(length_m, "range")
    return Longest(length_m, NAMES[int(np.argmin(margins(np.asarray([length_m]))[:, 0]))])


def _best_margins(
    circuit: PlainCircuit, requirements: Requirements, adjust: Adjust, low: float, high: float
) -> Reals:
    """Margins of each requirement at the best setting for each length, on the first axis of the circuit."""
    change = adjusted_by(circuit, adjust)
    count = np.shape(circuit.line.length_m)[0]
    row = np.arange(count)
    lows, highs, best = np.full(count, low), np.full(count, high), np.full((len(NAMES), count), -np.inf)
    for _ in range(_ROUNDS):
        values = np.linspace(lows, highs, _COARSE, axis=-1)
        margins = margins_of(change(values), requirements)
        at = np.argmax(least_of(margins), axis=-1)
        lows, highs = values[row, np.maximum(at - 1, 0)], values[row, np.minimum(at + 1, _COARSE - 1)]
        best = margins[:, row, at]
    return best
