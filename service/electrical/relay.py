"""Track relays and receivers: what a voltage at the coil does, by voltage, by current or by torque.

A relay is known here by its impedance and the voltages at its own terminals at which it picks up
and drops away. Circuits around it are in `circuit`; limits on a fitted relay are no matter of ours.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from service.electrical.arrays import Flags, Numbers, PhasorLike, RealLike, Reals, passive, positive
from service.errors import NonPhysicalError

# IEC 60228: annealed copper's resistance is proportional to 234.5 + t, t in degrees Celsius.
_COPPER_C = 234.5
_STATED_AT_C = 20.0


@dataclass(frozen=True, slots=True)
class Relay:
    """A relay or receiver that answers to the size of the voltage at its terminals.

    Attributes
    ----------
    impedance_ohm : array_like
        Of the coil or the receiver's input [ohm].
    series_ohm : array_like
        Cable, choke or regulator between the rails and the relay [ohm].
    pick_up_v, drop_away_v : array_like
        At the coil itself [V]; the relay picks up at or over the one, releases at or under the other.
    """

    impedance_ohm: PhasorLike
    series_ohm: PhasorLike
    pick_up_v: RealLike
    drop_away_v: RealLike

    def check(self) -> None:
        """Refuse values that no relay has.

        Raises
        ------
        NonPhysicalError
            With a path that begins with `"relay"`.
        """
        passive(("relay", "impedance_ohm"), self.impedance_ohm)
        positive(("relay", "impedance_ohm"), np.abs(self.impedance_ohm))
        passive(("relay", "series_ohm"), self.series_ohm)
        positive(("relay", "pick_up_v"), self.pick_up_v)
        positive(("relay", "drop_away_v"), self.drop_away_v)
        if np.any(np.asarray(self.drop_away_v) > np.asarray(self.pick_up_v)):
            raise NonPhysicalError(("relay", "drop_away_v"), "a relay does not drop away over its pick-up")

    def pull_v(self, coil_v: Numbers) -> Reals:
        """Compute the voltage that counts against pick-up and drop-away [V]: the size of `coil_v`."""
        return np.abs(coil_v)

    def shunt_terms(self, clear_v: Numbers, threshold_v: RealLike) -> tuple[Reals, Numbers]:
        """Compute a and w of a R^2 + (Re(w Z*) - 2 Re Z) R - |Z|^2 = 0, solved in `shunt`.

        A shunt R where the rails show Z leaves V R/(R + Z); |V R/(R + Z)| = threshold gives
        a = |V/threshold|^2 - 1 and w = 0.
        """
        k = np.abs(clear_v) / threshold_v
        return (k - 1) * (k + 1), np.zeros_like(clear_v)


@dataclass(frozen=True, slots=True)
class VaneRelay(Relay):
    """A double-element vane relay: torque ∝ V_local · V_control · cos(angle - ideal angle).

    `impedance_ohm`, `pick_up_v` and `drop_away_v` are the control winding's, the two voltages with
    the rated local voltage at the ideal angle.

    Attributes
    ----------
    local_v : array_like
        Phasor of the local winding's voltage, its angle against the feed's emf [V].
    rated_local_v : array_like
        Local voltage at which pick-up and drop-away are stated [V].
    ideal_angle_rad : array_like
        Lead of the control voltage over the local voltage at which the torque is greatest [rad].

    References
    ----------
    Torque of a two-winding induction relay: the product of the two voltages and the sine of the
    angle between their fluxes (any text on induction relays).
    """

    local_v: PhasorLike
    rated_local_v: RealLike
    ideal_angle_rad: RealLike

    def check(self) -> None:
        """Refuse values that no vane relay has.

        Raises
        ------
        NonPhysicalError
            With a path that begins with `"relay"`.
        """
        Relay.check(self)
        positive(("relay", "rated_local_v"), self.rated_local_v)
        if not np.all(np.isfinite(self.local_v)):
            raise NonPhysicalError(("relay", "local_v"), "must be finite")
        if not np.all(np.isfinite(self.ideal_angle_rad)):
            raise NonPhysicalError(("relay", "ideal_angle_rad"), "must be finite")

    def pull_v(self, coil_v: Numbers) -> Reals:
        """Compute the control voltage that would pull as hard at rated local voltage and ideal angle [V].

        Negative where the torque drives the vane against its stop.

        Examples
        --------
        >>> vane = VaneRelay(100j, 0, 10.0, 7.0, local_v=110.0, rated_local_v=110.0, ideal_angle_rad=0.0)
        >>> round(float(vane.pull_v(np.asarray(10j * (0.5 - 3**0.5 / 2 * 1j)))), 3)
        8.66
        """
        pull: Reals = np.real(coil_v * self._steering())
        return pull

    def shunt_terms(self, clear_v: Numbers, threshold_v: RealLike) -> tuple[Reals, Numbers]:
        """Compute a and w of the quadratic in `Relay.shunt_terms`: w = V·steering/threshold, a = Re w - 1."""
        steer = clear_v * self._steering() / np.asarray(threshold_v)
        excess: Reals = np.real(steer) - 1
        return excess, steer

    def _steering(self) -> Numbers:
        turn = np.exp(-1j * np.asarray(self.ideal_angle_rad))
        steering: Numbers = np.conj(self.local_v) * turn / np.asarray(self.rated_local_v)
        return steering


@dataclass(frozen=True, slots=True)
class RelayState:
    """What the relay does at a pull: picks up, holds if it was up, or is released (one of three)."""

    picks_up: Flags
    holds: Flags
    released: Flags


def state_of(relay: Relay, coil_v: Numbers) -> RelayState:
    """Tell pick-up, hold and release apart, elementwise.

    Examples
    --------
    >>> state = state_of(Relay(20.0, 0.0, 1.62, 1.10), np.asarray([1.62, 1.2, 1.10]))
    >>> state.picks_up.tolist(), state.holds.tolist(), state.released.tolist()
    ([True, False, False], [False, True, False], [False, False, True])
    """
    pull = relay.pull_v(coil_v)
    picks_up = pull >= np.asarray(relay.pick_up_v)
    released = (pull <= np.asarray(relay.drop_away_v)) & ~picks_up
    return RelayState(np.asarray(picks_up), np.asarray(~picks_up & ~released), np.asarray(released))


def relay_by_current(
    impedance_ohm: PhasorLike, series_ohm: PhasorLike, pick_up_a: RealLike, drop_away_a: RealLike
) -> Relay:
    """Make a relay from its working currents [A]: V = I·|Z|.

    Examples
    --------
    81 mA and 55 mA at 20 ohm (university model of UK DC circuits, Space Weather 2023):

    >>> relay = relay_by_current(20.0, 0.0, 0.081, 0.055)
    >>> round(float(relay.pick_up_v), 2), round(float(relay.drop_away_v), 2)
    (1.62, 1.1)
    """
    size = np.abs(impedance_ohm)
    return Relay(impedance_ohm, series_ohm, np.asarray(pick_up_a) * size, np.asarray(drop_away_a) * size)


def at_coil_temperature(relay: Relay, coil_c: RealLike) -> Relay:
    """Bring a DC relay's values from 20 °C to another temperature of its copper coil [°C].

    Its ampere-turns, so its currents, stay; its resistance and with it both voltages follow
    (234.5 + t)/(254.5) (IEC 60228, annealed copper).

    Raises
    ------
    NonPhysicalError
        Path `("coil_c",)`: at or under -234.5 °C, where the law has long ceased to hold.

    Examples
    --------
    >>> cold = at_coil_temperature(Relay(20.0, 0.0, 1.62, 1.10), -10.0)
    >>> round(float(cold.impedance_ohm), 3), round(float(cold.drop_away_v), 4)
    (17.642, 0.9703)
    """
    factor = (_COPPER_C + np.asarray(coil_c)) / (_COPPER_C + _STATED_AT_C)
    positive(("coil_c",), factor)
    return replace(
        relay,
        impedance_ohm=np.asarray(relay.impedance_ohm) * factor,
        pick_up_v=np.asarray(relay.pick_up_v) * factor,
        drop_away_v=np.asarray(relay.drop_away_v) * factor,
    )
