"""Instants that waveforms share, and what is cut out of them, against numpy's interpolation."""

import gc

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.errors import MeasurementError
from transim.measure import instants as module
from transim.measure.instants import Instants
from transim.measure.waveform import Waveform


def test_waveforms_on_the_times_of_another_share_them():
    first = Waveform([0.0, 1.0, 3.0], [0.0, 1.0, 2.0], "V")
    second = Waveform(first.time, [5.0, 4.0, 1j], "V")
    assert second.time is first.time
    assert second.between(0.5, 2.0).time is first.between(0.5, 2.0).time
    assert first.magnitude().time is first.time


def test_an_array_of_somebody_else_is_copied():
    time = np.array([0.0, 1.0, 3.0])
    wave = Waveform(time, [0.0, 1.0, 2.0], "V")
    time[1] = 7.0
    assert wave.time.tolist() == [0.0, 1.0, 3.0]
    with pytest.raises(ValueError, match="read-only"):
        wave.time[0] = 1.0


def test_samples_are_copied_too():
    value = np.array([0.0, 1.0, 2.0])
    wave = Waveform([0.0, 1.0, 3.0], value, "V")
    before = wave.integral()
    value[1] = 99.0
    assert wave.integral() == before
    with pytest.raises(ValueError, match="read-only"):
        wave.value[0] = 1.0


def test_instants_are_forgotten_with_their_last_waveform():
    wave = Waveform([0.0, 1.0, 3.0], [0.0, 1.0, 2.0], "V")
    wave.between(0.5, 2.0)
    key = id(wave.time)
    assert key in module._known
    del wave
    gc.collect()
    assert key not in module._known


@pytest.mark.parametrize(
    ("time", "reason"), [([0.0, np.nan, 1.0], "not a finite number"), ([0.0, 1.0, 1.0], "does not increase after 1 s")]
)
def test_times_are_checked(time, reason):
    with pytest.raises(MeasurementError, match=reason):
        Instants(np.array(time))


@settings(deadline=None)
@given(
    st.lists(st.floats(1e-3, 1.0), min_size=1, max_size=30),
    st.booleans(),
    st.floats(0.0, 1.0),
    st.floats(0.0, 1.0),
    st.integers(0, 10**6),
)
def test_a_cut_has_the_values_of_linear_interpolation(steps, phasor, one, other, seed):
    time = np.concatenate(([0.0], np.cumsum(steps)))
    chance = np.random.default_rng(seed)
    value = chance.normal(size=time.size) + (1j * chance.normal(size=time.size) if phasor else 0.0)
    start, stop = sorted((one * time[-1], other * time[-1]))
    wave = Waveform(time, value, "V")
    if not stop - start > 1e-9 * time[-1]:
        return
    cut = wave.between(start, stop)
    inside = time[(time > start) & (time < stop)]
    assert cut.time.tolist() == [start, *inside.tolist(), stop]
    assert np.array_equal(cut.value, np.interp(cut.time, time, value))


def test_what_was_computed_once_is_the_same_as_afresh():
    time, value = np.linspace(0.0, 1.0, 50), np.sin(np.linspace(0.0, 20.0, 50))
    wave = Waveform(time, value, "V")
    for _ in range(2):
        afresh = Waveform(time, value, "V")
        assert wave.integral() == afresh.integral()
        assert wave.extremes() == afresh.extremes()
        assert np.array_equal(wave.magnitude().value, afresh.magnitude().value)
        assert np.array_equal(wave.lowpass(3.0).value, afresh.lowpass(3.0).value)
        assert np.array_equal(wave.lowpass(5.0).value, afresh.lowpass(5.0).value)
    assert not np.array_equal(wave.lowpass(3.0).value, wave.lowpass(5.0).value)


def test_a_sample_that_is_not_finite_raises_every_time():
    wave = Waveform([0.0, 1.0, 2.0], [0.0, np.inf, 1.0], "V")
    for _ in range(2):
        with pytest.raises(MeasurementError, match="not a finite number"):
            wave.integral()
        with pytest.raises(MeasurementError, match="not a finite number"):
            wave.between(0.0, 1.5)
