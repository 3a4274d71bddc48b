"""Ratings, dissipation and switching rate of simulated cycles, against closed forms and against other runs.

Outside references: Shockley's equation for the junction's voltage at DC; Joule's law; the energy C V^2 that a supply
spends in a full cycle of a capacitor (common textbook result, from memory); ngspice's own run at another period.
"""

import math

import numpy as np
import pytest
from scipy import constants

from transim.cli import main
from transim.design.toml import read_design
from transim.study.run import run_design

HEAD = """\
title = "Reed, stress"
[control]
low = "0 V"
high = "5 V"
edge = "10 ns"
on_for = "{on} us"
period = "{period} us"
pulses = {pulses}
[carrier]
frequency = "30 MHz"
[environment]
temperature = "27 degC"
"""
DIODE = """\
[switch]
path = "series_single"
junction = "plain"
feed_inductance = "0 H"
return_inductance = "0 H"
dc_block = "0.1 pF"
bypass = "0.001 pF"
[junction.plain]
part = "junction_diode"
transit_time = "{transit}"
junction_capacitance = "1 fF"
{ratings}
"""
CURRENT = '[driver.ideal]\npart = "ideal_current"\non_current = "10 mA"\noff_current = "0 A"\n'
VOLTAGE = '[driver.ideal]\npart = "ideal_voltage"\non_voltage = "1 V"\noff_voltage = "-20 V"\n'
CAPACITOR = """\
[switch]
path = "shunt_single"
junction = "plain"
dc_block = "0.1 pF"
bypass = "10 nF"
[junction.plain]
part = "junction_diode"
junction_capacitance = "1 fF"
[driver.rails]
part = "resistor_feed"
vp = "-1 V"
vn = "-5 V"
feed_resistor = "100 ohm"
output_resistance = "1 ohm"
ratings = { output_current = "1 A", dissipation = "1 W", supply_current = "1 A" }
"""
COMMUTATOR = """\
[switch]
path = "series_pair"
junction = "hp7"
feed_resistance = "47 ohm"
feed_inductance = "4.7 uH"
return_resistance = "22 ohm"
return_inductance = "10 uH"
bypass = "22 pF"
[junction.hp7]
part = "pin_lumped"
lifetime = "1 us"
ratings = { dissipation = "100 mW" }
[driver.fast]
part = "push_pull_speedup"
speedup_cap = "470 pF"
ratings = { dissipation = "DISSIPATION" }
"""
TRANSISTOR = """\
[switch]
path = "series_bjt"
junction = "hn3"
dc_block = "10 pF"
[junction.hn3]
part = "bjt_pair"
ratings = { reverse_voltage = "5 V", forward_current_peak = "100 mA" }
[driver.gate]
part = "resistor_feed"
"""
POWERS = ("junction_dissipation", "driver_dissipation", "driver_power")


@pytest.fixture
def design_of(tmp_path):
    """Return a function that writes a design and reads it back."""

    def write(text, on=4.0, period=10.0, pulses=1):
        file = tmp_path / "stress.toml"
        file.write_text(HEAD.format(on=on, period=period, pulses=pulses) + text, encoding="utf-8")
        return read_design(file)

    return write


def rated(result):
    return {judged.metric.removeprefix("rating "): judged for judged in result.ratings}


def test_a_junction_at_dc_takes_voltage_times_current(design_of, engine):
    ratings = 'ratings = { forward_current_mean = "5 mA", forward_current_peak = "9 mA", dissipation = "10 mW" }'
    design = design_of(DIODE.format(transit="0 s", ratings=ratings) + CURRENT)
    (result,) = run_design(design, engine).results
    thermal = constants.k * 300.15 / constants.e
    power = 10e-3 * thermal * math.log(10e-3 / 1e-14 + 1.0)
    law = result.rates.laws["junction_dissipation"]
    assert law.settled_on == pytest.approx(power, rel=1e-3)
    assert law.settled_off == pytest.approx(0.0, abs=1e-9)
    assert result.figures["junction_dissipation"].value == pytest.approx(0.4 * power, rel=3e-3)
    judged = rated(result)
    assert judged["junction.plain.forward_current_mean xj"].value == pytest.approx(4e-3, rel=3e-3)
    assert judged["junction.plain.forward_current_peak xj"].value == pytest.approx(10e-3, rel=1e-2)
    assert judged["junction.plain.dissipation xj"].value == pytest.approx(0.4 * power, rel=3e-3)
    verdicts = [judged[f"junction.plain.{key} xj"].verdict for key in ("forward_current_peak", "dissipation")]
    assert verdicts == ["fail", "pass"]
    assert result.figures["driver_dissipation"].note == "the driver has no supply"


@pytest.mark.parametrize(("most", "verdict", "status"), [("19 V", "FAIL", 1), ("21 V", "PASS", 0)])
def test_a_violated_rating_is_a_missed_limit_of_the_command(design_of, capsys, most, verdict, status):
    ratings = f'ratings = {{ reverse_voltage = "{most}" }}'
    design = design_of(DIODE.format(transit="10 ns", ratings=ratings) + VOLTAGE)
    assert main(["run", str(design.source.path)]) == status
    text = capsys.readouterr().out
    assert f"junction.plain.reverse_voltage  20 V ({-5 if status else 5} %) {verdict}" in text
    assert text.splitlines()[-1].startswith(f"Verdict: {verdict}")


def test_a_driver_of_a_capacitor_spends_c_v_squared_a_cycle(design_of, engine):
    (result,) = run_design(design_of(CAPACITOR, on=8.0, period=20.0), engine).results
    energy = 10e-9 * 4.0**2
    law = result.rates.laws["driver_power"]
    assert law.slope == pytest.approx(energy, rel=0.01)
    # half of it in the driver's own resistors at each edge, as all of the capacitance is at its output
    kept = result.rates.laws["driver_dissipation"]
    assert (kept.edge_on, kept.edge_off) == pytest.approx((energy / 2, energy / 2), rel=0.01)
    assert result.figures["driver_dissipation"].value == pytest.approx(energy / 20e-6, rel=0.01)
    judged = rated(result)
    assert judged["driver.rails.output_current"].value == pytest.approx(4.0 / 101.0, rel=0.02)
    assert judged["driver.rails.supply_current"].value == pytest.approx(4.0 / 101.0, rel=0.02)


def test_power_at_twice_the_rate_is_as_predicted_from_one_cycle(design_of, engine):
    text = COMMUTATOR.replace("DISSIPATION", "1 W")
    (slow,) = run_design(design_of(text, on=8.0, period=20.0), engine).results
    # a train in its steady state
    (fast,) = run_design(design_of(text, on=4.0, period=10.0, pulses=3), engine).results
    assert slow.rates.held > 100e3
    for name in POWERS:
        predicted = slow.rates.laws[name].at(100e3)
        assert predicted == pytest.approx(fast.figures[name].value, rel=0.02)
        # and it is no accident of a power that hardly changes
        assert abs(predicted - slow.figures[name].value) > 0.02 * predicted


def test_a_rated_dissipation_sets_the_highest_rate_and_a_run_there_meets_it(design_of, engine):
    text = COMMUTATOR.replace("DISSIPATION", "23.5 mW")
    (first,) = run_design(design_of(text, on=8.0, period=20.0), engine).results
    highest = first.rates.highest
    assert highest.reason == "rating driver.fast.dissipation"
    assert first.figures["highest_rate"].value == highest.rate
    period = 1e6 / highest.rate
    (there,) = run_design(design_of(text, on=0.4 * period, period=period, pulses=3), engine).results
    assert there.figures["driver_dissipation"].value == pytest.approx(23.5e-3, rel=0.02)


def test_all_power_of_the_supplies_goes_somewhere(design_of, engine):
    (result,) = run_design(design_of(COMMUTATOR.replace("DISSIPATION", "1 W"), on=8.0, period=20.0), engine).results
    junction, kept, supplied = (result.rates.laws[name].settled_on for name in POWERS)
    # all from the 5 V rail; then 47 ohm carry the whole current, and each return's 22 ohm half of it
    current = supplied / 5.0
    assert supplied == pytest.approx(kept + 2.0 * junction + current**2 * (47.0 + 22.0 / 2.0), rel=1e-3)


def test_three_terminals_take_what_the_driver_delivers_less_the_losses_of_the_path(design_of, engine):
    design = design_of(TRANSISTOR, on=8.0, period=20.0)
    (case,) = run_design(design, engine).cases
    video, (result,) = case.video, case.results
    end = int(np.searchsorted(video["time"].real, 8.16e-6)) - 1
    names = ("v(drive)", "v(xpath.b)", "v(xpath.c)", "v(xpath.e)", "i(vdrive)")
    bias, base, collector, emitter, current = (float(video[name][end].real) for name in names)
    losses = (bias - base) ** 2 / 330.0 + (collector**2 + emitter**2) / 470.0
    law = result.rates.laws["junction_dissipation"]
    assert law.settled_on == pytest.approx(bias * current - losses, rel=1e-3)
    judged = rated(result)
    # the base current is the driver's, once all has settled
    assert judged["junction.hn3.forward_current_peak xj"].value >= current
    assert {"junction.hn3.reverse_voltage xj", "junction.hn3.reverse_voltage xj 2"} <= set(judged)
