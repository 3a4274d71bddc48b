"""Frozen solution: S-parameters of linearised networks against closed forms and chain matrices.

Outside references: textbook S-parameters of single elements, chain (ABCD) matrices multiplied by hand in numpy and
turned into S (D. M. Pozar, Microwave Engineering, 4th edition, 2012, table 4.2), and direct numpy solutions. No
engine: circuits are listing text, the bias is written here.
"""

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.frozen import changing_points, solve_frozen
from transim.envelope.linearise import linearise, saved_vectors
from transim.errors import LinearisationError, RawFileError

Z0 = 50.0
PORTS = (RfPort("p1", "vport_p1", Z0), RfPort("p2", "vport_p2", Z0))
TERMINATION = ["rport_p1 ep1 p1 50", "rport_p2 ep2 p2 50", "vport_p1 ep1 0 dc 0", "vport_p2 ep2 0 dc 0"]


def network(lines, vectors=None, time=(0.0,), temperature=27.0, termination=TERMINATION):
    text = "\n".join(f" {k} : {line}" for k, line in enumerate([*lines, *termination]))
    time = np.asarray(time, dtype=float)
    vectors = {name: np.asarray(values, dtype=float) for name, values in (vectors or {}).items()}
    return linearise(read_listing(text), Bias(vectors, time), temperature, [port.source for port in PORTS])


def solve(lines, frequency, ports=PORTS, **options):
    return solve_frozen(network(lines, **options), ports, [frequency]).s[0]


def series(z):
    return np.array([[1.0, z], [0.0, 1.0]], dtype=complex)


def shunt(y):
    return np.array([[1.0, 0.0], [y, 1.0]], dtype=complex)


def from_chain(m, first=Z0, second=Z0):
    """S of a chain matrix between two real impedances."""
    (a, b), (c, d) = m
    total = a * second + b + c * first * second + d * first
    s11 = (a * second + b - c * first * second - d * first) / total
    s22 = (-a * second + b - c * first * second + d * first) / total
    s21 = 2.0 * np.sqrt(first * second) / total
    return np.array([[s11, s21 * (a * d - b * c)], [s21, s22]])


@pytest.mark.parametrize(
    ("lines", "expected"),
    [
        (["r1 p1 p2 3"], 100.0 / 103.0),
        (["r1 p1 0 2", "v2 p1 p2 0"], 4.0 / 54.0),
        (["c1 p1 p2 0.3p"], 100.0 / (100.0 + 1.0 / (2j * np.pi * 1e9 * 0.3e-12))),
        (["l1 p1 p2 10n"], 100.0 / (100.0 + 2j * np.pi * 1e9 * 10e-9)),
        (["r1 p1 0 50", "g1 p2 0 p1 0 20m"], -2.0 * 0.5 * 20e-3 * 50.0),
        (["r1 p1 0 50", "e1 m 0 p1 0 4", "r2 m p2 50"], 2.0 * 0.5 * 4.0 * 0.5),
        (["v1 p1 m 0", "r1 m 0 50", "f1 p2 0 v1 3"], -2.0 * 3.0 / 100.0 * 50.0),
        (["v1 p1 m 0", "r1 m 0 50", "h1 n 0 v1 100", "r2 n p2 50"], 2.0 * 100.0 / 100.0 * 0.5),
    ],
    ids=["series R", "shunt R", "series C", "series L", "G", "E", "F", "H"],
)
def test_single_elements(lines, expected):
    assert solve(lines, 1e9)[0, 1, 0] == pytest.approx(expected, rel=1e-8)


VALUES = st.tuples(
    st.sampled_from(["series", "shunt"]),
    st.sampled_from("rlc"),
    st.floats(-1.0, 1.0).map(lambda power: 10.0**power),
)
SCALE = {"r": 50.0, "l": 50.0 / (2e9 * np.pi), "c": 1.0 / (50.0 * 2e9 * np.pi)}


def impedance(letter, value, omega):
    return {"r": value, "l": 1j * omega * value, "c": 1.0 / (1j * omega * value)}[letter]


@settings(deadline=None)
@given(chain=st.lists(VALUES, min_size=1, max_size=6), frequency=st.floats(8.0, 10.0).map(lambda power: 10.0**power))
def test_ladders_against_chain_matrices(chain, frequency):
    omega = 2.0 * np.pi * frequency
    lines, matrix, node = [], np.eye(2, dtype=complex), "p1"
    for k, (place, letter, share) in enumerate(chain):
        value = share * SCALE[letter]
        z = impedance(letter, value, omega)
        other = "0" if place == "shunt" else f"n{k}"
        lines.append(f"{letter}{k} {node} {other} {value!r}")
        matrix = matrix @ (shunt(1.0 / z) if place == "shunt" else series(z))
        node = node if place == "shunt" else other
    # a source of 0 V is a wire
    lines.append(f"vend {node} p2 0")
    assert solve(lines, frequency)[0] == pytest.approx(from_chain(matrix), abs=1e-9)


def test_ports_of_different_impedance():
    ports = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 75.0))
    termination = ["rport_p1 ep1 p1 50", "rport_p2 ep2 p2 75", "vport_p1 ep1 0 dc 0", "vport_p2 ep2 0 dc 0"]
    found = solve(["r1 p1 p2 20", "c1 p2 0 5p"], 1e9, ports=ports, termination=termination)[0]
    matrix = series(20.0) @ shunt(2j * np.pi * 1e9 * 5e-12)
    assert found == pytest.approx(from_chain(matrix, 50.0, 75.0), abs=1e-12)
    assert found[0, 1] == pytest.approx(found[1, 0])


def test_coupled_inductors():
    """A transformer is a T of L1 - M, M, L2 - M."""
    first, second, factor, omega = 80e-9, 45e-9, 0.6, 2e9 * np.pi
    mutual = factor * np.sqrt(first * second)
    matrix = series(1j * omega * (first - mutual)) @ shunt(1.0 / (1j * omega * mutual))
    matrix = matrix @ series(1j * omega * (second - mutual))
    found = solve([f"l1 p1 0 {first}", f"l2 p2 0 {second}", f"k1 l1 l2 {factor}"], 1e9)[0]
    assert found == pytest.approx(from_chain(matrix), abs=1e-12)


@settings(deadline=None)
@given(
    values=st.lists(st.floats(0.2, 5.0), min_size=6, max_size=6),
    frequency=st.floats(7.0, 10.0).map(lambda power: 10.0**power),
)
def test_lossless_networks_are_unitary(values, frequency):
    size = {"l": 8e-9, "c": 3e-12}
    nodes = [("p1", "m"), ("m", "p2"), ("m", "0"), ("p1", "0"), ("p2", "0"), ("p1", "p2")]
    lines = [
        f"{letter}{k} {a} {b} {value * size[letter]!r}"
        for k, (letter, value, (a, b)) in enumerate(zip("lclclc", values, nodes, strict=True))
    ]
    s = solve(lines, frequency)[0]
    assert s @ s.conj().T == pytest.approx(np.eye(2), abs=1e-7)
    assert s[0, 1] == pytest.approx(s[1, 0], abs=1e-10)


def test_a_supply_is_ground_for_rf():
    with_supply = solve(["v1 vp 0 5", "r1 p1 vp 30", "c1 p2 vp 4p", "r2 p1 p2 10", "e1 n 0 vp p1 2", "r3 n p2 90"], 1e9)
    grounded = solve(["r1 p1 0 30", "c1 p2 0 4p", "r2 p1 p2 10", "e1 n 0 0 p1 2", "r3 n p2 90"], 1e9)
    assert with_supply == pytest.approx(grounded, abs=1e-12)


def test_diode_against_its_equations():
    """G = IS/(N Vt) exp(v/(N Vt)), C = TT g + CJO (1 - v/VJ)^-M; SPICE, kT/q at 27 degC 25.8649 mV."""
    voltage = np.array([-5.0, 0.2, 0.6, 0.7])
    lines = ["d1 p1 p2 dm", ".model dm d(is=1e-14 n=1.2 tt=5n cjo=1p vj=0.8 m=0.4 fc=0.9)"]
    found = solve(lines, 1e8, vectors={"@d1[vd]": voltage}, time=np.arange(4.0))[:, 1, 0]
    vt = 1.2 * 0.0258649
    conductance = np.where(voltage > 0, 1e-14 / vt * np.exp(voltage / vt), 0.0)
    capacitance = 5e-9 * conductance + 1e-12 * (1 - voltage / 0.8) ** -0.4
    expected = 100.0 / (100.0 + 1.0 / (conductance + 2j * np.pi * 1e8 * capacitance))
    # the fifth digit of kT/q is worth 2e-5 of a current at 0.7 V
    assert found == pytest.approx(expected, rel=1e-3, abs=1e-12)


def test_behavioural_sources_along_a_bias():
    control = np.linspace(0.5, 5.0, 10)
    lines = ["b1 p1 p2 i= v(p1,p2) * v(q)^2 / 100", "rq q 0 1e3", "v9 q 0 1"]
    zero = np.zeros(10)
    vectors = {"v(q)": control, "v(p1)": zero, "v(p2)": zero}
    found = solve(lines, 1e8, vectors=vectors, time=np.arange(10.0))[:, 1, 0]
    assert found == pytest.approx(100.0 / (100.0 + 100.0 / control**2), rel=1e-12)
    lines = ["b1 p1 m v= i(b1) * 100 / (1 + v(q))", "vm m p2 0", "rq q 0 1e3", "v9 q 0 1"]
    vectors = {"v(q)": control, "i(b1)": zero}
    found = solve(lines, 1e8, vectors=vectors, time=np.arange(10.0))[:, 1, 0]
    assert found == pytest.approx(100.0 / (100.0 + 100.0 / (1.0 + control)), rel=1e-12)


def test_control_of_a_behavioural_source_takes_part_in_the_rf():
    """I = v(p1)^2/r at a bias of 2 V is a transconductance of 2 * 2 V/r."""
    lines = ["b1 p2 0 i= v(p1)^2/200", "rb p1 0 1e9"]
    s = solve(lines, 1e8, vectors={"v(p1)": [2.0]})[0]
    # open at port 1: twice the forward wave's 1 V behind 50 ohm drives 2 * 2 V/200 ohm into port 2
    assert s[1, 0] == pytest.approx(-2.0 * (2.0 * 2.0 / 200.0) * 50.0, rel=1e-6)
    assert abs(s[0, 1]) < 1e-12


def test_many_carriers_at_once_are_each_alone():
    lines = ["r1 p1 m 10", "c1 m 0 3p", "l1 m p2 4n"]
    carriers = [1e6, 1e8, 3e9]
    together = solve_frozen(network(lines), PORTS, carriers)
    for k, carrier in enumerate(carriers):
        assert together.s[k] == pytest.approx(solve(lines, carrier), abs=1e-14)
    assert together.method == "frozen"


def test_a_node_without_connection_is_refused():
    with pytest.raises(LinearisationError, match="singular"):
        solve(["r1 p1 p2 3", "g1 adrift 0 p1 0 1m"], 1e8)


def test_what_the_run_did_not_save_is_named():
    with pytest.raises(RawFileError, match=r"@d1\[vd\]"):
        network(["d1 p1 p2 dm", ".model dm d(is=1e-14)"])
    with pytest.raises(LinearisationError, match=r"B1.*v\(q\)"):
        network(["b1 p1 p2 i= v(q)", "rq q 0 1"])


def test_refused_elements_stop_the_linearisation():
    with pytest.raises(LinearisationError, match=r"M1.*MOSFET"):
        network(["r1 p1 p2 3", "m1 p1 p2 0 0 mm"])


def test_saved_vectors_are_those_of_the_junctions():
    text = " 1 : d1 a b dm\n 2 : q.x.q1 a b c qm\n 3 : .model dm d\n 4 : .model qm npn\n"
    assert saved_vectors(read_listing(text)) == ("@d1[vd]", "@q.x.q1[vbe]", "@q.x.q1[vbc]", "@q.x.q1[ic]")


def walk(conductance):
    """Return a series conductance that follows given values."""
    time = np.arange(float(len(conductance)))
    vectors = {"v(q)": conductance, "v(p1)": np.zeros(len(time)), "v(p2)": np.zeros(len(time))}
    return network(["b1 p1 p2 i= v(p1,p2) * v(q)", "rq q 0 1e3", "v9 q 0 1"], vectors, time)


PATHS = st.lists(st.floats(-9.0, 0.0), min_size=2, max_size=60).map(lambda powers: 10.0 ** np.array(powers))


@settings(deadline=None)
@given(PATHS, st.floats(1e-3, 0.3))
def test_changing_points_leave_no_change_out(conductance, share):
    changing = walk(conductance)
    points = changing_points(changing, share)
    assert points[0] == 0
    assert points[-1] == len(conductance) - 1
    assert np.all(np.diff(points) > 0)
    scale = np.arcsinh(conductance / 1e-8)
    for first, last in pairwise(points):
        assert np.all(np.abs(scale[first : max(last, first + 1)] - scale[first]) <= share * (1 + 1e-9))


def test_a_flat_stretch_needs_two_points():
    conductance = np.concatenate([np.full(50, 1e-3), np.full(50, 1e-1)])
    assert changing_points(walk(conductance)).tolist() == [0, 49, 50, 99]


@settings(deadline=None)
@given(PATHS)
def test_leaving_points_out_does_not_show(conductance):
    found = solve_frozen(walk(conductance), PORTS, [1e8]).s[0, :, 1, 0]
    assert np.abs(found - 100.0 / (100.0 + 1.0 / conductance)).max() < 1e-3


def test_interpolation_between_the_points_that_are_solved():
    conductance = np.geomspace(1e-6, 1.0, 20001)
    changing = walk(conductance)
    assert changing_points(changing).size < 0.8 * conductance.size
    found = solve_frozen(changing, PORTS, [1e8]).s[0, :, 1, 0]
    # the square of a change by 0.2 %
    assert np.abs(found - 100.0 / (100.0 + 1.0 / conductance)).max() < 4e-6


@settings(deadline=None)
@given(PATHS, st.floats(0.05, 0.5))
def test_refined_keeps_the_points_and_bounds_the_steps(conductance, share):
    before = walk(conductance)
    after, position = before.refined(share, np.ones(before.time.size - 1, dtype=bool))
    assert np.interp(position, np.arange(before.time.size), before.time) == pytest.approx(after.time)
    assert np.all(np.diff(after.time) > 0.0)
    kept = np.searchsorted(after.time, before.time)
    assert after.time[kept] == pytest.approx(before.time)
    assert after.varying_g[kept] == pytest.approx(before.varying_g, rel=1e-9)
    steps = np.abs(np.diff(after.scaled_changes(), axis=0))
    assert steps.max(initial=0.0) <= share * 1.01
    # between two points nothing goes beyond them
    low, high = before.varying_g.min(axis=0), before.varying_g.max(axis=0)
    slack = 1e-9 * np.abs(before.varying_g).max(initial=0.0)
    assert np.all((after.varying_g >= low - slack) & (after.varying_g <= high + slack))
