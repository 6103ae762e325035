"""A circuit as it stands and in its two worst cases, and the refusal of what no circuit has.

Circuits of the register come from `circuits`; here is what they share with those that are sent.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import dataclass, replace
from typing import Any

from service.electrical.changes import Spread, clear_case, occupied_case
from service.electrical.circuit import PlainCircuit
from service.electrical.relay import VaneRelay
from service.errors import Fault, NonPhysicalError, NotAcceptableError

PLAIN_MODEL = "A feed, a uniform line and a relay, solved exactly in the steady state."
LINE_ASSUMPTIONS = (
    "Rails and ballast are uniform along the section, and rails are not connected to earth.",
    "Impedances are those at the circuit's own frequency; voltages and currents are rms.",
)


@dataclass(frozen=True, slots=True)
class Cases:
    """A circuit as it stands, and how far its values wander; None where nothing is said of that."""

    nominal: PlainCircuit
    spread: Spread | None
    model: str
    assumptions: tuple[str, ...]

    def worst(self) -> tuple[PlainCircuit, PlainCircuit] | None:
        """The clear case, hardest to pick the relay up in, and the occupied, hardest to detect a train in."""
        if self.spread is None:
            return None
        return clear_case(self.nominal, self.spread), occupied_case(self.nominal, self.spread)


@contextmanager
def pointed(prefix: str, *, whole: bool = False) -> Iterator[None]:
    """Turn what no circuit has into a fault with a pointer that begins with `prefix`, or is all of it."""
    try:
        yield
    except NonPhysicalError as error:
        pointer = prefix if whole else prefix + "".join(f"/{part}" for part in error.field)
        fault = Fault("not_physical", error.reason, pointer)
        raise NotAcceptableError("No real circuit has such a value.", (fault,)) from None


def plain(circuit: PlainCircuit, wandering: Mapping[str, Any] | None) -> Cases:
    """Cases of a circuit that is sent.

    `wandering` holds members of `Spread`, None asks for the circuit as it stands alone. What it does not
    say does not wander, but for the ballast, which dries out to infinity.

    Raises
    ------
    NotAcceptableError
        A spread that no circuit has.
    """
    if wandering is None:
        return Cases(circuit, None, PLAIN_MODEL, LINE_ASSUMPTIONS)
    spread = widened(steady((float(circuit.line.ballast_ohm_km), math.inf)), circuit, wandering)
    return Cases(circuit, spread, PLAIN_MODEL, (*LINE_ASSUMPTIONS, *spread_assumptions(spread, circuit)))


def steady(ballast_ohm_km: tuple[float, float]) -> Spread:
    """Nothing wanders but the ballast, from wet to dry [ohm·km]."""
    one = (1.0, 1.0)
    return Spread(one, one, one, ballast_ohm_km, 1.0, 1.0, coil_c=None, local_follows=True)


def widened(spread: Spread, circuit: PlainCircuit, wandering: Mapping[str, Any]) -> Spread:
    """A spread with what `wandering` says in place of its own.

    Raises
    ------
    NotAcceptableError
        A spread that no circuit has, with a pointer.
    """
    if wandering.get("coil_c") is not None and float(circuit.frequency_hz) != 0:
        fault = Fault("not_physical", "a coil's temperature counts in DC circuits only", "/spread/coil_c")
        raise NotAcceptableError("No real circuit has such a value.", (fault,))
    with pointed("/spread"):
        return replace(spread, **wandering)


def spread_assumptions(spread: Spread, circuit: PlainCircuit) -> Iterator[str]:
    """How far the worst cases go, in words."""
    wet, dry = (f"{ohm_km:g}" if math.isfinite(ohm_km) else "infinite" for ohm_km in spread.ballast_ohm_km)
    yield (
        f"Worst cases: supply × {spread.supply[0]:.4g} to {spread.supply[1]:.4g}, rails × "
        f"{spread.loop_ohm[0]:.4g} to {spread.loop_ohm[1]:.4g}, feed impedance × {spread.feed_ohm[0]:.4g} to "
        f"{spread.feed_ohm[1]:.4g}, pick-up × {spread.pick_up:.4g}, drop-away × {spread.drop_away:.4g}, "
        f"ballast {wet} to {dry} Ω·km."
    )
    if spread.coil_c is None:
        yield "The coil's temperature is left as it is stated at, 20 °C."
    else:
        yield f"The coil is between {spread.coil_c[0]:g} and {spread.coil_c[1]:g} °C."
    if isinstance(circuit.relay, VaneRelay):
        local = "follows the feed's" if spread.local_follows else "is apart from the feed's"
        yield f"The local winding's supply {local}."
