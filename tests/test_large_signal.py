"""Figures of the RF in the junctions and of large signal, on records worked out by hand.

Outside references: the formulas of the sources that tests/published/test_holdoff_relation.py names, and arithmetic.
"""

import math
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.measure import METRICS, Definitions, Record, Timing, Waveform, extract
from transim.measure.holdoff import smallest_reverse_bias
from transim.measure.levels import full_on
from transim.measure.rf import JunctionRf, LargeSignal, RfStress

NS = 1e-9
CARRIER = 100e6
TIMING = Timing(on_edge=100 * NS, off_edge=500 * NS, edge=10 * NS, start=0.0, stop=1000 * NS, period=1e-6)


def wave(time, value, unit="1"):
    return Waveform(np.array(time) * NS, np.array(value), unit)


#: Up and down in 100 ns each way, 0.8 when on, 0.001 when off, with a spike in the last 5 ns of both intervals.
ENVELOPE = wave(
    [0, 99, 100, 200, 490, 495, 500, 600, 601, 990, 1000], [1e-3, 1e-3, 0, 0.8, 0.8, 0.3, 0.8, 0.0, 1e-3, 1e-3, 0.1]
)
HELD = JunctionRf("j1", "off", True, voltage=12.0, current=1e-3, reverse=10.0, charge=-1e-15, width=50e-6)
RELAXED = JunctionRf("j2", "off", True, voltage=20.0, current=1e-3, reverse=11.0, charge=-1e-15, width=None)
FULL = JunctionRf("j1", "on", False, voltage=0.3, current=0.2, reverse=-0.8, charge=10e-9, width=50e-6)
EMPTIER = JunctionRf("j2", "on", False, voltage=0.3, current=0.4, reverse=-0.8, charge=10e-9, width=None)


def cycle(**given):
    parts = {"timing": TIMING, "biased_passes": True, "envelope": ENVELOPE, "static_on": 0.9 + 0.0j} | given
    return Record(definitions=Definitions(), carrier=CARRIER, impedance=50.0, **parts)


def stressed(*junctions, modulation=None):
    return cycle(stress=RfStress(20.0, junctions, modulation))


def large(**given):
    parts = {
        "level": 20.0,
        "bias_shift_off": -0.25,
        "bias_shift_on": 0.5,
        "junction_power": {
            "j1": wave([-100, -50, 0, 1000, 1001], [9.0, 9.0, 0.1, 0.1, 7.0], "W"),
            "j2": wave([0, 100, 150, 200, 1000], [0.0, 0.0, 0.4, 0.0, 0.0], "W"),
        },
    } | given
    return LargeSignal(**parts)


def value(record, name):
    return METRICS[name].function(record)


def note(record, name):
    figure = extract(record)[name]
    assert figure.value is None
    return figure.note


def test_hold_off_by_peak_takes_the_worst_junction_that_is_off():
    record = stressed(HELD, RELAXED, FULL)
    assert value(record, "holdoff_peak_margin") == pytest.approx(11.0 - 20.0)
    assert value(stressed(HELD, FULL), "holdoff_peak_margin") == pytest.approx(10.0 - 12.0)


def test_hold_off_by_the_relation_takes_junctions_with_a_width():
    # f 100 MHz, 50 um = 1.9685 mil, 12 V, by the formula of the source
    mils = 50.0 / 25.4
    term = 0.0142 * 100.0 * mils**2 / 12.0 * math.sqrt(1.0 + (0.056 * 12.0 / mils) ** 2)
    expected = 10.0 - 12.0 / math.sqrt(1.0 + term**2)
    assert value(stressed(HELD, RELAXED), "holdoff_bias_margin") == pytest.approx(expected, rel=1e-9)
    assert "width" in note(stressed(RELAXED, FULL), "holdoff_bias_margin")


def test_without_a_junction_that_is_off_there_is_no_margin():
    assert "no junction is off" in note(stressed(FULL), "holdoff_peak_margin")


def test_charge_margin_takes_the_junction_that_has_least():
    expected = 2.0 * math.pi * CARRIER * 10e-9 / 0.4
    assert value(stressed(HELD, FULL, EMPTIER), "charge_margin") == pytest.approx(expected)
    unknown = replace(EMPTIER, charge=None)
    assert value(stressed(FULL, unknown), "charge_margin") == pytest.approx(2.0 * expected)
    assert "known charge" in note(stressed(HELD, unknown), "charge_margin")


def test_modulation_is_that_of_the_stress():
    assert value(stressed(FULL, modulation=1.5), "rf_modulation") == 1.5
    assert "10 %" in note(stressed(FULL), "rf_modulation")


@given(st.floats(0.01, 1e4), st.floats(1e5, 1e11), st.floats(1e-7, 1e-3))
def test_smallest_bias_never_exceeds_the_peak_and_falls_with_frequency(peak, frequency, width):
    found = smallest_reverse_bias(peak, frequency, width)
    assert 0.0 < found <= peak
    assert smallest_reverse_bias(peak, 2.0 * frequency, width) <= found
    assert smallest_reverse_bias(0.0, frequency, width) == 0.0


def test_bias_shift_belongs_to_the_state():
    assert value(cycle(large=large()), "bias_shift_on") == 0.5
    assert value(cycle(large=large()), "bias_shift_off") == -0.25


def test_levels_stand_one_period_before_the_end_of_their_interval():
    # the envelope is a mean over a period to either side: the spikes of the last 5 and 10 ns are of the next edge
    record = cycle(large=large())
    assert value(record, "level_loss") == pytest.approx(-20.0 * math.log10(0.8))
    assert value(record, "level_isolation") == pytest.approx(60.0)
    assert value(record, "on_compression") == pytest.approx(20.0 * math.log10(0.9 / 0.8))


def test_full_level_at_the_end_of_the_pulse_does_not_see_the_next_edge():
    # the spike of the last 5 ns is of the next edge: 100 % stays 0.8, as level_loss has it
    given = cycle(large=large())
    record = replace(given, definitions=replace(given.definitions, reference="end_of_pulse"))
    assert full_on(record) == pytest.approx(0.8)
    assert full_on(replace(record, large=None)) != pytest.approx(0.8, rel=0.01)


def test_peak_power_is_that_of_the_judged_cycle():
    # 9 W before it and 7 W after it do not count
    assert value(cycle(large=large()), "hot_switching_peak") == pytest.approx(0.4)


def test_hot_energy_is_of_one_junction_between_the_levels():
    # static on 0.9: 10 % at 111.25, 90 % needs 0.81, above the 0.8 of this envelope: no such instant
    assert "90 %" in note(cycle(large=large()), "hot_switching_energy")
    # static on 0.8: from 10 to 90 % in 80 ns up, in 80 ns down; j1 takes 0.1 W all the time
    record = cycle(large=large(), static_on=0.8 + 0.0j, envelope=wave([0, 100, 200, 500, 600, 1000], [0, 0, 0.8, 0.8, 0, 0]))
    first = 0.1 * 160 * NS
    # j2's triangle of 0.4 W between 100 and 200 ns, less its corners of 10 ns each
    second = 0.5 * 100 * NS * 0.4 - 2 * 0.5 * 10 * NS * 0.08
    assert value(record, "hot_switching_energy") == pytest.approx(max(first, second), rel=1e-6)


def test_each_analysis_says_what_only_the_other_can_know():
    assert "carrier analysis" in note(stressed(FULL), "level_loss")
    assert "envelope analysis" in note(cycle(large=large()), "charge_margin")
