"""Array types of the electrical models and the checks they all make on their inputs.

Every input may be a number or an array; arrays broadcast. Every result is an array, of shape `()`
where all inputs were numbers. Nothing here knows what the numbers mean.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any, TypeAlias

import numpy as np
import numpy.typing as npt

from service.errors import NoAnswerError, NonPhysicalError

Reals: TypeAlias = npt.NDArray[np.float64]
Phasors: TypeAlias = npt.NDArray[np.complex128]
Flags: TypeAlias = npt.NDArray[np.bool_]
RealLike: TypeAlias = float | Reals
PhasorLike: TypeAlias = complex | Reals | Phasors

# Direct current is computed in real numbers, alternating current in complex ones, by the same code.
Numbers: TypeAlias = npt.NDArray[Any]

Path: TypeAlias = tuple[str | int, ...]


def positive(path: Path, value: RealLike) -> None:
    """Refuse what is not finite and greater than zero.

    Raises
    ------
    NonPhysicalError
        With `path`, the place of the input inside its circuit.
    """
    _all(path, value, lambda v: np.isfinite(v) & (v > 0), "must be finite and greater than zero")


def positive_or_infinite(path: Path, value: RealLike) -> None:
    """Refuse what is not greater than zero; infinite is legal (ballast, breaks).

    Raises
    ------
    NonPhysicalError
        With `path`.
    """
    _all(path, value, lambda v: v > 0, "must be greater than zero")


def not_negative(path: Path, value: RealLike) -> None:
    """Refuse what is not finite or is less than zero.

    Raises
    ------
    NonPhysicalError
        With `path`.
    """
    _all(path, value, lambda v: np.isfinite(v) & (v >= 0), "must be finite and not negative")


def passive(path: Path, value: PhasorLike) -> None:
    """Refuse an impedance that is not finite or whose resistance is negative.

    Raises
    ------
    NonPhysicalError
        With `path`.
    """
    _all(path, value, np.isfinite, "must be finite")
    _all(path, value, lambda v: np.real(v) >= 0, "a passive impedance has no negative resistance")


def answerable(value: Numbers, what: str) -> Numbers:
    """Pass `value` on, or say that the circuit is degenerate where it is not finite.

    Raises
    ------
    NoAnswerError
        Code `degenerate`.
    """
    if not np.isfinite(value).all():
        raise NoAnswerError("degenerate", f"{what} has no finite value in this circuit")
    return value


def _all(path: Path, value: PhasorLike, good: Callable[[Numbers], Numbers], reason: str) -> None:
    if not np.all(good(np.asarray(value))):
        raise NonPhysicalError(path, reason)
