"""Spectrum of a trapezoidal pulse.

Source: C. R. Paul, "Introduction to Electromagnetic Compatibility", spectra of digital waveforms (formula
from memory): |X(f)| = A tw |sinc(pi f tw) sinc(pi f tr)|, tw the width at half height, tr the edge.

Read: 1 V, 100 ns, 5 ns: the values at 1 and 5 MHz to the digits printed here, half a unit of the last one
allowed: the pulse is straight lines, so nothing else is lost. The zero at 20 MHz (two periods in the
width) is zero to rounding of the 100 nV/Hz that the pulse has at low frequency.
"""

import pytest

from transim.measure import Waveform

PULSE = Waveform([0.0, 5e-9, 100e-9, 105e-9], [0.0, 1.0, 1.0, 0.0], "V")


@pytest.mark.parametrize(("frequency", "expected"), [(1e6, 98.3591e-9), (5e6, 63.5965e-9)])
def test_spectrum_of_a_trapezoid(frequency, expected):
    assert abs(PULSE.fourier(frequency)) == pytest.approx(expected, abs=5e-14)


def test_zero_of_the_spectrum():
    assert abs(PULSE.fourier(20e6)) < 1e-15 * 1e-7 * 100


def test_place_in_time_changes_the_phase_alone():
    late = Waveform(PULSE.time + 3e-6, PULSE.value, "V")
    assert abs(late.fourier(5e6)) == pytest.approx(abs(PULSE.fourier(5e6)), rel=1e-9)
