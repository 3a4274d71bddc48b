"""Elements without a small-signal form: their terminals, and how much they may move S, against closed forms.

Outside reference: S of a shunt admittance Y on a line of Z0, S21 = 2 / (2 + Z0 Y), and of a series impedance Z,
S21 = 2 Z0 / (2 Z0 + Z) (D. M. Pozar, Microwave Engineering, table 4.1; from memory).
"""

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.admittance import Admittance, biased_instants
from transim.envelope.bias import Bias
from transim.envelope.doubt import Doubt, doubt_points
from transim.envelope.linearise import linearise, opaque_elements
from transim.errors import LinearisationError

PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
SOURCES = [port.source for port in PORTS]
LINE = ("vport_p1 ep1 0 dc 0", "rport_p1 ep1 p1 50", "vport_p2 ep2 0 dc 0", "rport_p2 ep2 p2 50")
MODEL = ".model nm nmos(level=1 vto=0.8)"


def circuit_of(*lines):
    return read_listing("\n".join(f"    {k} : {line}" for k, line in enumerate((*LINE, *lines), start=2)))


def doubt_of(circuit, stands):
    time = np.array([0.0, 1e-9, 2e-9])
    bias = Bias({}, time)
    elements = opaque_elements(circuit, 27.0)
    network = linearise(circuit, bias, 27.0, SOURCES, stands)
    return Doubt(network, PORTS, [1e8], elements, frozenset())


def test_what_has_no_form_is_refused_unless_something_stands_for_it():
    circuit = circuit_of("r1 p1 p2 1", "m1 p1 g 0 0 nm", "r2 g 0 1k", MODEL)
    with pytest.raises(LinearisationError, match="M1: MOSFET"):
        linearise(circuit, Bias({}, np.zeros(1)), 27.0, SOURCES)
    linearise(circuit, Bias({}, np.zeros(1)), 27.0, SOURCES, {"m1": None})


@pytest.mark.parametrize(
    ("line", "nodes", "rest"),
    [
        ("m1 d g s b nm w=1u", ("d", "g", "s", "b"), "nm w=1u"),
        ("m1 d g s vd", ("d", "g", "s"), "vd"),
        ("j1 d g gnd jn", ("d", "g", "0"), "jn"),
        ("s1 a b c 0 sw1", ("a", "b", "c", "0"), "sw1"),
        ("r1 a b 1k tc1=1e-3", ("a", "b"), "1k tc1=1e-3"),
        ("w1 a b vsense sw2", ("a", "b"), None),
        ("o1 a 0 b 0 lossy", ("a", "0", "b", "0"), None),
    ],
)
def test_terminals_are_found(line, nodes, rest):
    models = (
        MODEL, ".model vd vdmosn ( vto=1 )", ".model jn njf(vto=-2)", ".model sw1 sw(vt=1)", ".model sw2 csw(it=1)",
        ".model lossy ltra(r=1 l=1n c=1p len=1)",
    )  # fmt: skip
    (element,) = circuit_of(line, *models).opaque
    assert (element.nodes, element.rest) == (nodes, rest)


def test_models_of_vdmos_are_written_as_ngspice_reads_them():
    cards = circuit_of(".model a vdmosn ( vto=1 )", ".model b VDMOSP (vto=-1)", ".model c d(is=1)").model_cards
    assert cards == (".model a vdmos( vto=1 )", ".model b vdmos(pchan vto=-1)", ".model c d(is=1)")


def test_a_shunt_element_behind_a_resistance_moves_s_by_what_the_closed_form_says():
    # open: a line through; tied together: 100 ohm from the line to ground
    circuit = circuit_of("r1 p1 p2 1e-3", "r2 p1 d 100", "m1 d 0 0 0 nm", MODEL)
    doubt = doubt_of(circuit, {"m1": None})
    floor = 1e-3
    moved = 20.0 * np.log10((50.0 / 250.0 + floor) / floor)
    assert doubt.between("m1") == pytest.approx(moved, abs=0.2)
    assert doubt.whatever("m1", 0.05) > 0.05


def test_a_share_of_an_admittance_moves_the_transmission_by_what_the_closed_form_says():
    circuit = circuit_of("r1 p1 p2 1e-3", "m1 p1 0 0 0 nm", MODEL)
    values = np.array([0.0, 0.01, 0.02])
    standing = Admittance("m1", ("p1",), values.reshape(-1, 1, 1), np.zeros((3, 1, 1)))
    doubt = doubt_of(circuit, {"m1": standing})
    found = doubt.by_share([{"m1": standing}], 0, 0.1, [(0, 1)])
    level = [20.0 * np.log10(2.0 / (2.0 + 50.0 * y) + 1e-3) for y in (0.02, 0.022, 0.018)]
    assert found["m1"] == pytest.approx(max(abs(level[1] - level[0]), abs(level[2] - level[0])), rel=1e-3)


def test_an_element_between_supplies_moves_nothing():
    circuit = circuit_of("r1 p1 p2 1", "vdd vdd 0 5", "m1 vdd vdd 0 0 nm", MODEL)
    network = linearise(circuit, Bias({}, np.zeros(2)), 27.0, SOURCES, {"m1": None})
    assert Doubt(network, PORTS, [1e8], circuit.opaque, frozenset({"vdd"})).whatever("m1", 0.05) == 0.0


def test_instants_follow_the_voltages():
    circuit = circuit_of("m1 d g 0 0 nm", MODEL)
    time = np.linspace(0.0, 1.0, 5001)
    gate = np.clip((time - 0.5) / 1e-2, 0.0, 1.0)
    points = biased_instants(circuit.opaque, Bias({"v(d)": 0.0 * time, "v(g)": 5.0 * gate}, time))
    assert {points[0], points[-1]} == {0, 5000}
    # each stop on the way up, and the ends of both rests
    assert np.abs(np.diff(gate[points])).max() <= 0.021
    assert points.size < 150


def test_points_are_thinned_with_both_ends():
    points = doubt_points(np.arange(10_000))
    assert (points[0], points[-1]) == (0, 9999)
    assert points.size <= 160


def test_an_admittance_is_interpolated_between_its_instants():
    one = Admittance("m1", ("a", "b"), np.arange(8.0).reshape(2, 2, 2), np.zeros((2, 2, 2)))
    between = one.along(np.array([0.0, 1.0]), np.array([0.0, 0.25, 1.0]))
    assert between.conductance[1].tolist() == [[1.0, 2.0], [3.0, 4.0]]
