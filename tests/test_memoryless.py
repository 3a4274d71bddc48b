"""Unknowns without memory eliminated before the ringing solution: the same S, from fewer unknowns."""

from __future__ import annotations

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope import ringing
from transim.envelope.bias import Bias
from transim.envelope.frozen import solve_frozen
from transim.envelope.linearise import linearise
from transim.envelope.memoryless import without_memoryless
from transim.envelope.scatter import excitation

PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
FREQUENCY = 4e8
#: A divider, a choke, a line, a resistance that the bias of node m steers, and a source that is controlled by a current.
LISTING = """
1 : vport_p1 e1 0 dc 0
2 : rport_p1 e1 p1 50
3 : vport_p2 e2 0 dc 0
4 : rport_p2 e2 p2 50
5 : r1 p1 a 7
6 : r2 a b 30
7 : r3 b 0 2k
8 : r4 a c 12
9 : c1 c d 20p
10 : l1 d 0 30n
11 : t1 d 0 f 0 z0=65 td=0.4n
12 : vsense f g 0
13 : h1 h 0 vsense 3
14 : r5 h i 40
15 : r6 i p2 40
16 : b1 g p2 v=i(vsense)*v(m)
17 : rm m 0 1
"""


def network():
    time = np.linspace(0.0, 50e-9, 201)
    steered = 5.0 + 400.0 * np.clip((time - 10e-9) / 8e-9, 0.0, 1.0)
    vectors = {"v(m)": steered, "i(vsense)": np.zeros(time.size)}
    return linearise(read_listing(LISTING), Bias(vectors, time), 25.0, [port.source for port in PORTS])


def test_only_what_has_no_memory_goes():
    whole = network()
    small, right = without_memoryless(whole, excitation(whole, PORTS), ["v:p1", "v:p2"])
    assert small.size < whole.size
    assert right.shape == (small.size, 2)
    # the middle of the divider has neither capacitance nor change; a capacitor's and a line's ends, and a steered current, have
    assert "v:b" not in small.unknowns
    assert {"v:p1", "v:p2", "v:c", "v:d", "v:f", "i:vsense"} <= set(small.unknowns)
    assert small.varying_g is whole.varying_g
    assert len(small.delays) == len(whole.delays)


def test_the_solution_stays(monkeypatch):
    net = network()
    frozen = solve_frozen(net, PORTS, [FREQUENCY]).s
    small = ringing.solve_ringing(net, PORTS, [FREQUENCY], frozen).s
    monkeypatch.setattr(ringing, "without_memoryless", lambda whole, right, _: (whole, right))
    whole = ringing.solve_ringing(net, PORTS, [FREQUENCY], frozen).s
    # the steered resistance really changes the transmission
    assert np.ptp(np.abs(whole[0, :, 1, 0])) > 0.05
    assert small == pytest.approx(whole, abs=1e-12)


def test_a_network_that_has_memory_everywhere_stays_as_it_is():
    listing = "1 : vport_p1 e1 0 dc 0\n2 : rport_p1 e1 p1 50\n3 : c1 p1 0 1p\n4 : c2 e1 0 1p\n"
    (port, _) = PORTS
    whole = linearise(read_listing(listing), Bias({}, np.array([0.0, 1e-9])), 25.0, [port.source])
    right = excitation(whole, [port])
    small, same = without_memoryless(whole, right, [f"v:{name[2:]}" for name in whole.unknowns if name.startswith("v:")])
    assert small.unknowns == whole.unknowns
    assert same is right
