"""Envelope of carrier-resolved runs: known modulated carriers come back.

Outside reference: the modulation that is written here. What a moving average over one period, taken twice, takes off a
component at f is 1 - sinc(f/f0)^2, sinc of numpy.
"""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.envelope.carrier import extract_envelope

POINTS = 40


def instants(carrier, periods, seed=1):
    """Return instants as ngspice takes them: uneven, at most 1/POINTS of a period apart."""
    steps = np.random.default_rng(seed).uniform(0.4, 1.0, 3 * POINTS * periods) / (carrier * POINTS)
    time = np.concatenate([[0.0], np.cumsum(steps)])
    return time[: np.searchsorted(time, periods / carrier)]


def runs(carrier, modulation, video, periods=60, start_up=None):
    """Three runs, each on instants of its own; the second a quarter of a period ahead."""
    found = []
    for seed, phase in ((1, 0.0), (2, 0.5 * np.pi), (3, None)):
        time = instants(carrier, periods, seed)
        wave = video(time)
        if phase is not None:
            wave = wave + (modulation(time) * np.exp(1j * (2.0 * np.pi * carrier * time + phase))).real
            if start_up is not None:
                wave = wave + start_up(time, phase)
        found.append((time, wave))
    return tuple(found)


COMPLEX = st.complex_numbers(max_magnitude=1.0, allow_nan=False, allow_infinity=False)


@settings(deadline=None, max_examples=40)
@given(
    carrier=st.floats(6.0, 10.0).map(lambda power: 10.0**power),
    level=COMPLEX,
    depth=COMPLEX,
    share=st.floats(0.0, 0.05),
    volts=st.floats(-10.0, 10.0),
)
def test_modulated_carriers_come_back(carrier, level, depth, share, volts):
    def modulation(time):
        return level + depth * np.cos(2.0 * np.pi * share * carrier * time)

    time, found = extract_envelope(
        runs(carrier, modulation, lambda t: volts * np.tanh(t * carrier / 10.0)), carrier, POINTS
    )
    expected = level + depth * np.sinc(share) ** 2 * np.cos(2.0 * np.pi * share * carrier * time)
    # a spline through 40 points a period is good to 1e-5 of the carrier, and of the steepest video
    assert np.abs(found - expected).max() < 1e-4 * (abs(level) + abs(depth) + 0.1 * abs(volts)) + 1e-12


def test_four_samples_a_period_without_the_ends():
    carrier = 30e6
    time, found = extract_envelope(runs(carrier, lambda t: 1.0 + 0.0 * t, np.zeros_like), carrier, POINTS)
    assert np.diff(time) == pytest.approx(0.25 / carrier)
    assert time[0] == pytest.approx(1.0 / carrier)
    assert time[-1] == pytest.approx(59.0 / carrier, rel=0.01)
    assert time.shape == found.shape


def test_amplitude_and_phase_are_those_of_a_cosine():
    carrier = 1e8
    _, found = extract_envelope(runs(carrier, lambda t: 0.5j + 0.0 * t, np.zeros_like), carrier, POINTS)
    assert found == pytest.approx(0.5j, abs=1e-5)


def test_what_depends_on_the_phase_at_baseband_is_averaged_away():
    carrier = 1e8

    def start_up(time, phase):
        return 0.2 * np.cos(phase + 0.7) * np.exp(-time * carrier / 30.0)

    _, plain = extract_envelope(runs(carrier, lambda t: 1.0 + 0.0 * t, np.zeros_like), carrier, POINTS)
    _, found = extract_envelope(
        runs(carrier, lambda t: 1.0 + 0.0 * t, np.zeros_like, start_up=start_up), carrier, POINTS
    )
    # exp(-t f/30) changes by a thirtieth a period: two averages leave (1/30 / 2 pi)^2 of it
    assert np.abs(found - plain).max() < 0.2 * (1.0 / 30.0 / (2.0 * np.pi)) ** 2 * 2.0


def test_repeated_instants_are_left_out():
    carrier = 1e8
    pairs = []
    for time, wave in runs(carrier, lambda t: 1.0 + 0.0 * t, np.zeros_like):
        pairs.append((np.insert(time, 500, time[500]), np.insert(wave, 500, wave[500])))
    _, found = extract_envelope(tuple(pairs), carrier, POINTS)
    assert found == pytest.approx(1.0, abs=1e-5)


def test_the_shortest_run_ends_the_envelope():
    carrier = 1e8
    first, second, quiet = runs(carrier, lambda t: 1.0 + 0.0 * t, np.zeros_like)
    half = (quiet[0][: len(quiet[0]) // 2], quiet[1][: len(quiet[0]) // 2])
    time, _ = extract_envelope((first, second, half), carrier, POINTS)
    assert time[-1] < half[0][-1]
