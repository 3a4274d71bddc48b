"""Video leakage of elementary couplings and the spectrum of a spike, from circuit theory.

Sources: responses of an RC high-pass and of an exponential spike as any circuit theory text has them
(derived; worked out apart from this program). The first high-pass was also simulated: ngspice 39 gives
4.758129 V at its peak.

- RC high-pass, ramp 0 to V in tr: peak V (RC/tr) (1 - exp(-tr/RC)) at tr, area RC V whatever the edge.
- Spike V0 exp(-t/T) at the rate P into R: |V(f)| = V0 T/sqrt(1 + (2 pi f T)^2), energy V0^2 T/2R, power
  of one line 2 (P |V(f)|)^2/R, mean power in the bandwidth B times B/P.

Read: as the number of digits printed; half a unit of the last digit is allowed, and where straight lines
stand for an exponential what they add to it, said at each check.
"""

import math

import numpy as np
import pytest

from transim.measure import METRICS, Definitions, Record, Timing, Waveform


def figure(name, wave, period=1e-3, **settings):
    """Measure a spike that begins with the on edge; the off edge comes with the last sample."""
    stop = float(wave.time[-1])
    last = float(wave.time[-2] + wave.time[-1]) / 2.0
    record = Record(
        timing=Timing(on_edge=0.0, off_edge=last, edge=0.0, start=0.0, stop=stop, period=period),
        definitions=Definitions(**settings),
        carrier=100e6,
        impedance=50.0,
        biased_passes=True,
        video={"p1": wave},
    )
    return METRICS[name].function(record)


def highpass(constant, edge, height):
    """Return what an RC high-pass leaves of a ramp: the ramp less what a pole makes of it."""
    ramp = Waveform([0.0, edge, edge + 40.0 * constant], [0.0, height, height], "V")
    passed = ramp.lowpass(1.0 / (2.0 * math.pi * constant))
    return Waveform(passed.time, np.interp(passed.time, ramp.time, ramp.value) - passed.value, "V")


@pytest.mark.parametrize(
    ("constant", "edge", "expected", "half_digit"),
    [(100e-9, 10e-9, 4.75813, 5e-6), (100e-9, 10e-9, 4.758129, 1e-6), (5e-9, 5e-9, 3.16060, 5e-6)],
)
def test_highpass_peak_and_area(constant, edge, expected, half_digit):
    wave = highpass(constant, edge, 5.0)
    assert figure("video_peak", wave) == pytest.approx(expected, abs=half_digit)
    # The filter's chords are 1e-5 of 5 V off, for no more than four time constants in all.
    assert figure("video_area", wave) == pytest.approx(constant * 5.0, rel=4e-5)


@pytest.mark.parametrize(("resistance", "expected"), [(50.0, 16.5e-3), (25.0, 8.25e-3)])
def test_feedthrough_of_a_small_capacitance(resistance, expected):
    # 0.1 pF, 3.3 V in 1 ns, into 50 ohm, or into a line matched at both ends; the area is C V R.
    wave = highpass(0.1e-12 * resistance, 1e-9, 3.3)
    assert figure("video_peak", wave) == pytest.approx(expected, rel=1e-6)
    assert figure("video_area", wave) == pytest.approx(0.1e-12 * resistance * 3.3, rel=4e-5)


def spike():
    """Sample 0.1 V exp(-t/10 ns), 500 samples a time constant for 25 of them."""
    u = np.concatenate((np.linspace(0.0, 25.0, 12501), [1000.0]))
    return Waveform(u * 10e-9, 0.1 * np.exp(-u), "V")


@pytest.mark.parametrize(("bandwidth", "expected"), [(100e3, -80.0516), (1.0, -80.0516), (1e6, -70.0516)])
def test_power_of_a_spike_at_the_carrier(bandwidth, expected):
    # Straight lines over h time constants change the spectrum by h^2/12: 3e-6 dB here.
    found = figure("video_inband", spike(), period=1e-5, resolution_bandwidth=bandwidth)
    assert found == pytest.approx(expected, abs=5.5e-5)


def test_spectrum_and_energy_of_a_spike():
    magnitude = 0.1 * 10e-9 / math.hypot(1.0, 2.0 * math.pi)
    assert abs(spike().fourier(100e6)) == pytest.approx(magnitude, rel=1e-6)
    assert figure("video_energy", spike()) == pytest.approx(1e-12, rel=1e-6)
