"""RF times and settling on envelopes drawn by straight lines or closed forms, where each instant is known."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.errors import DesignError, MeasurementError
from transim.measure import METRICS, Definitions, Record, Timing, Waveform, extract

NS = 1e-9
TIMING = Timing(on_edge=100 * NS, off_edge=500 * NS, edge=10 * NS, start=0.0, stop=1000 * NS, period=2e-6)
DURATIONS = ("on_time", "off_time", "on_delay", "off_delay", "rise_time", "fall_time", "on_settling",
             "off_settling", "phase_settling")  # fmt: skip


def cycle(time, value, timing=TIMING, definitions=None, **parts):
    envelope = Waveform(np.array(time) * NS, value, "1")
    given_parts = {"static_on": 0.8 + 0.0j, "static_off": 0.0j} | parts
    return Record(
        timing=timing,
        definitions=definitions or Definitions(),
        carrier=150e6,
        impedance=50.0,
        biased_passes=True,
        envelope=envelope,
        **given_parts,
    )


def lines(**parts):
    """Rise in a line from 200 to 300 ns to 0.8, fall in a line from 600 to 800 ns."""
    return cycle([0, 200, 300, 600, 800, 1000], [0j, 0, 0.8, 0.8, 0, 0], **parts)


def smooth(points=400, scale=1.0, shift=0.0):
    """Give an envelope with a wobble in magnitude and phase after each edge."""
    on = np.linspace(100, 495, points)
    off = np.linspace(495.001, 1000, points)
    u, w = (on - 100) / 40, (off - 500) / 30
    up = -np.expm1(-u) * (1 + 0.2 * np.exp(-u / 2) * np.sin(2 * u)) * np.exp(1j * np.exp(-u))
    down = up[-1] * np.where(w > 0, np.exp(-np.maximum(w, 0)), 1.0)
    time = np.concatenate(([0.0], on, off))
    value = np.concatenate(([0.0], up, down)) * scale
    instants = ("on_edge", "off_edge", "start", "stop")
    timing = replace(TIMING, **{name: getattr(TIMING, name) + shift for name in instants})
    return cycle(time + shift / NS, value, timing, static_on=scale * (1.0 + 0.0j))


STILL = extract(smooth())


def value(record, name):
    return METRICS[name].function(record)


def reason(record, name):
    with pytest.raises(MeasurementError) as caught:
        value(record, name)
    figure = extract(record)[name]
    assert (figure.value, figure.note) == (None, caught.value.message)
    assert "\n" not in figure.note
    return figure.note


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("on_delay", 110.0),
        ("on_time", 190.0),
        ("rise_time", 80.0),
        ("off_delay", 120.0),
        ("off_time", 280.0),
        ("fall_time", 160.0),
        # +-0.5 dB: 0.8 * 10**(-0.5/20) on the way up; 20 dB down: 0.1 on the way down.
        ("on_settling", 100.0 + 100.0 * 10 ** (-0.5 / 20)),
        ("off_settling", 100.0 + 200.0 * (1 - 0.1 / 0.8)),
    ],
)
def test_instants_of_straight_edges(name, expected):
    assert value(lines(), name) == pytest.approx(expected * NS, rel=1e-12)


def test_power_basis_takes_the_root():
    record = lines(definitions=Definitions(basis="power"))
    assert value(record, "on_time") == pytest.approx((100 + 100 * math.sqrt(0.9)) * NS, rel=1e-12)
    assert value(record, "off_time") == pytest.approx((300 - 200 * math.sqrt(0.1)) * NS, rel=1e-12)


def test_end_of_pulse_is_the_level_before_the_off_edge_begins():
    # The envelope creeps from 0.8 at 300 ns to 1.0 at 495 ns, where the off edge begins.
    record = cycle(
        [0, 200, 300, 495, 600, 800, 1000],
        [0, 0, 0.8, 1.0, 0.8, 0, 0],
        definitions=Definitions(reference="end_of_pulse"),
        static_on=None,
    )
    assert value(record, "on_time") == pytest.approx((200 + 195 * 0.5) * NS, rel=1e-12)
    assert value(record, "off_time") == pytest.approx((300 - 200 * 0.1 / 0.8) * NS, rel=1e-12)
    assert reason(record, "on_settling") == "no static on level in this record"


def test_the_off_edge_may_come_first():
    timing = replace(TIMING, on_edge=500 * NS, off_edge=100 * NS)
    record = cycle([0, 200, 300, 600, 800, 1000], [0.8, 0.8, 0, 0, 0.8, 0.8], timing)
    assert value(record, "off_time") == pytest.approx(190 * NS, rel=1e-12)
    assert value(record, "on_time") == pytest.approx(280 * NS, rel=1e-12)


def test_the_first_passage_counts_and_ringing_is_left_to_settling():
    record = cycle([0, 200, 300, 310, 320, 600, 800, 1000], [0, 0, 0.8, 0.4, 0.8, 0.8, 0, 0])
    assert value(record, "on_time") == pytest.approx(190 * NS, rel=1e-12)
    assert value(record, "on_settling") > 215 * NS


def test_rise_time_starts_at_the_last_low_instant_before_the_high_one():
    # A first bump to 0.2 passes 10 % before the edge proper.
    record = cycle([0, 120, 130, 140, 200, 300, 600, 800, 1000], [0, 0, 0.2, 0, 0, 0.8, 0.8, 0, 0])
    assert value(record, "on_delay") == pytest.approx(24 * NS, rel=1e-9)
    assert value(record, "rise_time") == pytest.approx(80 * NS, rel=1e-9)


def test_fall_time_starts_at_the_last_high_instant_before_the_low_one():
    # A first dip to 0.4 at 530 ns passes 90 % before the edge proper.
    record = cycle([0, 200, 300, 520, 530, 540, 600, 800, 1000], [0, 0, 0.8, 0.8, 0.4, 0.8, 0.8, 0, 0])
    assert value(record, "off_delay") == pytest.approx(22 * NS, rel=1e-9)
    assert value(record, "fall_time") == pytest.approx(160 * NS, rel=1e-9)


def test_an_instant_before_the_middle_of_the_edge_is_negative():
    record = cycle([0, 95, 97, 600, 800, 1000], [0, 0, 0.8, 0.8, 0, 0])
    assert value(record, "on_time") == pytest.approx(-3.2 * NS, rel=1e-9)


def test_reason_when_the_rf_is_there_already():
    record = cycle([0, 1000], [0.76, 0.8], static_off=None)
    assert reason(record, "on_time").startswith("RF is already above 90 % (-0.915 dB) when the command")
    assert "0.5 dB" in reason(record, "on_settling")


def test_reason_when_the_rf_never_comes():
    record = cycle([0, 200, 300, 1000], [0, 0, 0.4, 0.4])
    assert reason(record, "on_time") == "RF reaches only -6.02 dB of the on level, not 90 % (-0.915 dB)"
    assert reason(record, "off_delay").startswith("RF is already below 90 % (-0.915 dB)")
    assert reason(record, "on_settling") == (
        "RF ends the on interval at -6.02 dB of the static on level, outside +-0.5 dB"
    )
    assert value(record, "overshoot") == 0.0


def test_reason_when_the_isolation_floor_is_too_high():
    record = cycle([0, 200, 300, 600, 800, 1000], [0.16, 0.16, 0.8, 0.8, 0.16, 0.16], static_off=0.16j)
    expected = "isolation floor -14 dB of the on level is above 10 % (-20 dB)"
    assert reason(record, "off_time") == expected
    assert reason(record, "on_delay") == expected
    assert reason(record, "fall_time") == expected
    assert reason(record, "off_settling") == "isolation floor 15.9 dB is less than 20 dB"
    assert value(record, "off_delay") > 0.0
    assert value(replace(record, definitions=Definitions(isolation_level=15.0)), "off_settling") > 0.0


def test_reason_when_the_rf_is_slow_to_go():
    record = cycle([0, 200, 300, 600, 1000], [0, 0, 0.8, 0.8, 0.4])
    assert reason(record, "off_time") == "RF falls only to -6.02 dB of the on level, not 10 % (-20 dB)"
    assert reason(record, "off_settling") == "RF ends the off interval 7.96 dB down, not 20 dB"


def test_reason_when_there_is_nothing_to_measure():
    assert reason(lines(static_on=0.0j), "on_time") == "no RF passes in the static on state"
    assert reason(lines(static_on=complex(math.nan, 0.0)), "on_time").endswith("not a finite number")
    assert reason(replace(lines(), envelope=None), "off_time") == "no RF envelope in this record"
    late = replace(TIMING, off_edge=1200 * NS)
    assert reason(lines(timing=late), "off_time").startswith("no off interval: the off edge is at 1.2 us")
    short = replace(TIMING, stop=1500 * NS)
    assert reason(lines(timing=short), "off_time").startswith("the waveform covers 0 s to 1 us, not")


def test_a_sample_that_is_not_finite_leaves_no_rf_figure():
    broken = np.array([0, 0, 0.8, 0.8, complex(math.nan, 0), 0])
    figures = extract(cycle([0, 200, 300, 600, 800, 1000], broken))
    for name in (*DURATIONS, "overshoot"):
        assert figures[name].value is None
        assert figures[name].note == "the sample at 800 ns is not a finite number"


def test_overshoot_is_counted_from_the_static_level():
    record = cycle([0, 200, 300, 310, 320, 600, 800, 1000], [0, 0, 0.8, 1.0, 0.8, 0.8, 0, 0])
    assert value(record, "overshoot") == pytest.approx(20 * math.log10(1.25), rel=1e-12)
    high = 0.8 * 10 ** (0.5 / 20)
    assert value(record, "on_settling") == pytest.approx((210 + 10 * (1.0 - high) / 0.2) * NS, rel=1e-9)


@pytest.mark.parametrize("turn", [0.0, 100.0, 179.0, -179.5])
def test_phase_settling_does_not_see_the_wrap(turn):
    # The phase runs from 40 deg off in a line to its end at 400 ns: 2 deg off is at 385 ns.
    time = np.concatenate(([0.0], np.linspace(100, 400, 61), [600, 1000]))
    phase = np.interp(time, [100, 400], [40.0, 0.0]) + turn
    on = 0.8 * np.exp(1j * math.radians(turn))
    record = cycle(time, 0.8 * np.exp(1j * np.radians(phase)), static_on=complex(on))
    assert value(record, "phase_settling") == pytest.approx(285 * NS, rel=1e-9)
    wide = replace(record, definitions=Definitions(phase_band=20.0))
    assert value(wide, "phase_settling") == pytest.approx(150 * NS, rel=1e-9)


def test_phase_settling_takes_the_shorter_way_between_samples():
    # From 175 deg down to -1 deg: the band is entered at +2 deg, 173 of 176 deg on the way.
    value_at = np.exp(1j * np.radians([0, 0, 175, -1, 0, 0]))
    record = cycle([0, 150, 200, 300, 400, 1000], value_at, static_on=1.0 + 0j)
    assert value(record, "phase_settling") == pytest.approx((100 + 100 * 173 / 176) * NS, rel=1e-9)
    # From -178.9 deg to 1.5 deg the shorter way goes down through 180 deg: entered at +2 deg.
    back = np.exp(1j * np.radians([0, 0, -178.9, 1.5, 0, 0]))
    record = cycle([0, 150, 200, 300, 400, 1000], back, static_on=1.0 + 0j)
    assert value(record, "phase_settling") == pytest.approx((200 - 100 * 0.5 / 179.6) * NS, rel=1e-9)


def test_phase_that_never_leaves_the_band_is_settled_from_the_start():
    # No phase while there is no RF, until 200 ns.
    assert value(lines(static_on=0.8 + 0.01j), "phase_settling") == pytest.approx(100 * NS)
    record = cycle([0, 200, 300, 1000], [0.01j + 1, 0.01j + 1, 1, 1], static_on=1.0 + 0j)
    assert value(record, "phase_settling") == 0.0


def test_reason_when_the_phase_does_not_settle():
    record = lines(static_on=0.8j)
    expected = "phase ends the on interval -90 deg from that of the static on state"
    assert reason(record, "phase_settling") == expected
    plain = cycle([0, 200, 300, 1000], np.array([0.0, 0.0, 0.8, 0.8]))
    assert reason(plain, "phase_settling") == "the RF envelope of this record has no phase"
    assert reason(cycle([0, 300, 1000], [0j, 0j, 0j]), "phase_settling").startswith("no RF, so no phase")


@settings(max_examples=40)
@given(st.floats(-1e-6, 1e-6))
def test_a_time_shift_leaves_every_duration(shift):
    moved = extract(smooth(shift=shift))
    for name in DURATIONS:
        assert moved[name].value == pytest.approx(STILL[name].value, abs=1e-15)


@settings(max_examples=40)
@given(st.floats(0.11, 1.0), st.floats(-math.pi, math.pi))
def test_a_complex_factor_on_all_leaves_what_is_relative(size, turn):
    scaled = extract(smooth(scale=size * np.exp(1j * turn)))
    for name in (*DURATIONS, "overshoot"):
        if name != "off_settling":  # counts from |S21| = 1
            assert scaled[name].value == pytest.approx(STILL[name].value, rel=1e-9, abs=1e-17)


def test_denser_samples_converge():
    # Single errors depend on where a sample falls, so the largest is compared: 16 times less is expected.
    *tried, limit = [extract(smooth(points)) for points in (300, 1200, 40000)]
    coarse, fine = (
        max(abs(found[name].value / limit[name].value - 1.0) for name in (*DURATIONS, "overshoot"))
        for found in tried
    )
    assert fine < coarse / 8
    assert fine < 1e-3


@settings(max_examples=30)
@given(st.integers(60, 900))
def test_instants_of_a_cycle_are_in_order(points):
    found = {name: figure.value for name, figure in extract(smooth(points)).items()}
    assert found["on_delay"] < found["on_time"] <= found["on_settling"]
    assert found["off_delay"] < found["off_time"]
    assert 0 < found["rise_time"] <= found["on_time"] - found["on_delay"] + 1e-18
    assert 0 < found["fall_time"] <= found["off_time"] - found["off_delay"] + 1e-18


@pytest.mark.parametrize(
    ("key", "bad"),
    [
        ("basis", "current"),
        ("reference", "peak"),
        ("settle_band", 0.0),
        ("phase_band", 180.0),
        ("video_bandwidth", -1.0),
        ("resolution_bandwidth", math.nan),
        ("isolation_level", math.inf),
    ],
)
def test_a_definition_out_of_range_is_refused(key, bad):
    with pytest.raises(DesignError) as caught:
        Definitions(**{key: bad})
    assert caught.value.key == key


@pytest.mark.parametrize(
    "change",
    [{"stop": -1.0}, {"edge": -1e-9}, {"period": 0.0}, {"on_edge": math.nan}, {"off_edge": 100 * NS}],
)
def test_a_timing_out_of_order_is_refused(change):
    with pytest.raises(MeasurementError, match="timing"):
        replace(TIMING, **change)


@pytest.mark.parametrize("change", [{"carrier": 0.0}, {"impedance": math.inf}])
def test_a_record_without_carrier_or_impedance_is_refused(change):
    with pytest.raises(MeasurementError, match=next(iter(change))):
        replace(lines(), **change)
