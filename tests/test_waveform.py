"""Waveform arithmetic, against SciPy and against properties that any straight-line waveform has."""

import math
from itertools import pairwise

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from scipy.integrate import quad
from scipy.signal import lsim
from scipy.special import spherical_jn

from transim.errors import MeasurementError
from transim.measure.spectrum import fourier_integral
from transim.measure.waveform import Waveform

steps = st.lists(st.floats(0.01, 10.0), min_size=3, max_size=30)


@st.composite
def waveforms(draw):
    """Draw a waveform of uneven steps; small whole values, so that levels are met exactly."""
    time = np.cumsum(draw(steps))
    value = draw(st.lists(st.integers(-5, 5), min_size=time.size, max_size=time.size))
    return Waveform(time, np.array(value, dtype=float), "V")


def uneven():
    """Give an uneven waveform without a special point."""
    rng = np.random.default_rng(8)
    return Waveform(np.cumsum(rng.uniform(0.1, 2.0, 40)), rng.normal(size=40), "V")


def test_crossing_lies_between_the_samples():
    wave = Waveform([0.0, 1.0, 5.0], [0.0, 0.2, 1.0], "V")
    assert wave.crossings(0.5, "rising") == pytest.approx([2.5])
    assert wave.crossings(0.5, "falling").size == 0


def test_crossing_matches_the_root_of_the_interpolant():
    wave = uneven()
    for direction, sign in (("rising", 1.0), ("falling", -1.0)):
        for instant in wave.crossings(0.3, direction):
            assert np.interp(instant, wave.time, wave.value) == pytest.approx(0.3, abs=1e-12)
            after = np.interp(instant + 1e-6, wave.time, wave.value)
            assert sign * (after - 0.3) > 0.0


@pytest.mark.parametrize(
    ("value", "rising", "falling"),
    [
        ([0, 1, 0, 0], [], []),  # touches
        ([0, 1, 1, 2], [1.0], []),  # stays, then goes through: first instant on the level
        ([0, 0, 0, 1], [3.0], []),  # ends on the level
        ([1, 1, 2, 2], [], []),  # leaves the level, does not cross it
        ([1, 1, 1, 1], [], []),
        ([2, 1, 0, 2], [2.5], [1.0]),
    ],
)
def test_crossing_of_a_level_that_samples_meet(value, rising, falling):
    wave = Waveform([0.0, 1.0, 2.0, 3.0], value, "V")
    assert wave.crossings(1.0, "rising").tolist() == rising
    assert wave.crossings(1.0, "falling").tolist() == falling


def interleave(first, second):
    """Tell whether instants of the two come in turn; rounding may put neighbours on one instant."""
    if first.size - second.size not in (0, 1):
        return False
    both = np.empty(first.size + second.size)
    both[::2], both[1::2] = first, second
    return bool(np.all(np.diff(both) >= 0.0))


@given(waveforms(), st.floats(-5.5, 5.5))
@example(Waveform([1.0, 2.0, 3.0, 4.0], [0.0, -1.0, 0.0, -1.0], "V"), -3.8e-178)
def test_crossings_are_ordered_and_alternate(wave, level):
    rising, falling = wave.crossings(level, "rising"), wave.crossings(level, "falling")
    assert all(np.diff(rising) > 0.0)
    assert all(np.diff(falling) > 0.0)
    assert interleave(rising, falling) or interleave(falling, rising)


@given(waveforms(), st.floats(-5.5, 5.5))
def test_crossings_follow_a_flip_of_polarity(wave, level):
    flipped = Waveform(wave.time, -wave.value, "V")
    assert flipped.crossings(-level, "falling").tolist() == wave.crossings(level, "rising").tolist()


@given(waveforms(), st.floats(0.01, 100.0), st.floats(-100.0, 100.0))
def test_crossings_follow_a_shift_and_ignore_a_scale(wave, scale, shift):
    moved = Waveform(wave.time + shift, wave.value * scale, "V")
    assert moved.crossings(0.31 * scale, "rising") - shift == pytest.approx(
        wave.crossings(0.31, "rising"), abs=1e-9
    )


@given(waveforms(), st.integers(2, 9))
def test_points_added_on_the_lines_change_nothing(wave, pieces):
    number = np.arange(wave.time.size)
    grid = np.interp(np.arange(number[-1] * pieces + 1) / pieces, number, wave.time)
    dense = Waveform(grid, np.interp(grid, wave.time, wave.value), "V")
    assert dense.crossings(0.31, "rising") == pytest.approx(wave.crossings(0.31, "rising"), abs=1e-9)
    assert dense.integral() == pytest.approx(wave.integral(), abs=1e-9)
    assert dense.square_integral() == pytest.approx(wave.square_integral(), abs=1e-9)
    assert dense.fourier(0.3) == pytest.approx(wave.fourier(0.3), abs=1e-9)


@given(waveforms(), st.floats(-3.0, 0.0), st.floats(0.0, 3.0))
def test_last_entry_is_the_last_passage_of_an_edge_of_the_band(wave, low, high):
    end = wave.value[-1]
    if not low <= end <= high:
        with pytest.raises(MeasurementError, match="outside the band"):
            wave.last_entry(low, high)
        return
    entry = wave.last_entry(low, high)
    if entry is None:
        assert wave.value.min() >= low
        assert wave.value.max() <= high
        return
    assert np.min(np.abs(np.interp(entry, wave.time, wave.value) - np.array([low, high]))) < 1e-9
    assert all((wave.value[wave.time > entry + 1e-9] >= low) & (wave.value[wave.time > entry + 1e-9] <= high))


def test_integrals_match_quadrature():
    wave = uneven()

    def interpolant(t):
        return np.interp(t, wave.time, wave.value)

    pairs = list(pairwise(wave.time))
    assert wave.integral() == pytest.approx(sum(quad(interpolant, a, b)[0] for a, b in pairs), rel=1e-12)
    square = sum(quad(lambda t: interpolant(t) ** 2, a, b)[0] for a, b in pairs)
    assert wave.square_integral() == pytest.approx(square, rel=1e-12)


@pytest.mark.parametrize("frequency", [0.0, 1e-6, 0.05, 0.7, 4.0])
def test_fourier_integral_matches_quadrature(frequency):
    wave = uneven()
    total = 0.0
    for a, b in pairwise(wave.time):
        for part, factor in (("cos", 1.0), ("sin", -1.0j)):
            weight = {"weight": part, "wvar": 2.0 * math.pi * frequency}
            total += factor * quad(lambda t: np.interp(t, wave.time, wave.value), a, b, **weight)[0]
    assert wave.fourier(frequency) == pytest.approx(total, rel=1e-9, abs=1e-11)


def test_fourier_integral_of_one_line_is_exact_from_tiny_to_large_phase():
    # A line from -1 to 1 over -1..1 has the integral -2j j1(2 pi f): spherical Bessel function of SciPy.
    for x in np.geomspace(1e-9, 1e3, 200):
        found = fourier_integral(np.array([-1.0, 1.0]), np.array([-1.0, 1.0]), x / (2.0 * math.pi))
        expected = -2.0j * spherical_jn(1, x)
        # Near its zeros j1 has the absolute error of sin and cos over x.
        assert abs(found - expected) <= 1e-12 * max(abs(expected), 1e-2 / x if x > 1.0 else 0.0)


def test_fourier_integral_of_a_complex_envelope_is_linear():
    wave = uneven()
    turned = Waveform(wave.time, wave.value * (0.6 + 0.8j), "1")
    assert turned.fourier(0.4) == pytest.approx((0.6 + 0.8j) * wave.fourier(0.4), rel=1e-12)


def test_lowpass_matches_scipy_on_even_steps():
    # scipy.signal.lsim is exact for straight lines between even steps (documented: first-order hold).
    rng = np.random.default_rng(3)
    time = np.linspace(0.0, 30.0, 301)
    value = np.concatenate(([0.0], np.cumsum(rng.normal(size=300))))
    bandwidth = 0.7 / (2.0 * math.pi)
    expected = lsim(([0.7], [1.0, 0.7]), value, time)[1]
    wave = Waveform(time, value, "V").lowpass(bandwidth)
    found = wave.value[np.isin(wave.time, time)]
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-9)


@pytest.mark.parametrize("bandwidth", [1e-6, 1e-3, 0.1, 3.0, 1e3, 1e9])
def test_lowpass_is_right_between_the_samples(bandwidth):
    # A ramp of 1 in 2 s that then stays: the closed form of a pole, on a waveform of three samples.
    constant = 1.0 / (2.0 * math.pi * bandwidth)
    wave = Waveform([0.0, 2.0, 40.0], [0.0, 1.0, 1.0], "V").lowpass(bandwidth)
    t = np.linspace(0.0, 40.0, 3001)
    ramp = 0.5 * (t + constant * np.expm1(-t / constant))
    late = np.maximum(t - 2.0, 0.0)
    ramp_late = 0.5 * (late + constant * np.expm1(-late / constant))
    assert np.interp(t, wave.time, wave.value) == pytest.approx(ramp - ramp_late, abs=1e-5)
    assert wave.time.size < 800


def test_lowpass_has_the_extreme_between_two_samples():
    # v falls from 1 to -1 over 2 s after a step to 1: y = x where dy/dt = 0, found here by dense sampling.
    coarse = Waveform([0.0, 1e-9, 2.0], [0.0, 1.0, -1.0], "V").lowpass(0.4)
    t = np.concatenate(([0.0], np.linspace(1e-9, 2.0, 200001)))
    dense = Waveform(t, np.concatenate(([0.0], 1.0 - (t[1:] - 1e-9))), "V").lowpass(0.4)
    peak = coarse.extremes()[1]
    at = coarse.time[np.argmax(coarse.value)]
    assert peak == pytest.approx(dense.extremes()[1], abs=1e-9)
    assert peak == pytest.approx(np.interp(at, [1e-9, 2.0], [1.0, -1.0]), abs=1e-9)


@given(waveforms(), st.floats(0.01, 10.0))
def test_lowpass_stays_within_the_input_and_keeps_a_rest(wave, bandwidth):
    low, high = wave.lowpass(bandwidth).extremes()
    assert wave.value.min() - 1e-9 <= low
    assert high <= wave.value.max() + 1e-9
    rest = Waveform(wave.time, np.full(wave.time.size, 2.5), "V").lowpass(bandwidth)
    assert rest.value == pytest.approx(2.5, rel=1e-12)


def test_denser_samples_of_a_curve_converge_with_the_square_of_the_step():
    errors = []
    for count in (41, 81, 161):
        t = np.linspace(0.0, 5.0, count)
        wave = Waveform(t, -np.expm1(-t), "1")
        errors.append(abs(wave.crossings(0.9, "rising")[0] - math.log(10.0)))
    assert errors[0] / errors[2] > 4.0
    assert errors[2] < 1e-3


def test_a_cut_interpolates_its_ends_and_allows_rounding_of_the_last_time():
    wave = Waveform([0.0, 1.0, 3.0], [0.0, 2.0, 0.0], "V")
    cut = wave.between(0.5, 2.0)
    assert cut.time.tolist() == [0.5, 1.0, 2.0]
    assert cut.value.tolist() == [1.0, 2.0, 1.0]
    assert wave.between(0.5, 3.0 * (1.0 + 1e-12)).time[-1] == 3.0
    with pytest.raises(MeasurementError, match=r"covers 0 s to 3 s, not 500 ms to 3\.1 s"):
        wave.between(0.5, 3.1)
    with pytest.raises(MeasurementError, match="empty"):
        wave.between(2.0, 2.0)
    with pytest.raises(MeasurementError):
        wave.at(-0.1)
    assert wave.at(2.0) == 1.0


@pytest.mark.parametrize("bad", [math.nan, math.inf, complex(1.0, math.nan)])
def test_a_sample_that_is_not_finite_never_gives_a_number(bad):
    wave = Waveform([0.0, 1e-6, 2e-6], [0.0, bad, 1.0], "V")
    asked = [
        lambda: wave.at(0.0),
        lambda: wave.between(0.0, 1e-7),
        lambda: wave.crossings(0.5, "rising"),
        lambda: wave.last_entry(0.0, 1.0),
        lambda: wave.fourier(1.0),
        lambda: wave.lowpass(1.0),
        wave.magnitude,
        wave.peak,
        wave.extremes,
        wave.integral,
        wave.square_integral,
    ]
    for ask in asked:
        with pytest.raises(MeasurementError, match="sample at 1 us"):
            ask()


@pytest.mark.parametrize(
    ("time", "value"),
    [
        ([0.0, 1.0, 1.0], [0.0, 1.0, 2.0]),
        ([0.0, 2.0, 1.0], [0.0, 1.0, 2.0]),
        ([0.0, math.nan, 1.0], [0.0, 1.0, 2.0]),
        ([0.0, 1.0], [0.0, 1.0, 2.0]),
        ([0.0], [1.0]),
        ([[0.0, 1.0]], [[0.0, 1.0]]),
    ],
)
def test_a_time_axis_that_is_none_is_refused(time, value):
    with pytest.raises(MeasurementError):
        Waveform(time, value, "V")


def test_a_complex_waveform_has_no_order():
    wave = Waveform([0.0, 1.0], [1.0j, 2.0], "1")
    with pytest.raises(MeasurementError, match="magnitude"):
        wave.crossings(1.5, "rising")
    assert wave.magnitude().crossings(1.5, "rising").tolist() == [0.5]


def test_samples_belong_to_the_waveform():
    time, value = np.array([0.0, 1.0]), np.array([1.0, 2.0])
    wave = Waveform(time, value, "V")
    value[0] = 7.0
    assert wave.value[0] == 1.0
    with pytest.raises(ValueError, match="read-only"):
        wave.value[0] = 3.0


@pytest.mark.parametrize("bandwidth", [0.0, -1.0, math.nan])
def test_lowpass_without_a_bandwidth_is_refused(bandwidth):
    with pytest.raises(MeasurementError, match="above 0 Hz"):
        uneven().lowpass(bandwidth)
