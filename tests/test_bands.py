"""Usable bands, against closed forms of where a limit is met.

Outside references: the series capacitor between matched loads, |S21| = 1/sqrt(1 + (1/(2 w C Z0))^2), and circuit
theory of the ideal series inductor, |S21| = 1/sqrt(1 + (w L/(2 Z0))^2); interval arithmetic by brute force.
"""

import itertools
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.measure.band import usable_bands
from transim.measure.limits import Limit
from transim.measure.sweep import StaticSweep, attenuation

Z0 = 50.0


def sweep(frequency, *, loss=None, isolation=None, match_on=None, match_off=None):
    """Return a sweep of two ports with the given decibels; matches are pairs of arrays."""
    count = frequency.size
    states = []
    for through, match in ((loss, match_on), (isolation, match_off)):
        s = np.full((count, 2, 2), 0.1 + 0j)
        s[:, 1, 0] = 0.5 if through is None else 10.0 ** (-through / 20.0) * np.exp(0.7j)
        for port in range(2):
            if match is not None:
                s[:, port, port] = 10.0 ** (-match[port] / 20.0)
        states.append(s)
    return StaticSweep(frequency, *states, ("p1", "p2"), (0, 1), Z0)


def test_band_between_a_coupling_capacitor_and_a_series_inductance():
    frequency = np.geomspace(1e6, 1e10, 81)  # 20 points a decade
    omega = 2.0 * math.pi * frequency
    capacitance, inductance, limit = 1e-9, 5e-9, 0.3
    loss = 10.0 * np.log10(1.0 + (1.0 / (2.0 * omega * capacitance * Z0)) ** 2 + (omega * inductance / (2.0 * Z0)) ** 2)
    edge = math.sqrt(10.0 ** (limit / 10.0) - 1.0)
    (band,) = usable_bands(sweep(frequency, loss=loss), [Limit("insertion_loss", max=limit)])
    # the loss goes with the square of frequency: a chord over a step h of ln f shifts the edge by h^2/4 at most
    step = math.log(10.0) / 20.0
    assert band.low == pytest.approx(1.0 / (2.0 * Z0 * capacitance * edge) / (2.0 * math.pi), rel=step**2 / 4.0)
    assert band.high == pytest.approx(2.0 * Z0 * edge / inductance / (2.0 * math.pi), rel=step**2 / 4.0)
    assert (band.low_limit, band.high_limit) == ("insertion_loss", "insertion_loss")


def test_edges_are_exact_where_decibels_are_straight_over_the_logarithm():
    # 20 dB a decade: isolation of a small series capacitance (Garver 1976)
    frequency = np.geomspace(1e6, 1e9, 4)
    isolation = 80.0 - 20.0 * np.log10(frequency / 1e6)
    (band,) = usable_bands(sweep(frequency, isolation=isolation), [Limit("isolation", min=47.0)])
    assert (band.low, band.low_limit, band.high_limit) == (1e6, None, "isolation")
    assert band.high == pytest.approx(1e6 * 10.0 ** (33.0 / 20.0), rel=1e-12)


def test_limits_hold_together_and_the_nearer_one_is_named():
    frequency = np.geomspace(1e6, 1e9, 31)
    decades = np.log10(frequency / 1e6)
    found = usable_bands(
        sweep(frequency, loss=2.0 - decades, isolation=80.0 - 20.0 * decades),
        [Limit("insertion_loss", max=1.5), Limit("isolation", min=30.0), Limit("on_time", max=1e-6)],
    )
    (band,) = found
    assert (band.low, band.high) == (pytest.approx(10.0**6.5), pytest.approx(10.0**8.5))
    assert (band.low_limit, band.high_limit) == ("insertion_loss", "isolation")


def test_the_worst_port_decides_on_match():
    frequency = np.geomspace(1e6, 1e9, 31)
    decades = np.log10(frequency / 1e6)
    match = (np.full(31, 25.0), 10.0 + 5.0 * decades)
    for state in ("on", "off"):
        given_match = {f"match_{state}": match}
        (band,) = usable_bands(sweep(frequency, **given_match), [Limit(f"return_loss_{state}", min=20.0)])
        assert band.low == pytest.approx(1e8)


def test_several_bands_none_and_no_limits():
    frequency = np.geomspace(1e6, 1e9, 61)
    loss = 1.0 + np.cos(2.0 * math.pi * np.log10(frequency / 1e6))  # 2 dB at 1, 10, 100 MHz, 0 dB between
    found = usable_bands(sweep(frequency, loss=loss), [Limit("insertion_loss", max=1.0)])
    assert [(b.low, b.high) for b in found] == [
        (pytest.approx(10.0 ** (6.25 + k), rel=1e-9), pytest.approx(10.0 ** (6.75 + k), rel=1e-9)) for k in range(3)
    ]
    assert usable_bands(sweep(frequency, loss=loss), [Limit("insertion_loss", max=-1.0)]) == ()
    assert usable_bands(sweep(frequency, loss=loss), [Limit("on_time", max=1.0)]) is None
    assert usable_bands(sweep(frequency, loss=loss), []) is None


def test_two_bounds_of_one_limit():
    frequency = np.geomspace(1e6, 1e9, 31)
    decades = np.log10(frequency / 1e6)
    (band,) = usable_bands(sweep(frequency, isolation=20.0 * decades), [Limit("isolation", min=10.0, max=40.0)])
    assert (band.low, band.high) == (pytest.approx(10.0**6.5), pytest.approx(1e8))


@given(st.lists(st.tuples(st.floats(0, 60), st.floats(0, 60)), min_size=2, max_size=12))
def test_bands_agree_with_a_fine_grid(pairs):
    values = np.array(pairs)
    frequency = np.geomspace(1e6, 1e9, len(pairs))
    found = usable_bands(
        sweep(frequency, loss=values[:, 0], isolation=values[:, 1]),
        [Limit("insertion_loss", max=30.0), Limit("isolation", min=30.0)],
    )
    axis = np.linspace(np.log(1e6), np.log(1e9), 401)
    loss, isolation = (np.interp(axis, np.log(frequency), values[:, k]) for k in range(2))
    margin = np.minimum(30.0 - loss, isolation - 30.0)
    inside = np.zeros(axis.size, dtype=bool)
    for band in found:
        inside |= (axis >= np.log(band.low)) & (axis <= np.log(band.high))
    clear = np.abs(margin) > 1e-6
    assert np.array_equal(inside[clear], margin[clear] > 0.0)
    assert all(first.high < second.low for first, second in itertools.pairwise(found))


def test_nothing_passed_is_a_finite_attenuation():
    assert attenuation(np.array([0.0, 1e-30, 1.0, 10.0])) == pytest.approx([400.0, 400.0, 0.0, -20.0])
