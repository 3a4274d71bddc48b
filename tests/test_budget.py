"""Time budget and charge account of cycles whose waveforms are closed forms.

Outside references: the instants of piecewise linear and exponential waveforms, by hand; charge control
dQ/dt = i - Q/tau under a constant current, whose solution every text on p-i-n switches gives (here: J. F. White,
"Microwave Semiconductor Engineering", 1982).
"""

import math
from dataclasses import replace

import numpy as np
import pytest

from transim.errors import MeasurementError
from transim.measure import Definitions, Record, Timing, Waveform
from transim.measure.account import charge_account, needed_current
from transim.measure.budget import PARTS, time_budget

NS = 1e-9
ON, OFF = 100 * NS, 500 * NS
TIMING = Timing(on_edge=ON, off_edge=OFF, edge=2 * NS, start=0.0, stop=900 * NS, period=1e-6)


def steps(*points, unit):
    """Return a polyline through (ns, value)."""
    time, value = zip(*points, strict=True)
    return Waveform(np.array(time) * NS, np.array(value, dtype=float), unit)


def record(**changes):
    """Return a cycle of straight lines: each instant is where a line is half way, or at 10 or 90 %."""
    base = Record(
        timing=TIMING,
        definitions=Definitions(),
        carrier=1e8,
        impedance=50.0,
        biased_passes=True,
        # 10 % at 140 ns, 90 % at 220 ns; back through 90 % at 560 ns, 10 % at 640 ns
        envelope=steps((0, 0), (130, 0), (230, 1), (550, 1), (650, 0), (900, 0), unit="1"),
        static_on=1.0 + 0j,
        static_off=0j,
        # half way at 105 ns; at 506 ns to the spike that it goes farthest to
        driver_voltage=steps((0, 0), (102, 0), (108, 4), (503, 4), (509, -6), (515, -4), (900, -4), unit="V"),
        # half way at 120 ns; at 520 ns
        junction_current={
            "xj1": steps((0, 0), (110, 0), (130, 0.01), (515, 0.01), (525, -0.01), (900, -0.01), unit="A"),
            "xj2": steps((0, 0), (900, 1e-3), unit="A"),
        },
    )
    return replace(base, **changes)


@pytest.mark.parametrize(("edge", "expected"), [("on", (5, 15, 20, 80)), ("off", (6, 14, 40, 80))])
def test_parts_are_the_differences_of_the_instants(edge, expected):
    budget = time_budget(record(), edge)
    assert tuple(name for name, _ in budget.parts) == PARTS
    assert [seconds for _, seconds in budget.parts] == pytest.approx([value * NS for value in expected], rel=1e-9)
    assert math.fsum(seconds for _, seconds in budget.parts) == pytest.approx(budget.total, rel=1e-12)
    assert budget.total == pytest.approx(sum(expected) * NS, rel=1e-9)
    assert budget.end == pytest.approx((ON if edge == "on" else OFF) + budget.total, rel=1e-12)
    assert budget.notes == ()
    assert budget.fixed == pytest.approx(20 * NS)


def test_an_instant_out_of_order_is_said_and_joins_its_neighbour():
    # the driver's output is half way at 125 ns, after the junction current
    late = steps((0, 0), (120, 0), (130, 4), (503, 4), (509, -6), (900, -6), unit="V")
    budget = time_budget(record(driver_voltage=late), "on")
    assert budget.parts == (
        ("driver and junction current", pytest.approx(20 * NS)),
        ("charge transport", pytest.approx(20 * NS)),
        ("RF transition", pytest.approx(80 * NS)),
    )
    assert budget.notes == ("driver output: comes after what follows it",)
    assert budget.fixed == pytest.approx(20 * NS)


def test_an_instant_before_the_command_joins_too():
    early = steps((0, 0), (99, 0), (99.4, 4), (900, 4), unit="V")
    budget = time_budget(record(driver_voltage=early), "on")
    assert budget.parts[0] == ("driver and junction current", pytest.approx(20 * NS))
    assert budget.notes == ("driver output: comes before the command's 50 % point",)


def test_what_is_not_recorded_joins_its_neighbours():
    budget = time_budget(record(driver_voltage=None, junction_current={}), "off")
    assert budget.parts == (
        ("driver and junction current and charge transport", pytest.approx(60 * NS)),
        ("RF transition", pytest.approx(80 * NS)),
    )
    assert budget.notes == ("driver output: not in this record", "junction current: not in this record")


def test_rf_that_never_switches_has_no_budget():
    flat = steps((0, 0), (900, 0), unit="1")
    with pytest.raises(MeasurementError):
        time_budget(record(envelope=flat), "on")


def test_rf_that_is_above_ten_percent_already_has_no_first_change():
    above = steps((0, 0.2), (130, 0.2), (230, 1), (550, 1), (650, 0), (900, 0), unit="1")
    budget = time_budget(record(envelope=above), "on")
    assert [name for name, _ in budget.parts] == ["driver", "junction current", "charge transport and RF transition"]
    assert math.fsum(seconds for _, seconds in budget.parts) == pytest.approx(budget.total, rel=1e-12)


TAU, CURRENT, BYPASS = 200 * NS, 0.01, 50e-12


def charged(stray=BYPASS, fed=1.0):
    """Return the cycle with a charge-controlled junction at a constant current, and a capacitor that takes 1 V."""
    # the current steps at 100 and 500 ns: a sample just before each
    pieces = (np.linspace(0, 99.9999, 101), np.linspace(100, 499.9999, 4001), np.linspace(500, 900, 4001))
    time = np.concatenate(pieces)
    on, off = (time - 100) * NS, (time - 500) * NS
    top = CURRENT * TAU * (1 - math.exp(-400 * NS / TAU))
    full = CURRENT * TAU * -np.expm1(-np.clip(on, 0, None) / TAU)
    # reversed by the same current; at 640 ns, where off_time ends, the charge is not gone yet
    empty = (top + CURRENT * TAU) * np.exp(-np.clip(off, 0, None) / TAU) - CURRENT * TAU
    charge = fed * np.where(time < 500, full, empty)
    current = np.where(time < 100, 0.0, np.where(time < 500, CURRENT, -CURRENT))
    volts = np.interp(time, [0, 100, 140, 500, 540, 900], [0, 0, 1, 1, 0, 0])
    slope = np.gradient(volts, time * NS)
    axis = time * NS
    return record(
        drive_current=Waveform(axis, current + stray * slope, "A"),
        junction_charge={"xj1": Waveform(axis, charge, "C"), "far": Waveform(axis, 7 * charge, "C")},
        junction_conduction={"xj1": Waveform(axis, fed * current, "A"), "far": Waveform(axis, current, "A")},
        junction_fed={"xj1": fed},
        other_charge={"c1": Waveform(axis, BYPASS * volts, "C")},
    )


@pytest.mark.parametrize("fed", [1.0, -1.0])
def test_account_of_a_charge_controlled_junction(fed):
    found = charged(fed=fed)
    account = charge_account(found, time_budget(found, "on"))
    length = 120 * NS
    stored = CURRENT * TAU * -math.expm1(-length / TAU)
    assert account.stored == pytest.approx(stored, rel=1e-3)
    assert account.recombined == pytest.approx(CURRENT * length - stored, rel=5e-3)
    assert account.displaced == pytest.approx(BYPASS * 1.0, rel=1e-6)
    assert account.delivered == pytest.approx(CURRENT * length + BYPASS, rel=2e-3)
    assert account.closing_share < 2e-3


def test_a_capacitance_that_is_missed_shows_in_the_closing_error():
    found = charged(stray=3 * BYPASS)
    account = charge_account(found, time_budget(found, "on"))
    assert account.closing == pytest.approx(2 * BYPASS, rel=0.03)
    assert account.closing_share == pytest.approx(2 * BYPASS / account.delivered, rel=0.03)


def test_account_needs_its_waveforms():
    found = charged()
    budget = time_budget(found, "off")
    for name in ("drive_current", "junction_conduction", "other_charge"):
        gone = replace(found, **{name: None if name == "drive_current" else {}})
        with pytest.raises(MeasurementError, match=r"in this record|that the driver feeds"):
            charge_account(gone, budget)


def test_needed_current_at_the_time_itself_is_the_mean_current():
    found = charged()
    budget = time_budget(found, "off")
    account = charge_account(found, budget)
    assert needed_current(account, budget, budget.total) == pytest.approx(abs(account.mean_current), rel=2e-3)
    assert abs(account.mean_current) == pytest.approx(CURRENT, rel=0.05)


def test_needed_current_of_a_short_limit_moves_all_the_stored_charge():
    # a charge-controlled junction without capacitance: towards no time at all, I t = what is removed
    found = charged()
    budget = time_budget(found, "off")
    account = replace(charge_account(found, budget), displaced=0.0, early=0.0)
    limit = budget.fixed + 1e-12
    assert needed_current(account, budget, limit) * 1e-12 == pytest.approx(abs(account.stored), rel=0.01)
    assert needed_current(account, budget, budget.fixed) is None
