"""The choice between frozen and ringing, and the group delay that it rests on.

Outside reference: the group delay of a series inductance, L/|Z + jwL| with Z the two terminations, and the 10 to 90 %
time of the transmission worked out from the conductance that is written here.
"""

import re

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.linearise import linearise
from transim.envelope.method import Transition, solve_envelope

PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
TERMINATION = ["rport_p1 ep1 p1 50", "rport_p2 ep2 p2 50", "vport_p1 ep1 0 dc 0", "vport_p2 ep2 0 dc 0"]


def switch(lines, width, inner="m"):
    """Return a series conductance that rises from 1 nS to 1 S within some widths [s], behind the given lines."""
    time = np.linspace(0.0, 100.0 * width, 2001)
    conductance = 10.0 ** (-4.5 + 4.5 * np.tanh((time - 50.0 * width) / width))
    # a source that is controlled by itself alone is a conductance
    text = [*lines, f"b1 {inner} p2 i= v({inner},p2) * v(q)", "rq q 0 1e3", "v9 q 0 1", *TERMINATION]
    circuit = read_listing("\n".join(f" {k} : {line}" for k, line in enumerate(text)))
    zero = np.zeros(time.size)
    vectors = {"v(q)": conductance, f"v({inner})": zero, "v(p2)": zero}
    return linearise(circuit, Bias(vectors, time), 27.0, [port.source for port in PORTS]), time, conductance


def rise(time, level):
    return np.interp([0.1, 0.9], level / level[-1], time)


@pytest.mark.parametrize(("inductance", "width", "method"), [(5e-9, 1e-6, "frozen"), (5e-6, 1e-7, "ringing")])
def test_share_of_the_group_delay(inductance, width, method):
    network, time, conductance = switch([f"l1 p1 m {inductance}"], width)
    carrier = 1e6
    found = solve_envelope(network, PORTS, [carrier], [(0, 1)])
    reactance = 2j * np.pi * carrier * inductance
    level = np.abs(100.0 / (100.0 + reactance + 1.0 / conductance))
    start, end = rise(time, level)
    # largest where the switch is closed
    delay = inductance / abs(100.0 + 1.0 + reactance)
    share = float(re.search(r"group delay is (\S+) % of", found.reasons[0])[1])
    # two digits are printed, and the transition is counted between samples
    assert share == pytest.approx(100.0 * delay / (end - start), rel=0.1)
    assert found.methods == (method,)
    assert (method == "ringing") == (share > 2.0)


def test_each_carrier_has_its_own_method():
    resonant = 1.0 / (2.0 * np.pi * np.sqrt(1e-6 * 100e-12))
    trap, *_ = switch(["l1 p1 x 1u", "c1 x m 100p"], 5e-8)
    found = solve_envelope(trap, PORTS, [resonant, 100 * resonant], [(0, 1)])
    assert found.methods[0] == "ringing"
    assert found.s.shape == found.frozen.shape == (2, trap.time.size, 2, 2)


def test_a_method_can_be_asked_for():
    network, *_ = switch(["l1 p1 m 5n"], 1e-6)
    for wanted in ("frozen", "ringing"):
        found = solve_envelope(network, PORTS, [1e6], [(0, 1)], wanted)
        assert found.methods == (wanted,)
        assert found.reasons[0].startswith("as requested; group delay is")


def test_frozen_is_kept_beside_ringing():
    network, *_ = switch(["l1 p1 m 5u"], 1e-7)
    frozen = solve_envelope(network, PORTS, [1e6], [(0, 1)], "frozen")
    ringing = solve_envelope(network, PORTS, [1e6], [(0, 1)], "ringing")
    assert np.array_equal(ringing.frozen, frozen.s)
    assert np.abs(ringing.s - frozen.s).max() > 1e-3


def test_what_never_switches_is_frozen():
    network, *_ = switch(["l1 p1 m 5u", "r1 m p2 1m"], 1e-7)
    found = solve_envelope(network, PORTS, [1e6], [(0, 1)])
    assert found.methods == ("frozen",)
    assert "0 %" in found.reasons[0]


def test_limit_of_a_slow_network():
    assert Transition(2.1e-9, 100e-9).slow_network
    assert not Transition(1.9e-9, 100e-9).slow_network
    assert not Transition(1.0, np.inf).slow_network
