"""Pulse trains, budgets and charge accounts of simulated cycles, against closed forms and against other runs.

Outside references: charge control dQ/dt = i - Q/tau (J. F. White, "Microwave Semiconductor Engineering", 1982),
whose response to trapezoids of current follows by superposition; causality: until the command changes again, a
shorter pulse is a longer one; conservation of charge.
"""

import json
import math
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from transim.cli import main
from transim.design.toml import read_design
from transim.report.budget import edge_sentences
from transim.study.run import run_design

EXAMPLES = sorted((Path(__file__).parents[2] / "examples").glob("*.toml"))
TAU, CURRENT, EDGE = 1e-6, 10e-3, 10e-9
#: At 25 degC the lifetime is the parameter's own value.
HEAD = """\
title = "Reed, train"
[control]
{control}
[carrier]
frequency = "150 MHz"
[environment]
temperature = "25 degC"
[switch]
path = "{path}"
junction = "thin"
bypass = "0.001 pF"
{more}
[junction.thin]
part = "pin_lumped"
lifetime = "1 us"
transit_time = "1 ns"
[driver.ideal]
part = "ideal_current"
on_current = "10 mA"
off_current = "{off}"
"""
PULSES = 'low = "0 V"\nhigh = "5 V"\nedge = "10 ns"\non_for = "{on}"\nperiod = "{period}"\npulses = {pulses}'


def design_of(folder, *, control=None, path="series_single", off="10 mA", tail="", **pulse):
    on, period, pulses = (pulse.get(key, usual) for key, usual in (("on", "3 us"), ("period", "8 us"), ("pulses", 1)))
    control = control or PULSES.format(on=on, period=period, pulses=pulses)
    # chokes keep the RF out of the ideal driver where it is blocked by a shunt
    series = 'dc_block = "10 pF"\nfeed_inductance = "0 H"\nreturn_inductance = "0 H"'
    more = series if path == "series_single" else 'dc_block = "200 pF"'
    file = folder / "reed.toml"
    file.write_text(HEAD.format(control=control, off=off, path=path, more=more) + tail)
    return read_design(file)


@pytest.fixture(scope="module", params=EXAMPLES, ids=lambda file: file.stem)
def example(request, engine):
    return run_design(read_design(request.param), engine)


def test_budgets_of_the_examples_add_up(example):
    for result in example.results:
        assert set(result.budget) == {"on_time", "off_time"}
        for metric, budget in result.budget.items():
            assert math.fsum(seconds for _, seconds in budget.parts) == pytest.approx(result.figures[metric].value)
            assert all(seconds >= 0.0 for _, seconds in budget.parts)
            # a part is missing only where that is said
            assert len(budget.parts) + len(budget.notes) == 4


def test_charge_of_the_examples_is_accounted_for(example):
    for result in example.results:
        assert set(result.charge) == {"on_time", "off_time"}
        for metric, account in result.charge.items():
            assert account.closing_share < 0.02
            sign = 1.0 if metric == "on_time" else -1.0
            moved = result.figures[f"driver_charge_{metric.removesuffix('_time')}"].value
            assert sign * account.delivered == pytest.approx(moved, rel=1e-9)
            assert sign * account.stored > 0.0
            assert account.recombined > 0.0


def test_recombination_is_what_the_lifetime_says(engine):
    """The account takes it from currents; here it is the integral of Q/tau over the edge."""
    (file,) = (file for file in EXAMPLES if file.stem == "commutator_pin")
    design = read_design(file)
    outcome = run_design(design, engine, drivers=["fast"])
    (case,) = outcome.cases
    result, video = case.results[0], case.video
    values = next(iter(design.switch.junctions.values())).values
    lifetime = values["lifetime"] * ((25.0 + 273.15) / 298.15) ** values["lifetime_exponent"]
    time = np.real(video["time"])
    charge = sum(1e-9 * np.real(video[f"v(xpath.{name}.x1.q)"]) for name in ("xj1", "xj2"))
    for metric, account in result.charge.items():
        end = result.budget[metric].end
        begin = end - result.budget[metric].total - design.control.edge / 2.0
        grid = np.linspace(begin, end, 20001)
        lost = np.trapezoid(np.interp(grid, time, charge), grid) / lifetime
        # a difference of integrals over samples: as exact as the charges that it is the difference of
        assert account.recombined == pytest.approx(lost, abs=2e-3 * abs(account.delivered))


def test_ideal_drive_turns_on_by_the_closed_form(tmp_path, engine):
    # Q = I tau (1 - exp(-t/tau)), t being how long the current takes for the charge that no capacitance takes
    (result,) = run_design(design_of(tmp_path, off="0 A"), engine).results
    budget, account = result.budget["on_time"], result.charge["on_time"]
    assert account.closing_share < 0.02
    time = (account.delivered - account.displaced) / CURRENT
    assert time == pytest.approx(budget.total, rel=0.1)
    stored = CURRENT * TAU * -math.expm1(-time / TAU)
    assert account.stored == pytest.approx(stored, rel=2e-3)
    assert account.recombined == pytest.approx(CURRENT * time - stored, rel=0.05)
    # without chokes the current turns with the command, within its edge
    assert budget.fixed <= EDGE
    assert account.mean_current == pytest.approx(CURRENT, rel=0.05)


def test_path_that_passes_without_bias_is_accounted_for(tmp_path, engine):
    (result,) = run_design(design_of(tmp_path, path="shunt_single"), engine).results
    assert result.charge["off_time"].stored > 0.0 > result.charge["on_time"].stored
    for metric, account in result.charge.items():
        assert account.closing_share < 0.02
        assert math.fsum(s for _, s in result.budget[metric].parts) == pytest.approx(result.figures[metric].value)


def ramped(time):
    """Return the charge of a current that goes from 0 to CURRENT around time 0, after its edge."""
    x = EDGE / (2.0 * TAU)
    return CURRENT * TAU * (1.0 - math.exp(-time / TAU) * math.sinh(x) / x)


def test_charge_of_a_train_follows_the_recursion(tmp_path, engine):
    """Each pulse adds to what is left of those before it: Q of the last, Q exp(-T/tau) of the one before ..."""
    high, period, pulses = 0.3e-6, 0.6e-6, 4
    design = design_of(tmp_path, on="300 ns", period="600 ns", pulses=pulses, off="0 A")
    (result,) = run_design(design, engine).results
    # the charge is taken where the command begins to fall
    after = high - EDGE / 2.0
    left = [ramped(k * period + after) - ramped(k * period - EDGE / 2.0) for k in range(1, pulses)]
    first, last = ramped(after), ramped(after) + math.fsum(left)
    assert last > 1.5 * first
    assert result.first_pulse["junction_charge"].value == pytest.approx(first, rel=5e-3)
    assert result.figures["junction_charge"].value == pytest.approx(last, rel=5e-3)


def test_first_pulse_is_the_single_pulse(tmp_path, engine):
    (single,) = run_design(design_of(tmp_path, period="8 us"), engine).results
    (train,) = run_design(design_of(tmp_path, period="8 us", pulses=2), engine).results
    assert single.first_pulse is None
    for metric in ("on_time", "off_time", "on_settling", "driver_charge_on", "driver_charge_off"):
        assert train.first_pulse[metric].value == pytest.approx(single.figures[metric].value, rel=2e-3)


def test_recorded_command_gives_what_the_same_pulse_gives(tmp_path, engine):
    points = ((0, 0), (0.995, 0), (1.005, 5), (3.995, 5), (4.005, 0), (9, 0))
    (tmp_path / "command.csv").write_text("".join(f"{time}e-6,{volts}\n" for time, volts in points))
    recorded = design_of(tmp_path, control='record = "command.csv"\nperiod = "8 us"')
    (found,) = run_design(recorded, engine).results
    (other,) = run_design(design_of(tmp_path), engine).results
    assert found.faults == ()
    for metric in ("on_time", "off_time", "on_settling", "driver_charge_on", "junction_charge", "insertion_loss"):
        assert found.figures[metric].value == pytest.approx(other.figures[metric].value, rel=3e-3)


def test_recorded_train_is_judged_at_its_last_complete_pulse(tmp_path, engine):
    # a short pulse, then the judged one, then one that the record does not end
    short, judged = ((0, 0), (0.995, 0), (1.005, 5), (1.3, 5), (1.31, 0)), ((5, 0), (5.01, 5), (8, 5), (8.01, 0))
    points = (*short, *judged, (13, 0), (13.01, 5))
    (tmp_path / "command.csv").write_text("".join(f"{time}e-6,{volts}\n" for time, volts in points))
    # the longest step is a share of the judged pulse, ten times as long as the first one: as fine for both
    fine = "[numerics]\nsteps = 4000\n"
    design = design_of(tmp_path, control='record = "command.csv"\nperiod = "8 us"', tail=fine)
    (found,) = run_design(design, engine).results
    (other,) = run_design(design_of(tmp_path), engine).results
    assert found.figures["off_time"].value == pytest.approx(other.figures["off_time"].value, rel=5e-3)
    (short,) = run_design(design_of(tmp_path, on="305 ns", period="4.005 us"), engine).results
    for metric in ("on_time", "junction_charge"):
        assert found.first_pulse[metric].value == pytest.approx(short.figures[metric].value, rel=5e-3)


def test_shortest_pulse_and_gap_are_what_causality_says(tmp_path, engine):
    """Until the command changes, nothing tells a short pulse from a long one: it must last until RF has settled.

    Reversed by 10 mA, the charge at 10 % RF is too small to shorten the next on time by 5 %: the gap must last
    until RF has fallen. An interval ends, for the metrics, half an edge before the command's 50 % point.
    """
    design = design_of(tmp_path, on="1.5 us", period="4 us", tail="[measure]\nshortest = true\n")
    outcome = run_design(design, engine)
    (case,) = outcome.cases
    figures, found = case.results[0].figures, case.throws[0].shortest
    for usable, metric in ((found.pulse, "on_settling"), (found.gap, "off_time")):
        needed = figures[metric].value + EDGE / 2.0
        assert 0.0 < usable.tolerance <= 0.01 * usable.value
        assert usable.value - usable.tolerance - 0.005 * needed <= needed <= usable.value + 0.005 * needed
    assert figures["shortest_pulse"].value == found.pulse.value
    assert figures["shortest_gap"].value == found.gap.value


def test_shortest_is_looked_for_on_request_only(tmp_path, engine):
    design = design_of(tmp_path)
    (case,) = run_design(design, engine).cases
    assert case.throws[0].shortest is None
    assert "on request" in case.results[0].figures["shortest_pulse"].note
    short = replace_pulse(design, 60e-9)
    (case,) = run_design(short.model_copy(update={"shortest": True}), engine).cases
    assert case.throws[0].shortest.pulse.value is None
    assert case.throws[0].shortest.pulse.note.startswith("not even a pulse of 60 ns is usable: at 150 MHz RF ")


def replace_pulse(design, on_for):
    return design.model_copy(update={"control": design.control.model_copy(update={"on_for": on_for})})


def test_limit_on_the_shortest_pulse_asks_for_it_and_is_judged(tmp_path):
    tail = '[limits]\nshortest_pulse = { max = "100 ns" }\noff_time = { max = "100 ns" }\n'
    design_of(tmp_path, on="1 us", period="2.5 us", tail=tail)
    assert main(["run", str(tmp_path / "reed.toml"), "--json", str(tmp_path / "run.json")]) == 1
    (result,) = json.loads((tmp_path / "run.json").read_text())["results"]
    judged = {entry["metric"]: entry for entry in result["limits"]}
    assert judged["shortest_pulse"]["verdict"] == "fail"
    assert result["shortest"]["pulse"]["value"] == judged["shortest_pulse"]["value"]
    assert set(result["shortest"]["gap"]) == {"value", "tolerance", "note"}
    budget, charge = result["budget"]["off_time"], result["charge"]["off_time"]
    assert math.fsum(part["seconds"] for part in budget["parts"]) == pytest.approx(budget["total"])
    assert budget["total"] == result["metrics"]["off_time"]["value"]
    # to empty the junction in less than 100 ns, nearly all that it holds has to go out of it in that time
    assert charge["limit"] == pytest.approx(100e-9)
    assert charge["needed_current"] > 0.85 * CURRENT * TAU * -math.expm1(-1.0) / 100e-9
    assert result["first_pulse"] is None


def test_sentences_name_parts_charge_and_current(tmp_path, engine):
    design = design_of(tmp_path, tail='[limits]\noff_time = { max = "100 ns" }\n')
    (result,) = run_design(design, engine).results
    first, second, third, *_ = edge_sentences(result, "off_time")
    assert first.startswith("off_time ")
    assert "RF transition" in first
    assert second.startswith("the driver removes ")
    assert third.startswith("removing ")
    assert "that the limit of 100 ns leaves takes " in third
    # a limit shorter than what no current shortens
    hopeless = replace(result.judgements[0], max=1e-12)
    *_, last = edge_sentences(replace(result, judgements=(hopeless,)), "off_time")[:3]
    assert last.startswith("no current meets the limit of 1 ps: ") or result.budget["off_time"].fixed <= 0.0
