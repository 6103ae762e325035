"""The uniform line: two rails with series impedance and leakage spread evenly along them.

Exact for any length, infinite ballast and lossless rails included. Loop impedance is that of both
rails together; ballast resistance is rail to rail in ohm·km. Rails with earth are in `layout`.
"""

from __future__ import annotations

from dataclasses import dataclass

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
    return UniformLine.of(np.asarray(loop_ohm_per_km) * km, km / np.asarray(ballast_ohm_km)).part(1.0)


@dataclass(frozen=True, slots=True)
class UniformLine:
    """A whole line from which many parts are wanted; what the parts share is worked out once.

    Attributes
    ----------
    series_ohm, leakage_s : array
        Of the whole line [ohm, S].
    angle : array
        gl, its attenuation and phase [neper, rad].
    """

    series_ohm: Numbers
    leakage_s: Numbers
    angle: Numbers
    inverse: Numbers

    @classmethod
    def of(cls, series_ohm: Numbers, leakage_s: Numbers) -> UniformLine:
        """Make the line from its total series impedance [ohm] and leakage [S].

        Raises
        ------
        NoAnswerError
            Code `line_too_long`: attenuated by more than 300 neper.
        """
        angle = np.sqrt(series_ohm * leakage_s)
        if np.any(np.real(angle) > _LONGEST_NEPER):
            raise NoAnswerError("line_too_long", "the line is too long for its ballast: nothing arrives")
        inverse = np.divide(1.0, angle, out=np.zeros_like(angle), where=angle != 0)
        return cls(series_ohm, leakage_s, angle, inverse)

    def part(self, share: RealLike) -> TwoPort:
        """Two-port of a share of the line, from 0 to 1."""
        a, sinh = _cosh_sinh(self.angle * share)
        spread = np.where(self.angle == 0, share, sinh * self.inverse)
        return TwoPort(a, self.series_ohm * spread, self.leakage_s * spread, a)


def sinhc(angle: Numbers) -> Numbers:
    """Compute sinh(x)/x, exactly 1 at zero.

    Examples
    --------
    >>> round(float(sinhc(np.asarray(1.0))), 6)
    1.175201
    """
    return np.divide(_cosh_sinh(angle)[1], angle, out=np.ones_like(angle), where=angle != 0)


def _cosh_sinh(angle: Numbers) -> tuple[Numbers, Numbers]:
    """Hyperbolic cosine and sine; from real functions where complex, at a quarter of the library's time."""
    grow, shrink = np.cosh(np.real(angle)), np.sinh(np.real(angle))
    if not np.iscomplexobj(angle):
        return grow, shrink
    turn_cos, turn_sin = np.cos(np.imag(angle)), np.sin(np.imag(angle))
    cosh, sinh = np.empty_like(angle), np.empty_like(angle)
    cosh.real, cosh.imag = grow * turn_cos, shrink * turn_sin
    sinh.real, sinh.imag = shrink * turn_cos, grow * turn_sin
    return cosh, sinh
