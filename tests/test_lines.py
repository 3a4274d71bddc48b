"""Lossless lines in the envelope solver: S against the closed form, and the delay of an envelope that passes one."""

from __future__ import annotations

import cmath
import math

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.frozen import solve_frozen
from transim.envelope.linearise import linearise
from transim.envelope.ringing import solve_ringing

PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
LISTING = """
1 : vport_p1 e1 0 dc 0
2 : rport_p1 e1 p1 50
3 : t1 p1 0 {inner} 0 z0={impedance} td={delay}
4 : vport_p2 e2 0 dc 0
5 : rport_p2 e2 p2 50
"""


def network(extra="", inner="p2", *, impedance=50.0, delay=2.5e-10, vectors=None, time=None):
    time = np.array([0.0, 1e-9]) if time is None else time
    text = LISTING.format(inner=inner, impedance=impedance, delay=delay) + extra
    return linearise(read_listing(text), Bias(vectors or {}, time), 25.0, [port.source for port in PORTS])


@pytest.mark.parametrize("degrees", [10.0, 90.0, 180.0, 200.0, 360.0])
@pytest.mark.parametrize("impedance", [25.0, 50.0, 75.0])
def test_a_line_has_the_closed_form_s_parameters(degrees, impedance):
    # D. M. Pozar, Microwave Engineering: ABCD of a line cos, j Z0 sin, j sin / Z0, cos (from memory); half waves too
    frequency = 1e9
    theta = math.radians(degrees)
    found = solve_frozen(
        network(impedance=impedance, delay=theta / (2 * math.pi * frequency)), PORTS, [frequency]
    ).s[0, 0]
    a, b, c = cmath.cos(theta), 1j * impedance * cmath.sin(theta), 1j * cmath.sin(theta) / impedance
    total = 2 * a + b / 50.0 + c * 50.0
    assert found[1, 0] == pytest.approx(2.0 / total, abs=1e-9)
    assert found[0, 0] == pytest.approx((b / 50.0 - c * 50.0) / total, abs=1e-9)


@pytest.mark.parametrize("delay", [0.4e-9, 3e-9, 20e-9])
def test_an_envelope_leaves_a_matched_line_one_delay_later(delay):
    """A modulator behind the line: what it does is seen at once; before the line it would be seen one delay later."""
    time = np.linspace(0.0, 100e-9, 1001)
    share = np.clip((time - 40e-9) / 10e-9, 0.0, 1.0)
    # a controlled source at the line's input end, steered by the bias of node m: E from p1 with gain 1 - share
    extra = "6 : b1 x 0 v=v(p2)*v(m)\n7 : rm m 0 1\n8 : rx x 0 1\n"
    vectors = {"v(m)": share, "v(p2)": np.zeros_like(time), "v(x)": np.zeros_like(time)}
    net = network(extra, delay=delay, vectors=vectors, time=time)
    frequency = 1e9
    ringing = solve_ringing(net, PORTS, [frequency], solve_frozen(net, PORTS, [frequency]).s).s[0, :, 1, 0]
    # the line itself does not change: S stays exp(-j w T) at all times, however long the delay is against the step
    assert ringing == pytest.approx(np.full(time.size, cmath.exp(-2j * math.pi * frequency * delay)), abs=1e-6)


def test_a_line_of_no_known_delay_is_refused_by_name():
    circuit = read_listing("1 : t1 a 0 b 0 z0=50\n")
    (refusal,) = circuit.refused
    assert refusal.element == "T1"


def test_a_quarter_wave_may_be_given_by_its_frequency():
    (line,) = read_listing("1 : t1 a 0 b 0 z0=75 f=1g\n").delays
    assert (line.impedance, line.delay) == (75.0, pytest.approx(0.25e-9))
