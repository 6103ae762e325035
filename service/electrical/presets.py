"""Circuits of the trade's kinds from their equipment: what stands where between feed, rails and relay.

Takes plain numbers; which record holds them is the register's affair. Kinds without a linear model
say so. Impedances at the rails' side of a transformer are as measured there.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, replace

import numpy as np

from service.electrical.arrays import PhasorLike, Phasors, RealLike, passive, positive
from service.electrical.chain import series, shunt, transformer
from service.electrical.circuit import Element, EquippedCircuit, Feed, Line, PlainCircuit, phasor
from service.electrical.relay import Relay
from service.errors import NoAnswerError

_NO_MODEL = {
    "impulse": "high-voltage impulses break down the rail film; no linear model applies",
    "coded": "a coded circuit's receiver judges the code, not a level; no linear model applies",
}


@dataclass(frozen=True, slots=True)
class RailEnd:
    """What stands between one end of the rails and its feed or relay in an AC circuit.

    Attributes
    ----------
    turns_ratio : array_like
        Winding at the feed or relay : winding at the rails; over one steps down to the rails.
    series_ohm : array_like
        Regulating impedance, transformer windings and leads, on the rails' side [ohm].
    """

    turns_ratio: RealLike
    series_ohm: PhasorLike


def direct_current(
    feed: Feed, feed_leads_ohm: RealLike, line: Line, relay_leads_ohm: RealLike, relay: Relay
) -> PlainCircuit:
    """Make a circuit of kind `dc` or `dc_ac_immune`.

    Parameters
    ----------
    feed : Feed
        Emf [V] behind the regulating resistance [ohm].
    feed_leads_ohm : array_like
        Cables, and the DC resistance of a choke where there is one [ohm].
    line : Line
        The rails; both of them carry the signal current, so the loop is twice one rail.
    relay_leads_ohm : array_like
        As at the feed [ohm].
    relay : Relay
        The relay itself, its own `series_ohm` included.

    Returns
    -------
    PlainCircuit
        At 0 Hz.

    Notes
    -----
    A relay's immunity to AC changes nothing here; it bounds the traction current in `traction`.

    Examples
    --------
    A choke of 3 ohm before the relay (IR SEM 2021: 120 ohm to traction):

    >>> circuit = direct_current(Feed(6.0, 3.0), 0.5, Line(750.0, 0.07, 2.0), 3.0, Relay(9.0, 0.0, 1.75, 1.2))
    >>> float(circuit.feed.series_ohm), float(circuit.relay.series_ohm)
    (3.5, 3.0)
    """
    passive(("feed_leads_ohm",), feed_leads_ohm)
    passive(("relay_leads_ohm",), relay_leads_ohm)
    return PlainCircuit(
        frequency_hz=0.0,
        feed=replace(feed, series_ohm=np.asarray(feed.series_ohm) + np.asarray(feed_leads_ohm)),
        line=line,
        relay=replace(relay, series_ohm=np.asarray(relay.series_ohm) + np.asarray(relay_leads_ohm)),
    )


def ac_single_rail(
    frequency_hz: RealLike, feed: Feed, feed_end: RailEnd, line: Line, relay_end: RailEnd, relay: Relay
) -> EquippedCircuit:
    """Make a circuit of kind `ac_single_rail`: transformer and regulating impedance at each end.

    Parameters
    ----------
    frequency_hz : array_like
        Signalling frequency, not zero [Hz].
    feed : Feed
        At that frequency, as all that follows.
    feed_end : RailEnd
        Equipment between the feed and the rails.
    line : Line
        The rails.
    relay_end : RailEnd
        Equipment between the rails and the relay.
    relay : Relay
        By voltage or by torque.

    Returns
    -------
    EquippedCircuit
        Feed, step-down, series impedance, line, series impedance, step-up, relay.
    """
    return _alternating(frequency_hz, feed, _inward(feed_end), line, _outward(relay_end), relay)


def ac_double_rail(
    frequency_hz: RealLike,
    feed: Feed,
    feed_end: RailEnd,
    feed_bond_ohm: PhasorLike,
    line: Line,
    relay_bond_ohm: PhasorLike,
    relay_end: RailEnd,
    relay: Relay,
) -> EquippedCircuit:
    """Make a circuit of kind `ac_double_rail`: as the single-rail one, an impedance bond across each end.

    Parameters
    ----------
    frequency_hz : array_like
        Signalling frequency, not zero [Hz].
    feed : Feed
        At that frequency, as all that follows.
    feed_end : RailEnd
        Equipment between the feed and the rails.
    feed_bond_ohm : array_like
        Impedance of the bond from rail to rail, plain or as `resonated_bond` gives it [ohm].
    line : Line
        The rails.
    relay_bond_ohm : array_like
        As at the feed end [ohm].
    relay_end : RailEnd
        Equipment between the rails and the relay.
    relay : Relay
        By voltage or by torque.

    Returns
    -------
    EquippedCircuit
        With elements named `feed bond` and `relay bond`.

    Examples
    --------
    220 V through 20 : 1 and 1 ohm, bonds of 0.03 + j0.35 ohm, 1.5 km, 1 : 13 to the relay:

    >>> from service.electrical.circuit import operating_point
    >>> relay = Relay(120 + 200j, 0.0, 10.0, 6.0)
    >>> bond, line = 0.03 + 0.35j, Line(1500.0, 0.45 + 0.6j, 8.0)
    >>> circuit = ac_double_rail(
    ...     50.0, Feed(220.0, 0.0), RailEnd(20.0, 1.0), bond, line, bond, RailEnd(13.0, 0.05), relay
    ... )
    >>> round(abs(complex(operating_point(circuit).relay_v)), 2)
    7.36
    """
    inward = (*_inward(feed_end), Element("feed bond", shunt(feed_bond_ohm)))
    outward = (Element("relay bond", shunt(relay_bond_ohm)), *_outward(relay_end))
    return _alternating(frequency_hz, feed, inward, line, outward, relay)


def audio_frequency(
    frequency_hz: RealLike,
    transmitter: Feed,
    feed_tuning_ohm: PhasorLike,
    line: Line,
    relay_tuning_ohm: PhasorLike,
    receiver: Relay,
    tuned_zone_m: tuple[float, float],
) -> EquippedCircuit:
    """Make a circuit of kind `audio_frequency`: its receiver is a threshold at one frequency.

    Parameters
    ----------
    frequency_hz : array_like
        Carrier, not zero [Hz].
    transmitter : Feed
        Emf and output impedance as seen at the rails [V, ohm].
    feed_tuning_ohm : array_like
        What the tuning unit and its zone put across the rails at this frequency [ohm].
    line : Line
        The rails from tuning unit to tuning unit.
    relay_tuning_ohm : array_like
        As at the feed end [ohm].
    receiver : Relay
        Input impedance, and the levels at which it shows clear and occupied.
    tuned_zone_m : tuple of float
        Length at the feed end and at the relay end in which no answer is given; 0 with joints [m].

    Returns
    -------
    EquippedCircuit
        With elements named `feed tuning` and `relay tuning`.
    """
    inward = (Element("feed tuning", shunt(feed_tuning_ohm)),)
    outward = (Element("relay tuning", shunt(relay_tuning_ohm)),)
    return _alternating(frequency_hz, transmitter, inward, line, outward, receiver, tuned_zone_m)


def resonated_bond(
    bond_ohm: PhasorLike, frequency_hz: RealLike, capacitor_f: RealLike, turns_ratio: RealLike
) -> Phasors:
    """Impedance of a bond with a capacitor on its secondary [ohm].

    Parameters
    ----------
    bond_ohm : array_like
        The plain bond from rail to rail at this frequency [ohm].
    frequency_hz : array_like
        [Hz].
    capacitor_f : array_like
        [F].
    turns_ratio : array_like
        Secondary : primary between the rails.

    Returns
    -------
    array of complex
        1/(1/Z + n^2 j 2 pi f C).

    Examples
    --------
    A bond of 0.03 + j0.35 ohm at 50 Hz, brought to resonance through 10 : 1:

    >>> ohm = resonated_bond(0.03 + 0.35j, 50.0, 90e-6, 10.0)
    >>> round(abs(complex(ohm)), 2)
    4.11
    """
    passive(("bond_ohm",), bond_ohm)
    positive(("bond_ohm",), np.abs(bond_ohm))
    for path, value in (
        ("frequency_hz", frequency_hz),
        ("capacitor_f", capacitor_f),
        ("turns_ratio", turns_ratio),
    ):
        positive((path,), value)
    siemens = 2j * math.pi * np.asarray(frequency_hz) * np.asarray(capacitor_f)
    return phasor(1 / (1 / np.asarray(bond_ohm) + np.asarray(turns_ratio) ** 2 * siemens))


def refuse_without_model(circuit_kind: str) -> None:
    """Say plainly that a circuit kind has no linear model; pass every other kind.

    Raises
    ------
    NoAnswerError
        Code `no_linear_model`, for `impulse` and `coded`.
    """
    if circuit_kind in _NO_MODEL:
        raise NoAnswerError("no_linear_model", _NO_MODEL[circuit_kind])


def _alternating(
    frequency_hz: RealLike,
    feed: Feed,
    inward: tuple[Element, ...],
    line: Line,
    outward: tuple[Element, ...],
    relay: Relay,
    tuned_zone_m: tuple[float, float] = (0.0, 0.0),
) -> EquippedCircuit:
    positive(("frequency_hz",), frequency_hz)
    return EquippedCircuit(frequency_hz, feed, line, relay, inward, outward, tuned_zone_m)


def _inward(end: RailEnd) -> tuple[Element, ...]:
    return (
        Element("feed transformer", transformer(end.turns_ratio)),
        Element("feed series", series(end.series_ohm)),
    )


def _outward(end: RailEnd) -> tuple[Element, ...]:
    positive(("turns_ratio",), end.turns_ratio)
    return (
        Element("relay end series", series(end.series_ohm)),
        Element("relay transformer", transformer(1 / np.asarray(end.turns_ratio))),
    )
