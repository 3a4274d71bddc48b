"""Loss and isolation of settled junctions as plain R and C, through the tool's static deck and its S-parameters.

Sources: R. V. Garver, Microwave Diode Control Devices, 1976; J. F. White, Microwave Semiconductor Engineering, 1982.
Z0 50 ohm. Read to the digits printed here, half a unit of the last one allowed: the circuits are exact. Loss and
isolation are -20 log |S21| of the matched network.
"""

import dataclasses

import numpy as np
import pytest

from transim.circuit.assemble import assemble
from transim.circuit.decks import Origin, static_deck
from transim.circuit.netlist import RfPort
from transim.design.toml import read_design
from transim.envelope.stationary import read_scattering

DESIGN = """
title = "settled junctions"
[control]
low = "0 V"
high = "1 V"
edge = "1 ns"
on_for = "1 us"
period = "3 us"
[carrier]
frequency = "1 GHz"
[switch]
path = "series_single"
junction = "d"
[junction.d]
part = "junction_diode"
[driver.x]
part = "ideal_voltage"
"""
QUARTER = "z0=50 f=1e9 nl=0.25"


@pytest.fixture(scope="module")
def design(tmp_path_factory):
    file = tmp_path_factory.mktemp("static") / "static.toml"
    file.write_text(DESIGN)
    return read_design(file)


@pytest.fixture
def scattering(engine, design):
    """Return a function that runs lines between two or three ports in the place of path and driver."""

    def run(lines, frequency, count=2):
        ports = tuple(RfPort(f"p{k}", f"vport_p{k}", 50.0) for k in range(1, count + 1))
        ends = "".join(f"Rport_p{k} ep{k} p{k} 50\nRdc{k} p{k} 0 1e9\n" for k in range(1, count + 1))
        netlist = dataclasses.replace(assemble(design, design.drivers[0]), text="\n".join([*lines, ends]), ports=ports)
        deck = static_deck(netlist, design.control, [frequency], design.numerics, Origin("static", "static", "x", 27.0))
        plots = engine.run(deck.text, name=deck.name, writes_raw=deck.writes_raw).plots
        responses = [plot for plot in plots if plot.name.startswith("AC")]
        states = [read_scattering(some, ports, [frequency])[0] for some in (responses[:count], responses[count:])]
        assert states[0] == pytest.approx(states[1], abs=1e-12)
        return -20.0 * np.log10(np.abs(states[0]))

    return run


@pytest.mark.parametrize(
    ("lines", "frequency", "decibels", "digit"),
    [
        (["R1 p1 p2 1"], 1e9, 0.08643, 1e-5),
        (["R1 p1 p2 3"], 1e9, 0.25674, 1e-5),
        (["R1 p1 p2 10"], 1e9, 0.82785, 1e-5),
        (["C1 p1 p2 0.3p"], 1e8, 34.496, 1e-3),
        (["C1 p1 p2 0.3p"], 1e9, 14.646, 1e-3),
        (["C1 p1 p2 0.3p"], 1e10, 1.077, 1e-3),
        (["R1 p1 0 1", "R2 p1 p2 1n"], 1e9, 28.299, 1e-3),
        (["R1 p1 0 2", "R2 p1 p2 1n"], 1e9, 22.607, 1e-3),
        (["R1 p1 p2 1", "C2 p2 0 0.3p"], 1e9, 0.09625, 1e-5),
        (["C1 p1 p2 0.3p", "R2 p2 0 1"], 1e9, 48.685, 1e-3),
        (["R1 p1 0 2", f"T1 p1 0 p2 0 {QUARTER}", "R2 p2 0 2"], 1e9, 50.591, 1e-3),
    ],
    ids=[
        "series 1 ohm", "series 3 ohm", "series 10 ohm", "series C 100 MHz", "series C 1 GHz", "series C 10 GHz",
        "shunt 1 ohm", "shunt 2 ohm", "series-shunt on", "series-shunt off", "two shunts",
    ],
)  # fmt: skip
def test_single_throw(scattering, lines, frequency, decibels, digit):
    # 1e9 ohm for the DC path of each port is worth less than 1e-6 dB
    assert scattering(lines, frequency)[1, 0] == pytest.approx(decibels, abs=0.5 * digit + 1e-6)


def test_series_capacitance_falls_by_20_db_a_decade(scattering):
    levels = [scattering(["C1 p1 p2 0.3p"], frequency)[1, 0] for frequency in (1e6, 1e7)]
    assert levels[0] - levels[1] == pytest.approx(20.0, abs=0.01)


def test_series_two_throw(scattering):
    s = scattering(["R1 p1 p2 1", "C1 p1 p3 0.3p"], 1e9, count=3)
    assert s[1, 0] == pytest.approx(0.13453, abs=0.6e-5)
    assert s[2, 0] == pytest.approx(20.516, abs=0.6e-3)


@pytest.mark.parametrize(
    ("share", "loss", "isolation"), [(0.9, 0.14699, 34.275), (1.0, 0.09456, 34.208), (1.1, 0.09527, 33.958)]
)
def test_quarter_wave_two_throw(scattering, share, loss, isolation):
    lines = [f"T1 p1 0 p2 0 {QUARTER}", "C1 p2 0 0.3p", f"T2 p1 0 p3 0 {QUARTER}", "R2 p3 0 1"]
    s = scattering(lines, share * 1e9, count=3)
    assert s[1, 0] == pytest.approx(loss, abs=0.6e-5)
    assert s[2, 0] == pytest.approx(isolation, abs=0.6e-3)
