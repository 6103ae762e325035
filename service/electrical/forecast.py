"""What a circuit will do in other weather, from what it did at its last test.

Many circuits at a time. A forecast is not a measurement: no verdict is made here, and nothing here
knows of limits.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from service.electrical.arrays import Flags, RealLike, Reals, positive, positive_or_infinite
from service.electrical.changes import with_ballast
from service.electrical.circuit import PlainCircuit, operating_point
from service.electrical.fit import Doubt, Fit, Sight, fit, moved, slopes
from service.electrical.shunt import shunt_limits


@dataclass(frozen=True, slots=True)
class Forecast:
    """A circuit's last test carried to dry and to wet ballast.

    Attributes
    ----------
    fit : Fit
        The circuit as the readings have it; its line's ballast is that of the day.
    ballast_relative_u : array
        Relative standard uncertainty of that ballast.
    dry_drop_shunt_ohm, dry_relative_u : array
        Drop shunt at the worst place in dry ballast [ohm], and its relative standard uncertainty;
        both infinite where `released_dry`.
    wet_pull_v, wet_u_v : array
        What counts at the coil against pick-up and drop-away in wet ballast, standard uncertainty [V].
    released_dry : array of bool
        Released with no train even in dry ballast: there is no drop shunt.
    settled : array of bool
        Where false the readings could not be fitted and the rest has no meaning.
    """

    fit: Fit
    ballast_relative_u: Reals
    dry_drop_shunt_ohm: Reals
    dry_relative_u: Reals
    wet_pull_v: Reals
    wet_u_v: Reals
    released_dry: Flags
    settled: Flags


def forecast(
    circuit: PlainCircuit, sight: Sight, doubt: Doubt, wet_ohm_km: RealLike, dry_ohm_km: RealLike
) -> Forecast:
    """Carry circuits from the ballast of their last test to dry and to wet.

    Parameters
    ----------
    circuit : PlainCircuit
        The register's values, an array for many circuits.
    sight : Sight
        Their last readings.
    doubt : Doubt
        How far the register's values may be off.
    wet_ohm_km, dry_ohm_km : array_like
        Ballast to carry them to; the second may be `math.inf` [ohm·km].

    Returns
    -------
    Forecast
        Arrays of the broadcast shape.

    Raises
    ------
    NonPhysicalError
        As `fit`, or a ballast not greater than zero.

    Notes
    -----
    First-order: the fit's covariance through the derivatives of the forecast. Ballast of the day and
    a feed turned up trade against each other in one relay voltage; a measured drop shunt or a rail
    voltage at the feed end parts them.

    Examples
    --------
    The 2010 exam circuit read in the wet passes 0.5 ohm and will not dry:

    >>> from service.electrical.circuit import Feed, Line
    >>> from service.electrical.estimate import Reading
    >>> from service.electrical.relay import relay_by_current
    >>> relay = relay_by_current(9.0, 0.0, 0.05, 0.034)
    >>> circuit = PlainCircuit(0.0, Feed(5.0, 6.0), Line(3935.0, 0.0, 4.0), relay)
    >>> sight = Sight(relay_v=Reading(0.45, 0.002), relay_drop_shunt_ohm=Reading(1.148, 0.03))
    >>> found = forecast(circuit, sight, Doubt(1.0, 0.02, 0.02, 0.05, 0.03), 2.5, np.inf)
    >>> [round(float(x), 2) for x in (found.fit.circuit.line.ballast_ohm_km, found.dry_drop_shunt_ohm)]
    [2.5, 0.41]
    """
    positive(("wet_ohm_km",), wet_ohm_km)
    positive_or_infinite(("dry_ohm_km",), dry_ohm_km)
    found = fit(circuit, sight, doubt)
    still = np.zeros((*found.settled.shape, 5))

    def wet(x: Reals) -> Reals:
        """Pull in wet ballast, the fitted values moved by x."""
        there = with_ballast(moved(found.circuit, x), wet_ohm_km)
        return there.relay.pull_v(operating_point(there).relay_v)

    def dry(x: Reals) -> Reals:
        """Worst drop shunt in dry ballast, the fitted values moved by x."""
        return shunt_limits(with_ballast(moved(found.circuit, x), dry_ohm_km)).drop_shunt_ohm.worst.ohm

    wet_pull_v, dry_ohm = wet(still), dry(still)
    released = np.isinf(dry_ohm)
    sound = np.where(released, 1.0, dry_ohm)
    steep = slopes(lambda x: np.where(released, 1.0, dry(x)), still, sound) / sound[..., np.newaxis]
    # So near to being released that a nudge does it: no finite uncertainty can be put to it.
    brink = released | ~np.isfinite(steep).all(axis=-1)
    steep = np.where(brink[..., np.newaxis], 0.0, steep)
    return Forecast(
        fit=found,
        ballast_relative_u=np.sqrt(found.covariance[..., 0, 0]),
        dry_drop_shunt_ohm=dry_ohm,
        dry_relative_u=np.where(brink, np.inf, _spread(steep, found.covariance)),
        wet_pull_v=wet_pull_v,
        wet_u_v=_spread(slopes(wet, still, wet_pull_v), found.covariance),
        released_dry=released,
        settled=found.settled,
    )


def _spread(steep: Reals, covariance: Reals) -> Reals:
    variance: Reals = np.einsum("...i,...ij,...j->...", steep, covariance, steep)
    return np.sqrt(variance)
