"""Pulse terms of IEEE Std 181-2011, on responses whose instants have closed forms.

Source: IEEE Std 181-2011, "IEEE Standard for Transitions, Pulses, and Related Waveforms" (from memory):
reference-level instants by linear interpolation between samples, percent reference levels between two
state levels, transition duration between the 10 % and 90 % instants. The standard prints no such table;
the numbers are its definitions worked out on elementary responses (derived), in units of the time
constant, of sigma, or of 1/wn, and were computed apart from this program.

Read: as the number of digits printed here; half a unit of the last digit is allowed. Samples are 5e-4
time constants apart, so that chords add less than 1e-7.
"""

import math

import numpy as np
import pytest
from scipy.special import erf

from transim.measure import METRICS, Definitions, Record, Timing, Waveform

VOLTAGE, POWER = Definitions(), Definitions(basis="power")
STEP = 5e-4


def pole(t):
    return -np.expm1(-t)


def two_poles(t):
    return 1.0 - (1.0 + t) * np.exp(-t)


def three_poles(t):
    return 1.0 - (1.0 + t + t * t / 2.0) * np.exp(-t)


def gaussian(t):
    return (1.0 + erf((t - 10.0) / math.sqrt(2.0))) / 2.0


def ramp(t):
    return np.clip(t, 0.0, 1.0)


def decay(t):
    return np.exp(-t)


def second_order(t):
    damped = math.sqrt(0.75)
    return 1.0 - np.exp(-t / 2.0) * (np.cos(damped * t) + 0.5 / damped * np.sin(damped * t))


def ramp_into_pole(length):
    def response(t):
        late = np.maximum(t - length, 0.0)
        return (t + np.expm1(-t) - late - np.expm1(-late)) / length

    return response


def measure(name, response, definitions=VOLTAGE):
    """Measure a response to a command edge at zero: rising for an on edge, falling for an off edge."""
    time = np.arange(0.0, 20.0, STEP)
    never = 100.0  # the other edge of the command comes after the record
    falls = response is decay
    record = Record(
        timing=Timing(
            on_edge=never if falls else 0.0,
            off_edge=0.0 if falls else never,
            edge=0.0,
            start=0.0,
            stop=time[-1],
            period=never,
        ),
        definitions=definitions,
        carrier=1.0,
        impedance=50.0,
        biased_passes=True,
        envelope=Waveform(time, response(time) + 0j, "1"),
        static_on=1.0 + 0j,
        static_off=0j,
    )
    return METRICS[name].function(record)


@pytest.mark.parametrize(
    ("name", "response", "expected", "half_digit"),
    [
        ("on_delay", pole, 0.105361, 5e-7),
        ("on_time", pole, 2.302585, 5e-7),
        ("rise_time", pole, 2.1972246, 1.5e-7),
        ("off_delay", decay, 0.105361, 5e-7),
        ("off_time", decay, 2.302585, 5e-7),
        ("fall_time", decay, 2.1972246, 1.5e-7),
        ("rise_time", two_poles, 3.357909, 5e-7),
        ("rise_time", three_poles, 4.220255, 5e-7),
        ("rise_time", gaussian, 2.5631031, 1.5e-7),
        ("rise_time", ramp, 0.8, 1e-12),
        ("rise_time", ramp_into_pole(1.0), 2.360727, 6e-7),
        ("rise_time", ramp_into_pole(5.0), 4.488096, 6e-7),
        ("rise_time", second_order, 1.637573, 6e-7),
    ],
)
def test_ten_and_ninety_percent_instants(name, response, expected, half_digit):
    assert measure(name, response) == pytest.approx(expected, abs=half_digit)


@pytest.mark.parametrize(
    ("name", "response", "expected"), [("rise_time", pole, 2.589609), ("fall_time", decay, 1.098612)]
)
def test_instants_on_detected_power(name, response, expected):
    assert measure(name, response, POWER) == pytest.approx(expected, abs=6e-7)


def test_mid_instant_of_one_pole():
    time = np.arange(0.0, 20.0, STEP)
    found = Waveform(time, pole(time), "1").crossings(0.5, "rising")
    assert found == pytest.approx([0.693147], abs=5e-7)


def test_overshoot_of_the_second_order():
    overshoot = 10.0 ** (measure("overshoot", second_order) / 20.0) - 1.0
    assert 100.0 * overshoot == pytest.approx(16.3034, abs=5e-5)


def test_settling_of_the_second_order_to_two_percent():
    # The last deviation of 2 % is below the level: a band of 2 % downwards in dB.
    band = Definitions(settle_band=-20.0 * math.log10(0.98))
    assert measure("on_settling", second_order, band) == pytest.approx(8.076, abs=5e-4)


@pytest.mark.parametrize(("band", "expected"), [(1.0, 2.218712), (0.5, 2.883491), (0.1, 4.470036)])
def test_settling_of_one_pole(band, expected):
    found = measure("on_settling", pole, Definitions(settle_band=band))
    assert found == pytest.approx(expected, abs=6e-7)


@pytest.mark.parametrize(("attenuation", "expected"), [(20.0, 2.302585), (40.0, 4.605170)])
def test_fall_to_an_attenuation(attenuation, expected):
    found = measure("off_settling", decay, Definitions(isolation_level=attenuation))
    assert found == pytest.approx(expected, abs=6e-7)


@pytest.mark.parametrize(("length", "expected"), [(1.0, 2.360727), (5.0, 4.488096)])
def test_ramp_into_a_pole_through_the_video_filter(length, expected):
    # The same responses, made by the filter from three samples. Its chords are 1e-5 off at most: each
    # instant moves by that over the slope there.
    wave = Waveform([0.0, length, length + 40.0], [0.0, 1.0, 1.0], "V").lowpass(1.0 / (2.0 * math.pi))
    low, high = wave.crossings(0.1, "rising")[0], wave.crossings(0.9, "rising")[0]
    response, step = ramp_into_pole(length), 1e-4
    slopes = [(response(t + step) - response(t - step)) / (2.0 * step) for t in (low, high)]
    assert high - low == pytest.approx(expected, abs=sum(1e-5 / slope for slope in slopes))
