"""Two-ports in cascade: series and shunt impedances, ideal transformers, and what they do to ends.

Chain (ABCD) form with the current leaving port 2: V1 = A V2 + B I2, I1 = C V2 + D I2; port 1 is
towards the feed. The uniform line is in `line`, what stands at which end of a section in `presets`.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import reduce
from operator import matmul

import numpy as np

from service.electrical.arrays import Numbers, PhasorLike, RealLike, answerable, passive, positive


@dataclass(frozen=True, slots=True)
class TwoPort:
    """The chain matrix [[A, B], [C, D]] of a linear two-port; B in [ohm], C in [S].

    Each member is an array; `p @ q` puts `q` behind `p`, seen from the feed.

    References
    ----------
    Chain parameters as in any text on two-ports, e.g. HELM Workbook 30 for the ladder.
    """

    a: Numbers
    b: Numbers
    c: Numbers
    d: Numbers

    def __matmul__(self, other: TwoPort) -> TwoPort:
        """Cascade: this two-port, then `other`."""
        return TwoPort(
            self.a * other.a + self.b * other.c,
            self.a * other.b + self.b * other.d,
            self.c * other.a + self.d * other.c,
            self.c * other.b + self.d * other.d,
        )

    def input_ohm(self, load_ohm: Numbers) -> Numbers:
        """Impedance at port 1 with `load_ohm` on port 2 [ohm]: (A Z + B)/(C Z + D).

        Raises
        ------
        NoAnswerError
            Code `degenerate`: it is infinite.
        """
        return ratio(self.a * load_ohm + self.b, self.c * load_ohm + self.d, "the input impedance")

    def thevenin(self, emf_v: Numbers, series_ohm: Numbers) -> tuple[Numbers, Numbers]:
        """What a source behind port 1 looks like at port 2: open voltage [V], impedance [ohm].

        E' = E/(A + Z C), Z' = (B + Z D)/(A + Z C).

        Raises
        ------
        NoAnswerError
            Code `degenerate`: the source is infinite there.
        """
        under = self.a + series_ohm * self.c
        return (
            ratio(emf_v, under, "the open voltage of the feed"),
            ratio(self.b + series_ohm * self.d, under, "the impedance of the feed"),
        )


def series(ohm: PhasorLike) -> TwoPort:
    """Impedance in one conductor [ohm], zero allowed.

    Raises
    ------
    NonPhysicalError
        Path `("ohm",)`: not finite, or negative resistance.

    Examples
    --------
    >>> float(series(7.2).input_ohm(np.asarray(20.0)))
    27.2
    """
    passive(("ohm",), ohm)
    return TwoPort(np.asarray(1.0), np.asarray(ohm), np.asarray(0.0), np.asarray(1.0))


def shunt(ohm: PhasorLike) -> TwoPort:
    """Impedance across the pair [ohm], not zero.

    Raises
    ------
    NonPhysicalError
        Path `("ohm",)`: zero, not finite, or negative resistance.

    Examples
    --------
    >>> float(shunt(20.0).input_ohm(np.asarray(20.0)))
    10.0
    """
    passive(("ohm",), ohm)
    positive(("ohm",), np.abs(ohm))
    return TwoPort(np.asarray(1.0), np.asarray(0.0), 1 / np.asarray(ohm), np.asarray(1.0))


def transformer(turns_ratio: RealLike) -> TwoPort:
    """Ideal transformer, `turns_ratio` : 1, port 1 having `turns_ratio` times the voltage of port 2.

    Over one it steps down towards the relay, under one it steps up.

    Raises
    ------
    NonPhysicalError
        Path `("turns_ratio",)`: not greater than zero.

    Examples
    --------
    >>> float(transformer(10.0).input_ohm(np.asarray(2.0)))
    200.0
    """
    positive(("turns_ratio",), turns_ratio)
    n = np.asarray(turns_ratio, dtype=np.float64)
    return TwoPort(n, np.asarray(0.0), np.asarray(0.0), 1 / n)


def cascade(*two_ports: TwoPort) -> TwoPort:
    """Put two-ports one behind the other, the first nearest the feed; none at all is a plain wire.

    Examples
    --------
    Two sections of HELM Workbook 30's ladder, 0.034 ohm and 30 ohm each, before a 10 ohm relay:

    >>> section = series(0.034) @ shunt(30.0)
    >>> round(float(cascade(section, section).input_ohm(np.asarray(10.0))), 4)
    6.0557
    """
    return reduce(matmul, two_ports, series(0.0))


def ratio(over: Numbers, under: Numbers, what: str) -> Numbers:
    """Divide, or say that `what` has no finite value in this circuit.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.
    """
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        return answerable(np.divide(over, under), what)
