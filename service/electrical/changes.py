"""A circuit with something changed, and the two worst cases a circuit must meet.

Only makes circuits; what they do is asked elsewhere. Ranges come from the caller, none is built in.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TypeVar

import numpy as np

from service.electrical.arrays import PhasorLike, RealLike, positive
from service.electrical.chain import TwoPort, transformer
from service.electrical.circuit import Element, EquippedCircuit, PlainCircuit
from service.electrical.relay import Relay, VaneRelay, at_coil_temperature
from service.errors import NonPhysicalError

AnyCircuit = TypeVar("AnyCircuit", bound=PlainCircuit)


@dataclass(frozen=True, slots=True)
class Spread:
    """How far a circuit's values wander from the ones given; pairs are (low, high).

    Attributes
    ----------
    supply, feed_ohm, loop_ohm : tuple of float
        Factors on the emf, the feed's series impedance and the rails' loop impedance.
    ballast_ohm_km : tuple of float
        Wettest and driest; the occupied case takes the second, `math.inf` unless a dry value is named.
    pick_up, drop_away : float
        Factors on the highest pick-up and the lowest drop-away of a relay of this type.
    coil_c : tuple of float, optional
        Coldest and hottest coil of a DC relay [°C]; None leaves the coil alone.
    local_follows : bool
        Whether a vane relay's local winding hangs on the same supply as the feed.
    """

    supply: tuple[float, float]
    feed_ohm: tuple[float, float]
    loop_ohm: tuple[float, float]
    ballast_ohm_km: tuple[float, float]
    pick_up: float
    drop_away: float
    coil_c: tuple[float, float] | None
    local_follows: bool

    def __post_init__(self) -> None:
        """Refuse ranges upside down."""
        for name in ("supply", "feed_ohm", "loop_ohm", "ballast_ohm_km", "coil_c"):
            pair = getattr(self, name)
            if pair is not None and not pair[0] <= pair[1]:
                raise NonPhysicalError((name,), "the low end is over the high end")
        for name in ("supply", "feed_ohm", "loop_ohm"):
            positive((name,), np.asarray(getattr(self, name)))
        positive(("pick_up",), self.pick_up)
        positive(("drop_away",), self.drop_away)


def clear_case(circuit: AnyCircuit, spread: Spread) -> AnyCircuit:
    """Make the circuit in which a relay is hardest to pick up with no train.

    Low supply, high rail impedance, wettest ballast, hottest coil, highest pick-up, highest feed
    impedance. In AC each is taken as the worse, which the season's whole sweep can check.

    Parameters
    ----------
    circuit : PlainCircuit
        As given, with nominal values.
    spread : Spread
        How far they wander.

    Returns
    -------
    PlainCircuit
        Of the same class.

    Raises
    ------
    NonPhysicalError
        Path `("coil_c",)`: a coil temperature for an AC relay.

    Examples
    --------
    >>> from service.electrical.circuit import Feed, Line, operating_point
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.6), Relay(20.0, 0.0, 1.62, 1.10))
    >>> spread = Spread((0.9, 1.1), (1.0, 1.0), (1.0, 1.5), (3.0, np.inf), 1.0, 1.0, (-10.0, 40.0), False)
    >>> case = clear_case(circuit, spread)
    >>> round(float(operating_point(case).relay_v.real), 3), round(float(case.relay.pick_up_v), 3)
    (2.388, 1.747)
    """
    wet = with_ballast(circuit, spread.ballast_ohm_km[0])
    return _moved(wet, spread, 0, 1)


def occupied_case(circuit: AnyCircuit, spread: Spread) -> AnyCircuit:
    """Make the circuit in which a train is hardest to detect.

    High supply, low rail impedance, driest ballast, coldest coil, lowest drop-away, lowest feed impedance.

    Parameters
    ----------
    circuit : PlainCircuit
        As given, with nominal values.
    spread : Spread
        How far they wander.

    Returns
    -------
    PlainCircuit
        Of the same class.

    Raises
    ------
    NonPhysicalError
        Path `("coil_c",)`: a coil temperature for an AC relay.

    Examples
    --------
    The 20 ohm circuit of the Space Weather 2023 model, its coil at -10 °C, without leakage:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.shunt import shunt_limits
    >>> circuit = PlainCircuit(0.0, Feed(10.0, 7.2), Line(1000.0, 0.0578, 10.6), Relay(20.0, 0.0, 1.62, 1.10))
    >>> spread = Spread((1.0, 1.0), (1.0, 1.0), (1.0, 1.0), (3.0, np.inf), 1.0, 1.0, (-10.0, 40.0), False)
    >>> round(float(shunt_limits(occupied_case(circuit, spread)).drop_shunt_ohm.worst.ohm), 3)
    0.812
    """
    dry = with_ballast(circuit, spread.ballast_ohm_km[1])
    return _moved(dry, spread, 1, 0)


def with_supply(circuit: AnyCircuit, factor: RealLike, *, local_follows: bool) -> AnyCircuit:
    """Change the feed's emf by a factor, and a vane relay's local voltage with it if it follows."""
    feed = replace(circuit.feed, emf_v=np.asarray(circuit.feed.emf_v) * factor)
    relay = circuit.relay
    if local_follows and isinstance(relay, VaneRelay):
        relay = replace(relay, local_v=np.asarray(relay.local_v) * factor)
    return replace(circuit, feed=feed, relay=relay)


def with_local_phase(circuit: AnyCircuit, slip_rad: RealLike) -> AnyCircuit:
    """Turn a vane relay's local voltage by an angle [rad].

    Raises
    ------
    NonPhysicalError
        Path `("relay",)`: the relay has no local winding.
    """
    if not isinstance(circuit.relay, VaneRelay):
        raise NonPhysicalError(("relay",), "this relay has no local winding")
    local_v = np.asarray(circuit.relay.local_v) * np.exp(1j * np.asarray(slip_rad))
    return replace(circuit, relay=replace(circuit.relay, local_v=local_v))


def with_ballast(circuit: AnyCircuit, ballast_ohm_km: RealLike) -> AnyCircuit:
    """Change the ballast [ohm·km]."""
    return replace(circuit, line=replace(circuit.line, ballast_ohm_km=ballast_ohm_km))


def with_length(circuit: AnyCircuit, length_m: RealLike) -> AnyCircuit:
    """Change the length [m]."""
    return replace(circuit, line=replace(circuit.line, length_m=length_m))


def with_feed_ohm(circuit: AnyCircuit, ohm: PhasorLike) -> AnyCircuit:
    """Change the feed's series impedance [ohm]."""
    return replace(circuit, feed=replace(circuit.feed, series_ohm=ohm))


def with_emf(circuit: AnyCircuit, emf_v: RealLike) -> AnyCircuit:
    """Change the feed's emf [V]."""
    return replace(circuit, feed=replace(circuit.feed, emf_v=emf_v))


def with_feed_ratio(circuit: PlainCircuit, turns_ratio: RealLike) -> PlainCircuit:
    """Change the tap of the feed transformer, as its turns ratio.

    Raises
    ------
    NonPhysicalError
        Path `("feed transformer",)`: the circuit has none.
    """
    return with_element(circuit, "feed transformer", transformer(turns_ratio))


def with_element(circuit: PlainCircuit, name: str, two_port: TwoPort) -> PlainCircuit:
    """Put another two-port in the place of a named element, as a saturated bond for a sound one.

    Raises
    ------
    NonPhysicalError
        Path `(name,)`: the circuit has no such element.
    """
    if not isinstance(circuit, EquippedCircuit) or not any(
        element.name == name for element in (*circuit.feed_end, *circuit.relay_end)
    ):
        raise NonPhysicalError((name,), "the circuit has no such element")

    def changed(end: tuple[Element, ...]) -> tuple[Element, ...]:
        """One end, the element replaced."""
        return tuple(Element(name, two_port) if element.name == name else element for element in end)

    return replace(circuit, feed_end=changed(circuit.feed_end), relay_end=changed(circuit.relay_end))


def _moved(circuit: AnyCircuit, spread: Spread, supply: int, impedance: int) -> AnyCircuit:
    moved = with_supply(circuit, spread.supply[supply], local_follows=spread.local_follows)
    feed_ohm = np.asarray(circuit.feed.series_ohm) * spread.feed_ohm[impedance]
    loop = np.asarray(circuit.line.loop_ohm_per_km) * spread.loop_ohm[impedance]
    relay = moved.relay
    if spread.coil_c is not None:
        if np.any(np.asarray(circuit.frequency_hz) != 0):
            raise NonPhysicalError(("coil_c",), "only a DC relay's voltages follow its coil's temperature")
        relay = at_coil_temperature(relay, spread.coil_c[impedance])
    moved = replace(moved, line=replace(moved.line, loop_ohm_per_km=loop), relay=_typed(relay, spread))
    return with_feed_ohm(moved, feed_ohm)


def _typed(relay: Relay, spread: Spread) -> Relay:
    return replace(
        relay,
        pick_up_v=np.asarray(relay.pick_up_v) * spread.pick_up,
        drop_away_v=np.asarray(relay.drop_away_v) * spread.drop_away,
    )
