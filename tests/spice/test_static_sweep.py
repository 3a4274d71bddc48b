"""Settled states against frequency and against the holding current, run by ngspice.

Outside references, beside each check: J. F. White, "Microwave Semiconductor Engineering", 1982 (Q = I tau,
R = W^2/(mu Q), loss of a series resistance); the charges of the SPICE diode and of the Gummel-Poon transistor
(P. Antognetti, G. Massobrio, "Semiconductor Device Modeling with SPICE", 1988, memory); scikit-rf as a reader of
Touchstone files; and the common practice of the trade for a transistor as a pair of junctions.
"""

import csv
import json
import math

import numpy as np
import pytest
import scipy.constants
import skrf

from transim.cli import main
from transim.design.toml import read_design
from transim.study.case import Case
from transim.study.settled import run_bias_sweeps, run_static_sweeps

VT = scipy.constants.k * 298.15 / scipy.constants.e

DESIGN = """
title = "Heron \N{DEGREE SIGN}"
[control]
low = "0 V"
high = "5 V"
edge = "10 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = ["30 MHz", "100 MHz"]
level = "-40 dBm"
[switch]
{switch}
[driver.gate]
part = "resistor_feed"
vp = "5 V"
feed_resistor = "1 ohm"
[driver.rails]
part = "resistor_feed"
vp = "5 V"
vn = "-5 V"
[limits]
insertion_loss = {{ max = "5 dB" }}
isolation = {{ min = "20 dB" }}
{rest}
"""
STATIC = '[static]\nfrom = "10 MHz"\nto = "1 GHz"\n'
TRANSISTOR = 'path = "series_bjt"\njunction = "q"\n[junction.q]\npart = "bjt_pair"\n'
#: A series junction that nothing else is in the way of.
BARE = (
    'path = "series_single"\njunction = "d"\ndc_block = "100 uF"\n'
    'feed_inductance = "1 H"\nfeed_capacitance = "0 F"\nfeed_loss = "1 Tohm"\n'
    'return_inductance = "1 H"\nreturn_capacitance = "0 F"\nreturn_loss = "1 Tohm"\n[junction.d]\n'
)


def written(folder, switch, rest=STATIC):
    file = folder / "heron.toml"
    file.write_text(DESIGN.format(switch=switch, rest=rest), encoding="utf-8")
    return file


def test_transistor_of_common_practice(engine, tmp_path):
    # common practice: a small transistor, 5 V control: about 20 dB at 100 MHz, 50 dB or more at 10 MHz, almost
    # nothing at 1 GHz, and under 5 dB of loss throughout
    design = read_design(written(tmp_path, TRANSISTOR))
    sweep = run_static_sweeps(Case(design, design.drivers[0], 25.0, engine))[0]
    frequency = sweep.frequency
    assert (frequency[0], frequency[20], frequency[-1]) == tuple(pytest.approx(f) for f in (1e7, 1e8, 1e9))
    assert sweep.isolation[0] >= 50.0
    assert sweep.isolation[20] == pytest.approx(20.0, abs=5.0)
    assert sweep.isolation[-1] < 6.0
    assert sweep.insertion_loss.max() < 5.0


def test_sweep_holds_what_the_static_deck_finds_at_a_carrier(engine, tmp_path):
    # the same states by an ngspice deck of its own; 10 MHz to 1 GHz has 100 MHz among its 41 points
    design = read_design(written(tmp_path, TRANSISTOR))
    case = Case(design, design.drivers[1], 25.0, engine)
    sweep, (_, states) = run_static_sweeps(case)[0], case.static()
    assert np.abs(sweep.on[20] - states[1, 1]).max() < 1e-6
    assert np.abs(sweep.off[20] - states[0, 1]).max() < 1e-6
    assert sweep.return_loss("on")[20, 1] == pytest.approx(-20.0 * math.log10(abs(states[1, 1, 1, 1])), abs=1e-4)


def test_both_ends_of_a_range_that_is_no_whole_number_of_steps(engine, tmp_path):
    rest = '[static]\nfrom = "20 MHz"\nto = "150 MHz"\npoints = 5\n'
    design = read_design(written(tmp_path, TRANSISTOR, rest))
    sweep = run_static_sweeps(Case(design, design.drivers[0], 25.0, engine))[0]
    assert (sweep.frequency[0], sweep.frequency[-1]) == (pytest.approx(2e7), pytest.approx(1.5e8))
    assert np.diff(np.log(sweep.frequency)) == pytest.approx(np.log(7.5) / 4.0, rel=1e-6)


def test_attenuation_and_charge_of_a_pin_diode_against_its_current(engine, tmp_path):
    # White: Q = I tau and 20 log10(1 + R/2Z0) with R = W^2/(mu Q)
    junction = 'part = "pin_lumped"\nlifetime = "10 us"\ntransit_time = "1 ps"\nwidth = "100 um"\ncapacitance = "0 F"\n'
    junction += 'series_resistance = "0 ohm"\nintrinsic_resistance = "100 Mohm"\n'
    rest = STATIC + 'bias_sweep = ["10 uA", "100 uA", "1 mA", "10 mA"]\n'
    rest += '[environment]\ntemperature = ["25 degC", "85 degC"]\n'
    design = read_design(written(tmp_path, BARE + junction, rest))
    sweeps, seconds = run_bias_sweeps(design, engine)
    assert [sweep.temperature for sweep in sweeps] == [25.0, 85.0]
    assert seconds > 0.0
    for sweep in sweeps:
        # the part's own laws: lifetime with T^1.5 and mobility with T^-2.15, from 25 degC
        warmer = (sweep.temperature + 273.15) / 298.15
        charge = sweep.current * 10e-6 * warmer**1.5
        assert sweep.charge["xj"] == pytest.approx(charge, rel=1e-3)
        loss = 20.0 * np.log10(1.0 + (100e-6) ** 2 / (0.18 * warmer**-2.15 * charge) / 100.0)
        assert sweep.attenuation == pytest.approx(np.stack([loss, loss], axis=1), abs=0.01)
        assert np.all(np.diff(sweep.voltage) > 0.0)


def depletion(voltage, capacitance, potential, grading):
    """Return the depletion charge of SPICE, with FC = 0.5."""
    knee = 0.5 * potential
    below = np.minimum(voltage, knee)
    charge = capacitance * potential / (1.0 - grading) * (1.0 - (1.0 - below / potential) ** (1.0 - grading))
    above = np.maximum(voltage - knee, 0.0)
    f2, f3 = 0.5 ** (1.0 + grading), 1.0 - 0.5 * (1.0 + grading)
    more = f3 * above + grading / (2.0 * potential) * ((knee + above) ** 2 - knee**2)
    return charge + capacitance / f2 * more


def test_charge_of_a_diode_at_its_operating_point(engine, tmp_path):
    # SPICE: TT I plus the depletion charge; the emission coefficient 2 gives the junction's voltage
    junction = 'part = "junction_diode"\nideality = 2\ntransit_time = "20 ns"\njunction_capacitance = "3 pF"\n'
    currents = np.array([1e-6, 1e-4, 1e-2])
    rest = STATIC + 'bias_sweep = ["1 uA", "100 uA", "10 mA"]\n'
    ((sweep,), _) = run_bias_sweeps(read_design(written(tmp_path, BARE + junction, rest)), engine)
    voltage = 2.0 * VT * np.log1p(currents / saturation(2.0))
    expected = 20e-9 * currents + depletion(voltage, 3e-12, 0.7, 0.5)
    # capacitance and potential at 25 degC are 0.1 % off those of the card, which hold at 27 degC
    assert sweep.charge["xj"] == pytest.approx(expected, rel=3e-3)


def saturation(ideality):
    """Return IS at 25 degC from 10 fA at 27 degC: XTI 3, EG 1.11 (SPICE)."""
    warm, cold = 300.15, 298.15
    step = (cold / warm - 1.0) * 1.11 * scipy.constants.e / (ideality * scipy.constants.k * cold)
    return 1e-14 * (cold / warm) ** (3.0 / ideality) * math.exp(step)


def test_charge_of_a_transistor_at_its_operating_point(engine):
    # Gummel-Poon at 27 degC: TF If/qb and TR Ir plus depletion charges, from the junction voltages that ngspice finds
    card = "is=1e-14 bf=150 br=4 vaf=80 ikf=0.3 rb=10 rc=1 re=0.2 tf=.4n tr=40n "
    card += "cje=4p vje=.75 mje=.33 cjc=2.5p vjc=.6 mjc=.33"
    names = ("qbe", "qbc", "vbe", "vbc")
    deck = (
        f"* charge\nIb 0 b DC 1m\nQ1 c b 0 qm\nRc c 0 470\n.model qm NPN({card})\n.options temp=27\n.control\n"
        "set appendwrite\nforeach i 1e-5 1e-4 1e-3 1e-2\nalter ib dc = $i\nop\n"
        f"write charge.raw {' '.join(f'@q1[{name}]' for name in names)}\nend\nquit 0\n.endc\n.end\n"
    )
    plots = engine.run(deck, name="charge", writes_raw=True).plots
    found = {name: np.array([float(np.real(plot[f"@q1[{name}]"][0])) for plot in plots]) for name in names}
    thermal = scipy.constants.k * 300.15 / scipy.constants.e
    forward, reverse = (1e-14 * np.expm1(found[name] / thermal) for name in ("vbe", "vbc"))
    base = 0.5 / (1.0 - found["vbc"] / 80.0) * (1.0 + np.sqrt(1.0 + 4.0 * forward / 0.3))
    assert found["qbe"] == pytest.approx(0.4e-9 * forward / base + depletion(found["vbe"], 4e-12, 0.75, 0.33), rel=2e-3)
    assert found["qbc"] == pytest.approx(40e-9 * reverse + depletion(found["vbc"], 2.5e-12, 0.6, 0.33), rel=2e-3)


def test_run_reports_the_sweeps(engine, tmp_path, capsys):
    del engine
    file = written(tmp_path, TRANSISTOR, STATIC + 'points = 10\nbias_sweep = ["100 uA", "10 mA"]\n')
    out, document = tmp_path / "out", tmp_path / "out.json"
    assert main(["run", str(file), "--driver", "gate", "--out", str(out), "--json", str(document)]) in (0, 1, 4)
    text = capsys.readouterr().out
    assert "Settled states of gate at 25 degC, 10 MHz to 1 GHz, 21 frequencies" in text
    found = json.loads(document.read_text())
    ((static,), (bias,)) = found["static"], found["bias_sweep"]
    assert (static["driver"], static["temperature"], static["impedance"]) == ("gate", 25.0, 50.0)
    band = static["usable_bands"][0]
    assert (band["from"], band["from_limit"], band["to_limit"]) == (pytest.approx(1e7), None, "isolation")
    # where the interval ends the isolation has its limit
    at_edge = np.interp(math.log(band["to"]), np.log(static["frequency"]), static["isolation"])
    assert at_edge == pytest.approx(20.0, abs=1e-6)
    assert f"usable band: 10 MHz (sweep begins) to {band['to'] / 1e6:.4g} MHz (isolation)" in text
    for state, metric in (("on", "insertion_loss"), ("off", "isolation")):
        network = skrf.Network(str(out / "gate" / f"static_{state}.s2p"))
        assert (network.nports, network.z0[0, 0]) == (2, 50.0)
        assert network.f == pytest.approx(np.array(static["frequency"]), rel=1e-15)
        assert -network.s_db[:, 1, 0] == pytest.approx(np.array(static[metric]), abs=1e-12)
        for port in range(2):
            match = static[f"return_loss_{state}"][f"p{port + 1}"]
            assert -network.s_db[:, port, port] == pytest.approx(np.array(match), abs=1e-12)
    rows = list(csv.DictReader((out / "gate" / "static.csv").read_text().splitlines()))
    assert [float(row["isolation [dB]"]) for row in rows] == pytest.approx(static["isolation"], rel=1e-8)
    rows = list(csv.DictReader((out / "bias_25degC.csv").read_text().splitlines()))
    assert [float(row["charge_xj [C]"]) for row in rows] == pytest.approx(bias["charge"]["xj"], rel=1e-8)
    assert [float(row["attenuation_30MHz [dB]"]) for row in rows] == pytest.approx(bias["attenuation"][0]["values"])
    assert bias["current"] == [1e-4, 1e-2]


def test_without_the_table_nothing_is_swept(engine, tmp_path, capsys):
    del engine
    file = written(tmp_path, TRANSISTOR, "")
    assert main(["run", str(file), "--driver", "gate", "--out", str(tmp_path / "out"), "--json", "-"]) in (0, 1, 4)
    found = json.loads(capsys.readouterr().out)
    assert not {"static", "bias_sweep"} & set(found)
    names = {place.name for place in (tmp_path / "out").rglob("*")}
    assert "static.cir" in names
    assert not {"sweep.cir", "static.csv", "static_on.s2p", "bias_25degC.csv"} & names


def test_decks_are_written_and_run_by_themselves(engine, tmp_path, capsys):
    file = written(tmp_path, TRANSISTOR, STATIC + 'bias_sweep = "1 mA"\n')
    assert main(["check", str(file)]) == 0
    assert "sweep     both control states from 10 MHz to 1 GHz, 20 points a decade" in capsys.readouterr().out
    assert main(["deck", str(file), "--out", str(tmp_path / "decks")]) == 0
    assert "bias_25degC.cir" in capsys.readouterr().out
    for name, plots in (("gate/sweep", 4), ("rails/sweep", 4), ("bias_25degC", 3)):
        deck = tmp_path / "decks" / f"{name}.cir"
        assert len(engine.run(deck.read_text(), name=deck.stem, writes_raw=True).plots) == plots
