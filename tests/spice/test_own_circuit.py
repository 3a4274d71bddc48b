"""A path and drivers of a user's own through all analyses, MOSFETs among them: envelope against resolved carrier.

Outside reference: ngspice's transients with the carrier resolved, and its own AC analysis at four biases of every run.
Allowed: 1 % of the times, 0.05 dB of loss, 0.3 dB of isolation between the two analyses.
"""

import json

import numpy as np
import pytest

from transim.circuit.timeline import timeline_of
from transim.cli import main
from transim.design.toml import read_design
from transim.envelope.linearise import saved_vectors
from transim.errors import LinearisationError
from transim.study.case import Case
from transim.study.linearised import linearised_case
from transim.study.run import run_design

#: Two MOSFETs of level 1 between two rails; the stage before inverts.
COMPLEMENTARY = """\
Complementary MOS stage
Einv gate 0 in 0 -1
Rg gate g 20
MP o g vdd vdd pm w=2000u l=1u
MN o g vss vss nm w=1000u l=1u
Vdd vdd 0 5
Vss vss 0 -5
Rs o out 220
Cs o out 330p
.model pm pmos(level=1 vto=-0.8 kp=30u lambda=0.02 cgso=0.3n cgdo=0.3n tox=20n)
.model nm nmos(level=1 vto=0.8 kp=60u lambda=0.02 cgso=0.3n cgdo=0.3n tox=20n cbd=2p)
"""
#: One power MOSFET that pulls down against a resistor.
POWER = """\
* power MOSFET
Einv gate 0 in 0 -1
Rg gate g 10
M1 d g vss power
Rpu vdd d 330
Vdd vdd 0 5
Vss vss 0 -5
Rs d out 47
Cs d out 470p
.model power vdmos(rg=3 vto=1.5 kp=0.4 rd=0.5 rs=0.2 cgdmax=30p cgdmin=5p cgs=40p cjo=30p is=1p tt=20n)
"""
#: Two bipolar followers behind an inverting stage.
BIPOLAR = """\
* bipolar, inverting
Vcc vcc 0 5
Vee vee 0 -5
Rin in b 1k
Q1 c b 0 qn
R1 vcc c 470
Q2 vcc c e qn
Q3 vee c e qp
R2 c vee 4.7k
R3 e out 1k
Ce e 0 10p
Cb b 0 2p
.model qn npn(bf=100 tf=0.4n cje=5p cjc=3p rb=20)
.model qp pnp(bf=100 tf=0.4n cje=5p cjc=3p rb=20)
"""
#: Two p-n diodes back to back in series with the line.
PAIR = """\
* series pair
C1 rfin 1 1n
D1 2 1 pin
D2 2 3 pin
C2 3 rfout 1n
L1 1 0 10u
L2 3 0 10u
L3 vb 2 4.7u
C3 vb 0 470p
.model pin D(is=1e-13 n=1.8 rs=0.5 tt=2n cjo=0.25p vj=0.5 m=0.1 bv=100)
"""
MOS_LINE = """\
* MOSFET in the line
C1 rfin d 1n
M1 d g s 0 nm w=3000u l=0.5u
C2 s rfout 1n
L1 d 0 10u
L2 s 0 10u
R1 vb g 10k
.model nm nmos(level=1 vto=0.8 kp=60u lambda=0.02 cgso=0.3n cgdo=0.3n tox=20n cbd=1p cbs=1p)
"""
HEAD = """\
title = "own"
[control]
low = "{low}"
high = "{high}"
edge = "2 ns"
on_for = "{on_for}"
period = "{period}"
[carrier]
frequency = {carriers}
level = "-30 dBm"
"""
#: Two switches at the gate of a JFET: nothing of them reaches the path but through it.
SWITCHES = """\
* switches and a follower
S1 o vdd in 0 up
S2 o vss in 0 down
Vdd vdd 0 5
Vss vss 0 -5
Co o 0 20p
J1 vdd o e jn
Re e vss 1k
Rs e out 220
Cs e out 330p
.model up sw(vt=1.5 vh=0.2 ron=20 roff=1meg)
.model down sw(vt=1.5 vh=-0.2 ron=1meg roff=20)
.model jn njf(vto=-2 beta=20m cgs=5p cgd=5p rd=2 rs=2)
"""
PIN = """\
[switch]
path = "series_pair"
junction = "pin"
dc_block = "2.2 nF"
feed_resistance = "47 ohm"
feed_inductance = "4.7 uH"
return_resistance = "22 ohm"
return_inductance = "10 uH"
bypass = "22 pF"
[junction.pin]
part = "pin_lumped"
lifetime = "1 us"
width = "60 um"
series_resistance = "0.4 ohm"
"""
OWN = """\
[switch]
path = "path.cir"
ports = ["rfin", "rfout"]
bias = "vb"
passes = "{passes}"
"""
DRIVEN = '[driver.own]\npart = "driver.cir"\ncontrol = "in"\noutput = "out"\n'


def write(folder, switch, driver, *, path="", low="-5 V", high="5 V", carriers='["100 MHz"]', times=("3 us", "8 us")):
    (folder / "path.cir").write_text(path)
    (folder / "driver.cir").write_text(driver)
    file = folder / "own.toml"
    file.write_text(HEAD.format(low=low, high=high, carriers=carriers, on_for=times[0], period=times[1]) + switch + DRIVEN)
    return file


def assert_agreement(outcome):
    found = {result.analysis: result for result in outcome.results}
    envelope, carrier = found["envelope"], found["carrier"]
    assert envelope.faults == ()
    assert len(envelope.checked) == 4
    assert envelope.check < 0.05
    for name, share in (("on_time", 0.01), ("off_time", 0.01)):
        assert envelope.figures[name].value == pytest.approx(carrier.figures[name].value, rel=share)
    wave = outcome.cases[0].throws[0].envelopes["envelope", envelope.carrier]
    for name, on, allowed in (("level_loss", True, 0.05), ("level_isolation", False, 0.3)):
        assert attenuation_at_end(outcome.design, wave, on) == pytest.approx(carrier.figures[name].value, abs=allowed)
    return envelope


def attenuation_at_end(design, wave, on):
    """Return the attenuation at the end of the on or off interval [dB], one carrier period before the next edge."""
    timeline, throw = timeline_of(design), design.switch.path.throws[0]
    end = timeline.falling - timeline.edge if throw.passes_high == on else timeline.stop
    return float(np.interp(end - 1.0 / design.carrier.frequency[0], wave.time, -20.0 * np.log10(np.abs(wave.value))))


@pytest.mark.parametrize(("driver", "devices"), [(COMPLEMENTARY, 2), (POWER, 1)], ids=["two of level 1", "VDMOS"])
def test_mosfets_in_the_driver_leave_envelope_and_carrier_in_agreement(engine, tmp_path, driver, devices):
    design = read_design(write(tmp_path, PIN, driver))
    envelope = assert_agreement(run_design(design, engine, analysis="both"))
    notes = [note for note in envelope.notes if "MOSFET" in note]
    assert len(notes) == devices


def test_own_path_and_driver_of_bipolars_with_the_command_low(engine, tmp_path):
    # the bypass at the bias entry makes transitions of many periods of the carrier
    more = {"low": "0 V", "high": "3.3 V", "carriers": '["100 MHz"]', "times": ("4 us", "8 us")}
    file = write(tmp_path, OWN.format(passes="low"), BIPOLAR, path=PAIR, **more)
    outcome = run_design(read_design(file), engine, analysis="both")
    envelope = assert_agreement(outcome)
    assert envelope.figures["isolation"].value > envelope.figures["insertion_loss"].value + 15.0
    for name in ("junction_charge", "junction_reverse", "junction_current_peak", "junction_dissipation"):
        assert envelope.figures[name].value is not None
    # the stage inverts: at the falling command charge goes out of it, and opens the path
    assert envelope.figures["driver_charge_on"].value > 1e-10


def test_a_mosfet_in_the_line_is_refused_with_its_name_and_what_it_does(engine, tmp_path, capsys):
    switch = OWN.format(passes="high")
    file = write(tmp_path, switch, COMPLEMENTARY, path=MOS_LINE)
    with pytest.raises(LinearisationError, match=r"M\.XPATH\.M\.X1\.M1: MOSFET.*by up to [\d.]+ dB.*carrier analysis"):
        run_design(read_design(file), engine)
    assert main(["run", str(file), "--json", "-"]) == 2
    (error,) = json.loads(capsys.readouterr().out)["errors"]
    assert "M.XPATH.M.X1.M1" in error["message"]


def test_an_element_that_acts_through_another_is_not_overlooked(engine, tmp_path):
    design = read_design(write(tmp_path, PIN, SWITCHES, low="0 V", high="3 V"))
    outcome = run_design(design, engine)
    (result,) = outcome.results
    taken = {note.split(":")[0] for note in result.notes if "taken with the admittance" in note}
    assert taken == {"S.XDRIVER.S.X1.S1", "S.XDRIVER.S.X1.S2", "J.XDRIVER.J.X1.J1"}
    assert result.faults == ()
    assert result.check < 0.005
    names = [deck.name for deck in outcome.cases[0].decks]
    assert names.count("admittance_1") == 1


def test_a_mosfet_that_the_ports_cannot_see_is_left_out(engine, tmp_path):
    # 10 mH at 100 MHz is 6 Mohm
    hidden = COMPLEMENTARY.replace("Rs o out 220\nCs o out 330p", "Rs o far 220\nLs far out 10m")
    design = read_design(write(tmp_path, PIN, hidden))
    case = Case(design, design.drivers[0], 25.0, engine)
    circuit, _ = case.static()
    case.video(saved_vectors(circuit))
    decks = len(case.decks)
    found = linearised_case(case, circuit, case.vectors)
    assert [note.split(":")[0] for note in found.notes] == ["M.XDRIVER.M.X1.MP", "M.XDRIVER.M.X1.MN"]
    assert all("left out; whatever it does moves S by at most" in note for note in found.notes)
    # nothing had to be asked of ngspice
    assert len(case.decks) == decks
