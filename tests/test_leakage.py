"""Video leakage on voltages drawn by straight lines, where each figure can be worked out by hand."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.integrate import quad

from transim.errors import MeasurementError
from transim.measure import METRICS, Definitions, Record, Timing, Waveform, extract

NS = 1e-9
TIMING = Timing(on_edge=100 * NS, off_edge=500 * NS, edge=10 * NS, start=0.0, stop=1000 * NS, period=2e-6)
VIDEO = [name for name in METRICS if name.startswith("video_")]
# A triangle of 0.2 V over 40 ns at the on edge, one of -0.3 V over 20 ns that begins with the off edge.
TIME = np.array([0, 100, 120, 140, 495, 505, 515, 1000]) * NS
P1 = np.array([0, 0, 0.2, 0, 0, -0.3, 0, 0])


def cycle(definitions=None, timing=TIMING, **video):
    return Record(
        timing=timing,
        definitions=definitions or Definitions(),
        carrier=30e6,
        impedance=50.0,
        biased_passes=True,
        video={port: Waveform(TIME, value, "V") for port, value in video.items()},
    )


def figures(record):
    return {name: figure.value for name, figure in extract(record).items() if name in VIDEO}


def value(record, name):
    return METRICS[name].function(record)


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("video_peak", 0.3),
        ("video_peak_on", 0.2),
        ("video_peak_off", 0.3),
        ("video_swing", 0.5),
        ("video_area", 0.2 * 20 * NS),  # the triangle of 0.2 V has 4 nV s, the other one 3
        ("video_energy", (0.04 * 40 * NS / 3 + 0.09 * 20 * NS / 3) / 50.0),
        ("video_width", 10 * NS),
    ],
)
def test_figures_of_two_triangles(name, expected):
    assert value(cycle(p1=P1), name) == pytest.approx(expected, rel=1e-12)


def test_the_worst_port_counts():
    record = cycle(p1=P1, p2=-2.0 * P1)
    assert value(record, "video_peak") == pytest.approx(0.6)
    assert value(record, "video_energy") == pytest.approx(4.0 * value(cycle(p1=P1), "video_energy"))
    assert value(record, "video_swing") == pytest.approx(1.0)


def test_a_spike_belongs_to_the_edge_it_begins_with():
    # At 499 ns, before the 50 % point, the off edge's spike is at -0.12 V: no part of the on interval.
    record = cycle(p1=np.where(P1 > 0.0, 0.05, P1) * 1.0)
    assert value(record, "video_peak_on") == pytest.approx(0.05)


def test_inband_matches_quadrature():
    record = cycle(p1=P1)
    integral = sum(
        factor * quad(lambda t: np.interp(t, TIME / NS, P1), a, b, weight=part, wvar=2 * math.pi * 0.03)[0]
        for a, b in ((100, 120), (120, 140), (495, 505), (505, 515))
        for part, factor in (("cos", 1.0), ("sin", -1.0j))
    )
    line = 2.0 * (abs(integral) * NS * 0.5e6) ** 2 / 50.0
    expected = 10.0 * math.log10(line * 2.0 / 1e-3)  # 1 MHz holds two lines of a 2 us period
    assert value(record, "video_inband") == pytest.approx(expected, abs=1e-6)
    narrow = replace(record, definitions=Definitions(resolution_bandwidth=1e3))
    assert value(narrow, "video_inband") == pytest.approx(expected - 10.0 * math.log10(2.0), abs=1e-6)


def test_inband_ignores_a_resting_voltage():
    # 30.3 MHz: not a whole number of turns in the cycle, over which a constant would vanish by itself.
    lifted, plain = (replace(cycle(p1=P1 + rest), carrier=30.3e6) for rest in (0.7, 0.0))
    assert value(lifted, "video_inband") == pytest.approx(value(plain, "video_inband"), abs=1e-9)
    assert value(lifted, "video_peak") == pytest.approx(0.9)


def test_the_filter_lowers_peaks_and_keeps_the_area():
    plain = figures(cycle(p1=P1))
    slow = figures(cycle(Definitions(video_bandwidth=5e6), p1=P1))
    for name in ("video_peak", "video_peak_on", "video_peak_off", "video_swing", "video_energy"):
        assert slow[name] < 0.9 * plain[name]
    assert slow["video_width"] > 1.5 * plain["video_width"]
    # 5 MHz: 32 ns, the tail of the first triangle has 11 time constants left; chords cost 1e-5 of 0.5 V.
    assert slow["video_area"] == pytest.approx(plain["video_area"], rel=1e-3)
    assert slow["video_inband"] == plain["video_inband"]
    fast = figures(cycle(Definitions(video_bandwidth=1e12), p1=P1))
    for name in VIDEO:
        assert fast[name] == pytest.approx(plain[name], rel=1e-3)


def test_the_filtered_peak_is_found_between_the_samples():
    # A line falling from 0.2 V at 120 ns through a pole: the peak lies where the response meets the line.
    definitions = Definitions(video_bandwidth=10e6)
    dense_time = np.unique(np.concatenate((TIME, np.linspace(0.0, 1000.0, 100001) * NS)))
    dense = replace(
        cycle(definitions, p1=P1), video={"p1": Waveform(dense_time, np.interp(dense_time, TIME, P1), "V")}
    )
    for name in VIDEO:
        assert value(cycle(definitions, p1=P1), name) == pytest.approx(value(dense, name), rel=2e-4)


def test_a_peak_without_both_flanks_has_no_width():
    step = cycle(p1=np.array([0, 0, 0.2, 0.2, 0.2, 0.2, 0.2, 0.2]))
    with pytest.raises(MeasurementError, match=r"not down to half its 200 mV peak after it"):
        value(step, "video_width")
    with pytest.raises(MeasurementError, match="before it"):
        value(cycle(p1=np.array([0.3, 0.3, 0, 0, 0, 0, 0, 0])), "video_width")


def test_the_width_is_that_of_the_peak_and_not_of_its_neighbours():
    # Bumps of 0.25 V at 505 ns and of 0.28 V at 715 ns around a peak of 0.4 V, which is 20 ns wide.
    time = np.array([0, 495, 505, 515, 600, 620, 640, 700, 715, 730, 1000]) * NS
    bumps = np.array([0, 0, 0.25, 0, 0, 0.4, 0, 0, 0.28, 0, 0])
    record = replace(cycle(), video={"p1": Waveform(time, bumps, "V")})
    assert value(record, "video_width") == pytest.approx(20 * NS, rel=1e-9)


def test_reason_when_nothing_leaks():
    found = extract(cycle(p1=0.0 * P1))
    assert found["video_peak"].value == 0.0
    assert found["video_width"].note == "no video leakage"
    assert found["video_inband"].note == "no leakage at 30 MHz"


def test_reason_when_no_port_is_recorded():
    for name in VIDEO:
        assert extract(cycle())[name].note == "no video waveform in this record"


@pytest.mark.parametrize("bandwidth", [None, 100e6])
def test_a_sample_that_is_not_finite_leaves_no_figure(bandwidth):
    broken = np.where(P1 == 0.2, math.nan, P1)
    found = extract(cycle(Definitions(video_bandwidth=bandwidth), p1=P1, p2=broken))
    for name in VIDEO:
        assert found[name].value is None
        assert found[name].note == "the sample at 120 ns is not a finite number"


@settings(max_examples=40)
@given(st.floats(-1e-6, 1e-6))
def test_a_time_shift_leaves_every_figure(shift):
    instants = ("on_edge", "off_edge", "start", "stop")
    timing = replace(TIMING, **{name: getattr(TIMING, name) + shift for name in instants})
    moved = replace(cycle(timing=timing), video={"p1": Waveform(TIME + shift, P1, "V")})
    assert figures(moved) == pytest.approx(figures(cycle(p1=P1)), rel=1e-6)


@settings(max_examples=40)
@given(st.floats(1e-3, 1e3), st.sampled_from([None, 20e6]))
def test_a_scale_goes_to_voltages_and_leaves_the_width(scale, bandwidth):
    definitions = Definitions(video_bandwidth=bandwidth)
    scaled, plain = figures(cycle(definitions, p1=P1 * scale)), figures(cycle(definitions, p1=P1))
    for name in ("video_peak", "video_peak_on", "video_peak_off", "video_swing", "video_area"):
        assert scaled[name] == pytest.approx(scale * plain[name], rel=1e-4)
    assert scaled["video_energy"] == pytest.approx(scale**2 * plain["video_energy"], rel=1e-4)
    assert scaled["video_width"] == pytest.approx(plain["video_width"], rel=1e-4)
    assert scaled["video_inband"] == pytest.approx(plain["video_inband"] + 20.0 * math.log10(scale), abs=1e-6)


@settings(max_examples=40)
@given(st.lists(st.floats(-1.0, 1.0), min_size=8, max_size=8))
def test_a_flip_of_polarity_changes_nothing(samples):
    assert figures(cycle(p1=-np.array(samples))) == pytest.approx(figures(cycle(p1=np.array(samples))))


def test_the_order_of_the_edges_only_swaps_their_figures():
    swapped = replace(TIMING, on_edge=TIMING.off_edge, off_edge=TIMING.on_edge)
    found, plain = figures(cycle(timing=swapped, p1=P1)), figures(cycle(p1=P1))
    assert found["video_peak_on"] == plain["video_peak_off"]
    assert found["video_peak_off"] == plain["video_peak_on"]
    for name in set(VIDEO) - {"video_peak_on", "video_peak_off"}:
        assert found[name] == plain[name]
