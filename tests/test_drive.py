"""Driver and junction figures, and those of the static states, on values worked out by hand."""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.measure import METRICS, Definitions, Record, Timing, Waveform, extract

NS = 1e-9
TIMING = Timing(on_edge=100 * NS, off_edge=500 * NS, edge=10 * NS, start=0.0, stop=1000 * NS, period=1e-6)
STATIC = ("insertion_loss", "isolation", "return_loss_on", "return_loss_off")


def wave(time, value, unit="A"):
    return Waveform(np.array(time) * NS, np.array(value), unit)


def cycle(**parts):
    """Source 40 mA from 95 ns, 10 mA held, sink 30 mA from 500 ns; the RF takes 100 ns each way."""
    given_parts = {
        "timing": TIMING,
        "biased_passes": True,
        "envelope": wave([0, 100, 200, 500, 600, 1000], [0, 0, 1, 1, 0, 0], "1"),
        "static_on": 1.0 + 0.0j,
        "drive_current": wave(
            [0, 95, 95.001, 145, 145.001, 500, 500.001, 530, 530.001, 1000],
            [0, 0, 0.04, 0.04, 0.01, 0.01, -0.03, -0.03, 0, 0],
        ),
        "supply_power": wave([0, 500, 1000], [0.2, 0.2, 0.0], "W"),
        "junction_charge": {
            "j1": wave([0, 100, 495, 1000], [-1e-12, -1e-12, 8e-9, -1e-12], "C"),
            "j2": wave([0, 100, 495, 1000], [3e-9, 3e-9, -2e-12, 3e-9], "C"),
        },
        "junction_reverse": {"j1": wave([0, 100, 200, 1000], [5.0, 5.0, -0.8, 5.5], "V")},
    } | parts
    return Record(definitions=Definitions(), carrier=30e6, impedance=50.0, **given_parts)


def value(record, name):
    return METRICS[name].function(record)


def note(record, name):
    figure = extract(record)[name]
    assert figure.value is None
    return figure.note


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("driver_source_peak", 0.04),
        ("driver_sink_peak", 0.03),
        ("driver_charge_on", 0.04 * 50 * NS + 0.01 * 45 * NS),  # 95 ns to the 90 % instant at 190 ns
        ("driver_charge_off", 0.03 * 30 * NS - 0.01 * 5 * NS),  # 495 ns to the 10 % instant at 590 ns
        ("driver_power", 0.15),
        ("junction_charge", 8e-9),
        ("junction_reverse", 5.5),
    ],
)
def test_figures_of_a_cycle(name, expected):
    assert value(cycle(), name) == pytest.approx(expected, rel=1e-4)


def test_charge_of_a_path_that_passes_unbiased_has_the_other_sign():
    plain, other = cycle(), cycle(biased_passes=False)
    for name in ("driver_charge_on", "driver_charge_off"):
        assert value(other, name) == -value(plain, name)


def test_a_junction_that_conducts_while_blocking_counts_at_that_end():
    record = cycle(junction_charge={"j2": cycle().junction_charge["j2"]})
    assert value(record, "junction_charge") == pytest.approx(3e-9)


def test_charge_is_undefined_with_the_time_it_runs_to():
    record = cycle(envelope=wave([0, 1000], [0.0, 0.0], "1"))
    assert note(record, "driver_charge_on").startswith("on_time is undefined: RF reaches only zero")
    assert note(record, "driver_charge_off").startswith("off_time is undefined: RF is already below 10 %")


def test_a_driver_that_only_sinks_has_no_source_peak():
    record = cycle(drive_current=wave([0, 1000], [-0.01, -0.02]))
    assert value(record, "driver_source_peak") == 0.0
    assert value(record, "driver_sink_peak") == pytest.approx(0.02)


def test_a_junction_that_is_never_reverse_biased_has_zero():
    record = cycle(junction_reverse={"j1": wave([0, 1000], [-0.8, -0.1], "V")})
    assert value(record, "junction_reverse") == 0.0


def test_power_is_stated_for_the_whole_period():
    power = wave([0, 500, 1000], [0.2, 0.2, 0.1], "W")
    record = cycle(timing=replace(TIMING, period=4e-6), supply_power=power)
    assert value(record, "driver_power") == pytest.approx((0.175 * 1.0 + 0.1 * 3.0) / 4.0)


def test_reasons_when_a_waveform_is_missing():
    record = cycle(drive_current=None, supply_power=None, junction_charge={}, junction_reverse={})
    assert note(record, "driver_power") == "the driver has no supply"
    assert note(record, "junction_charge") == "no junction charge in this record"
    assert note(record, "junction_reverse") == "no junction voltage in this record"
    for name in ("driver_source_peak", "driver_sink_peak", "driver_charge_on", "driver_charge_off"):
        assert note(record, name) == "no driver current in this record"


def test_a_sample_that_is_not_finite_leaves_no_figure():
    bad = wave([0, 120, 1000], [0.0, math.inf, 1.0])
    junctions = ("junction_charge", "junction_reverse", "junction_current", "junction_power")
    driver = {"drive_current": bad, "supply_power": bad, "driver_output_power": bad}
    record = cycle(**driver, **{name: {"j1": bad} for name in junctions})
    for name in METRICS:
        if name.startswith(("driver_", "junction_")):
            assert note(record, name) == "the sample at 120 ns is not a finite number"


@settings(max_examples=40)
@given(st.floats(-1e-6, 1e-6), st.floats(0.01, 100.0))
def test_shift_and_scale(shift, scale):
    instants = ("on_edge", "off_edge", "start", "stop")
    timing = replace(TIMING, **{name: getattr(TIMING, name) + shift for name in instants})
    plain = cycle()
    moved = cycle(
        timing=timing,
        envelope=Waveform(plain.envelope.time + shift, plain.envelope.value, "1"),
        drive_current=Waveform(plain.drive_current.time + shift, plain.drive_current.value * scale, "A"),
    )
    for name in ("driver_source_peak", "driver_sink_peak", "driver_charge_on", "driver_charge_off"):
        assert value(moved, name) == pytest.approx(scale * value(plain, name), rel=1e-6)


def test_static_figures_are_positive_losses():
    # 10 dB: amplitude 0.316228; a quarter of the amplitude: 12.0412 dB.
    record = cycle(static_on=-0.25j, static_off=10**-0.5, match_on=0.25, match_off=1.0)
    expected = (20 * math.log10(4), 10.0, 20 * math.log10(4), 0.0)
    assert [value(record, name) for name in STATIC] == pytest.approx(expected, rel=1e-12)


def test_static_figures_that_do_not_exist():
    zero = cycle(static_on=0j, static_off=0j, match_on=0j, match_off=0j)
    for name in STATIC:
        assert note(zero, name).startswith("infinite: S")
        assert note(cycle(static_on=None), name).endswith("in this record")
    assert note(cycle(static_on=complex(math.nan, 0)), "insertion_loss").endswith("is not a finite number")
