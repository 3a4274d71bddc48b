"""Large-signal figures of the carrier analysis against closed forms, end to end with parts of the test's own.

Outside references. Rectification: the mean of IS (exp((v + V cos wt)/N Vt) - 1) is IS (I0(V/N Vt) exp(v/N Vt) - 1)
(M. Abramowitz, I. A. Stegun, Handbook of Mathematical Functions, 9.6.34), Bessel and Lambert functions by scipy. Hot switching: a series resistance R = 2 Z0 (1/s - 1), |S21| = s, takes the mean power
2 P s (1 - s) of an available power P (voltage divider), P/2 at most; s goes evenly in time here, so the energy of one
transition is 2 P T/(s1 - s0) times the integral of s (1 - s) from 10 to 90 % of s1. A linear resistor compresses nothing.
"""

import math

import numpy as np
import pytest
from scipy.constants import elementary_charge, k
from scipy.optimize import brentq
from scipy.special import iv, lambertw

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.design.toml import read_design
from transim.envelope.bias import Bias
from transim.envelope.internal import solve_internal
from transim.envelope.linearise import linearise, saved_vectors
from transim.parts.catalogue import load_catalogue
from transim.study.simulate import simulate

CONTROL = """
title = "large signal"
parts = "parts"
[control]
low = "0 V"
high = "1 V"
"""
RECTIFIER = """
edge = "50 ns"
on_for = "6 us"
period = "13 us"
[carrier]
frequency = "30 MHz"
level = ["-16 dBm", "-10 dBm", "-6 dBm"]
[switch]
path = "shunt_single"
junction = "detector"
dc_block = "2 nF"
feed_resistance = "1 mohm"
feed_inductance = "20 uH"
feed_capacitance = "0 F"
feed_loss = "10 kohm"
bypass = "0 F"
[junction.detector]
part = "junction_diode"
saturation_current = "1 nA"
transit_time = "0 s"
junction_capacitance = "0 F"
[driver.load]
part = "ideal_voltage"
on_voltage = "0.32 V"
off_voltage = "0.25 V"
output_resistance = "300 ohm"
"""
STAND_IN = """
edge = "1 us"
on_for = "3 us"
period = "6 us"
[carrier]
frequency = "20 MHz"
level = ["0 dBm", "30 dBm"]
[switch]
path = "resistive"
junction = "stand_in"
[junction.stand_in]
part = "divider"
[driver.ramp]
part = "ideal_voltage"
on_voltage = "1 V"
off_voltage = "0 V"
"""
LOW, HIGH = 0.01, 0.99
JUNCTION = """* transim part
* name: divider
* role: junction
* terminals: c b e
* summary: a resistance that lets the share of the voltage through that its control says
* parameter: low | 1 | 0.01 | 0 .. 1 | share at 0 V of control
* parameter: high | 1 | 0.99 | 0 .. 1 | share at 1 V of control
* probe: current | A | i(vmeter)
.subckt divider c b e low=0.01 high=0.99
Vmeter c m 0
B1 m e v = i(Vmeter) * 100 * (1 / ({low} + ({high - low}) * min(max(v(b), 0), 1)) - 1)
.ends
"""
PATH = """* transim part
* name: resistive
* role: path
* terminals: p1 p2 bias
* ports: p1 p2
* through: p1 p2
* bias: bias
* passes: biased
* slot: junction | c b e | a resistance without bias of its own
* summary: nothing but the junction between the ports
.subckt resistive p1 p2 bias
Xj p1 bias p2 junction
.ends
"""


@pytest.fixture
def carrier(engine, tmp_path):
    """Return a function that gives the carrier analysis' figures of a design, by level."""
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "divider.cir").write_text(JUNCTION)
    (tmp_path / "parts" / "resistive.cir").write_text(PATH)

    def run(text):
        file = tmp_path / "large.toml"
        file.write_text(CONTROL + text)
        design = read_design(file)
        case = simulate(design, design.drivers[0], 27.0, engine, ["carrier"])
        return {result.level: result.figures for result in case.results}

    return run


def rectified(supply, peak, resistance=300.0, line=25.0):
    """Return by how much the RF moves the mean voltage of a diode behind a resistance, on a matched line [V].

    The line's 25 ohm take what the current differs from its mean; each phase is solved by Lambert's W.
    """
    vt, saturation = k * 300.15 / elementary_charge, 1e-9
    cosine = np.cos(2.0 * np.pi * np.arange(400) / 400)

    def mean_current(mean, amplitude):
        drive = supply - resistance * mean + amplitude * cosine + line * (mean + saturation)
        return np.mean(vt / line * lambertw(line * saturation / vt * np.exp(drive / vt)).real) - saturation

    loud, quiet = (
        brentq(lambda mean, v=v: mean_current(mean, v) - mean, -1e-9, 1e-2, xtol=1e-15) for v in (peak, 0.0)
    )
    return -resistance * (loud - quiet)


def test_closed_form_of_rectification():
    # a line of next to no resistance: Bessel's I0 of the source
    vt = k * 300.15 / elementary_charge
    voltage = brentq(lambda v: v + 300.0 * 1e-9 * (iv(0, 0.1 / vt) * math.exp(v / vt) - 1.0) - 0.25, 0.0, 0.25)
    quiet = brentq(lambda v: v + 300.0 * 1e-9 * math.expm1(v / vt) - 0.25, 0.0, 0.25)
    assert rectified(0.25, 0.1, line=1e-3) == pytest.approx(voltage - quiet, rel=1e-3)


def test_rectified_bias(carrier):
    # 1 %: choke and its losses take 0.3 % of the line's admittance
    for level, figures in carrier(RECTIFIER).items():
        peak = math.sqrt(2.0 * 1e-3 * 10.0 ** (level / 10.0) * 50.0)
        for name, supply in (("bias_shift_on", 0.25), ("bias_shift_off", 0.32)):
            assert figures[name].value == pytest.approx(rectified(supply, peak), rel=0.01)


def test_energy_and_peak_of_hot_switching(carrier):
    def inside(s):
        return s**2 / 2.0 - s**3 / 3.0

    share = (inside(0.9 * HIGH) - inside(0.1 * HIGH)) / (HIGH - LOW)
    for level, figures in carrier(STAND_IN).items():
        power = 1e-3 * 10.0 ** (level / 10.0)
        # both edges of 1 us; 0.5 %: the instants are found within one of four samples a period
        assert figures["hot_switching_energy"].value == pytest.approx(2 * 2.0 * power * 1e-6 * share, rel=5e-3)
        assert figures["hot_switching_peak"].value == pytest.approx(power / 2.0, rel=2e-3)


def test_a_linear_switch_compresses_nothing(carrier):
    for figures in carrier(STAND_IN).values():
        assert figures["on_compression"].value == pytest.approx(0.0, abs=1e-3)
        assert figures["level_loss"].value == pytest.approx(-20.0 * math.log10(HIGH), abs=1e-3)
        assert figures["level_isolation"].value == pytest.approx(-20.0 * math.log10(LOW), abs=0.02)
        for name in ("bias_shift_on", "bias_shift_off"):
            assert figures[name].value == pytest.approx(0.0, abs=1e-6)


@pytest.mark.parametrize("frequency", [3e6, 100e6, 2e9])
def test_voltages_inside_the_circuit_against_ac(engine, frequency):
    part = load_catalogue().find("junction", "pin_lumped")
    body = (
        "* inside\n" + part.body.rstrip() + "\nVport_p1 ep1 0 DC 0 AC 1\nRport_p1 ep1 p1 50\nC1 p1 a 100p\n"
        "Xj a k pin_lumped\nVm k k2 0\nD1 k2 b dm\nR1 b 0 30\nC2 k2 p2 100p\nRport_p2 p2 ep2 50\nVport_p2 ep2 0 DC 0\n"
        "Vb s 0 DC 2.5\nR2 s f 120\nL1 f a 2e-7\nC3 b 0 4p\n.model dm D(is=1e-14 n=1.1 rs=2 tt=3e-9 cjo=1e-12)\n"
    )
    saved = "all"
    for _ in range(2):
        deck = (
            f"{body}.options temp=27 reltol=1e-9 abstol=1e-15 vntol=1e-9\n.control\nlisting expand\nset appendwrite\nop\n"
            f"write inside.raw {saved}\nac lin 1 {frequency} {frequency}\nwrite inside.raw all\nquit 0\n.endc\n.end\n"
        )
        done = engine.run(deck, name="inside", writes_raw=True)
        circuit = read_listing(done.log)
        saved = f"all {' '.join(saved_vectors(circuit))}"
    operating, response = done.plots
    vectors = {name: np.real(operating.data[:, n]) for n, name in enumerate(operating.names)}
    network = linearise(circuit, Bias(vectors, np.zeros(1)), 27.0, ["vport_p1", "vport_p2"])
    solution = solve_internal(network, RfPort("p1", "vport_p1", 50.0), frequency)
    for node in ("p1", "a", "k", "b", "f", "p2", "xj.m", "xj.n", "xj.s"):
        assert solution.voltage(node)[0] == pytest.approx(complex(response[f"v({node})"][0]), rel=1e-4, abs=1e-7)
    across = complex(response["v(a)"][0] - response["v(k)"][0])
    assert solution.voltage("a", "k")[0] == pytest.approx(across, rel=1e-3, abs=1e-7)
    assert solution.voltage("s")[0] == 0.0
    assert solution.current("vm")[0] == pytest.approx(complex(response["i(vm)"][0]), rel=1e-4)
