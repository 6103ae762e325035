"""The lossy line against scikit-rf's transmission lines, an independent implementation."""

from __future__ import annotations

import numpy as np
import pytest
import skrf

from service.electrical.line import uniform_line

CASES = [
    (50.0, 1000.0, 0.31 + 0.39j, 1.0),
    (50.0, 300.0, 0.52 + 1.224j, 4.0),
    (25.0, 2500.0, 0.43 + 0.25j, 0.8),
    (1700.0, 600.0, 0.6 + 13.0j, 2.0),
]


@pytest.mark.parametrize(("frequency_hz", "length_m", "loop", "ballast"), CASES)
def test_two_port(frequency_hz: float, length_m: float, loop: complex, ballast: float) -> None:
    """R and L from the loop impedance, G from the ballast, no capacitance to speak of: ABCD from S."""
    frequency = skrf.Frequency(frequency_hz, frequency_hz, 1, unit="hz")
    omega = 2 * np.pi * frequency_hz
    media = skrf.media.DistributedCircuit(
        frequency, C=0.0, L=loop.imag / 1000 / omega, R=loop.real / 1000, G=1 / ballast / 1000
    )
    abcd = media.line(length_m, "m").a[0]
    found = uniform_line(length_m, loop, ballast)
    for value, expected in zip((found.a, found.b, found.c, found.d), abcd.ravel(), strict=True):
        assert complex(value) == pytest.approx(complex(expected), rel=1e-6, abs=1e-9)
