"""The uniform line: two rails with series impedance and leakage spread evenly along them.

Exact for any length, infinite ballast and lossless rails included. Loop impedance is that of both
rails together; ballast resistance is rail to rail in ohm·km. Rails with earth are in `layout`.
"""

from __future__ import annotations

import numpy as np

from service.electrical.arrays import Numbers, PhasorLike, RealLike
from service.electrical.chain import TwoPort
from service.errors import NoAnswerError

# cosh overflows near 710; a line attenuated by e^300 carries nothing that a relay could see.
_LONGEST_NEPER = 300.0


def uniform_line(length_m: RealLike, loop_ohm_per_km: PhasorLike, ballast_ohm_km: RealLike) -> TwoPort:
    """Two-port of a length of track.

    Parameters
    ----------
    length_m : array_like
        Length, zero allowed [m].
    loop_ohm_per_km : array_like
        Impedance of both rails in series at the working frequency [ohm/km].
    ballast_ohm_km : array_like
        Resistance from rail to rail, `math.inf` allowed [ohm·km].

    Returns
    -------
    TwoPort
        A = D = cosh(gl), B = z l sinh(gl)/(gl), C = y l sinh(gl)/(gl), with (gl)^2 = z l y l and
        y = 1/ballast; sinh(gl)/(gl) is 1 at zero, so no limit is special.

    Raises
    ------
    NoAnswerError
        Code `line_too_long`: attenuated by more than 300 neper.

    Notes
    -----
    The textbook form has B = Zc sinh(gl) and C = sinh(gl)/Zc with Zc = sqrt(z/y); it is the same
    where Zc is finite.

    References
    ----------
    Transmission-line equations as in any text; the constants of the example are those of HELM
    Workbook 30, section 30.5, read as a uniform line.

    Examples
    --------
    >>> two_port = uniform_line(1000.0, 0.34, 3.0)
    >>> [round(float(x), 5) for x in (two_port.a, two_port.b, two_port.c)]
    [1.0572, 0.34646, 0.33967]
    """
    km = np.asarray(length_m) / 1000
    series_ohm = np.asarray(loop_ohm_per_km) * km
    return line_of(series_ohm, km / np.asarray(ballast_ohm_km))


def line_of(series_ohm: Numbers, leakage_s: Numbers) -> TwoPort:
    """Two-port of a line from its total series impedance [ohm] and total leakage [S].

    Raises
    ------
    NoAnswerError
        Code `line_too_long`.
    """
    angle = np.sqrt(series_ohm * leakage_s)
    if np.any(np.real(angle) > _LONGEST_NEPER):
        raise NoAnswerError("line_too_long", "the line is too long for its ballast: nothing arrives")
    a = np.cosh(angle)
    slope = sinhc(angle)
    return TwoPort(a, series_ohm * slope, leakage_s * slope, a)


def sinhc(angle: Numbers) -> Numbers:
    """Compute sinh(x)/x, exactly 1 at zero."""
    return np.divide(np.sinh(angle), angle, out=np.ones_like(angle), where=angle != 0)
