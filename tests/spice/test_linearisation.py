"""Frozen solution at an operating point against ngspice's AC analysis, for every kind of element.

Outside reference: ngspice on the same deck; its listing, its operating point and its AC response. 0.001 dB, or 1.2e-4
of an S-parameter: ngspice's reltol of 1e-9 leaves less. The networks are drawn at random, the same at every run.
"""

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.frozen import solve_frozen
from transim.envelope.linearise import linearise, saved_vectors
from transim.envelope.stationary import largest_difference, read_scattering

PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
FREQUENCIES = (3e6, 200e6, 4e9)
NODES = ("p1", "p2", "n1", "n2", "n3", "0")
ENDS = """
Rport_p1 ep1 p1 50
Rport_p2 ep2 p2 50
Vport_p1 ep1 0 DC 0 AC 0
Vport_p2 ep2 0 DC 0 AC 0
"""


def compare(engine, body, temperature=27.0, models=""):
    """Return the largest difference of S between ngspice and the frozen solution [dB], and S of ngspice."""
    saved = "all"
    for _ in range(2):
        steps = []
        for port in PORTS:
            steps.append(f"alter {port.source} acmag = 1")
            for frequency in FREQUENCIES:
                steps += [f"ac lin 1 {frequency:.6e} {frequency:.6e}", "write small.raw v(p1) v(p2)"]
            steps.append(f"alter {port.source} acmag = 0")
        deck = (
            f"* small network\n{body}\n{ENDS}{models}\n"
            f".options temp={temperature} reltol=1e-9 abstol=1e-15 vntol=1e-9\n"
            f".control\nlisting expand\nset appendwrite\nop\nwrite small.raw {saved}\n" + "\n".join(steps)
            + "\nquit 0\n.endc\n.end\n"
        )  # fmt: skip
        done = engine.run(deck, name="small", writes_raw=True)
        circuit = read_listing(done.log)
        wanted = saved_vectors(circuit)
        if not wanted or saved != "all":
            break
        # the listing says which device voltages the second run has to save
        saved = f"all {' '.join(wanted)}"
    operating, *plots = done.plots
    vectors = {name: np.real(operating.data[:, k]) for k, name in enumerate(operating.names)}
    network = linearise(circuit, Bias(vectors, np.zeros(1)), temperature, [port.source for port in PORTS])
    ours = solve_frozen(network, PORTS, FREQUENCIES).s[:, 0]
    theirs = read_scattering(plots, PORTS, FREQUENCIES)
    for first, second in zip(ours, theirs, strict=True):
        assert first == pytest.approx(second, rel=1.2e-4, abs=1e-7)
    return max(largest_difference(first, second) for first, second in zip(ours, theirs, strict=True)), theirs


def skeleton(random):
    """R, L and C that tie every node down, and a supply that gives each of them a DC voltage."""
    value = random.uniform
    lines = [f"Vs vs 0 DC {value(2, 5):.4f}"]
    for k, node in enumerate(NODES[:-1]):
        lines += [f"Rt{k} {node} 0 {value(60, 400):.4f}", f"Rs{k} {node} vs {value(200, 900):.4f}"]
    for k, (first, second) in enumerate((("p1", "n1"), ("n1", "p2"), ("n1", "n2"), ("n2", "n3"))):
        lines.append(f"Rc{k} {first} {second} {value(10, 80):.4f}")
    for k in range(2):
        first, second = random.choice(NODES, 2, replace=False)
        lines.append(f"C{k} {first} {second} {value(0.5, 20):.4f}p")
        # in series to a resistor: an inductor alone would short two nodes at DC
        first, second = random.choice(NODES, 2, replace=False)
        lines += [f"L{k} {first} ln{k} {value(1, 200):.4f}n", f"Rl{k} ln{k} {second} {value(5, 60):.4f}"]
    first, second = random.choice(NODES, 2, replace=False)
    return [*lines, f"Rx {first} {second} {value(10, 500):.4f}"]


def draw(random, template):
    """Fill nodes a, b, c, d and numbers x, y (0.2 to 1) into a template."""
    a, b, c, d = random.choice(NODES[:-1], 4, replace=False)
    x, y = random.uniform(0.2, 1.0, 2).round(4)
    return template.format(a=a, b=b, c=c, d=d, x=x, y=y)


KINDS = {
    "R L C alone": "",
    "multipliers": "R9 {a} {b} {x}k m=2\nC9 {b} {c} {y}p m=3\nL9 {a} m9 {x}u m=2\nR9a m9 {d} 50\n"
    "G9 {a} 0 {c} {d} {y}m m=2",
    "K": "La {a} ma {x}u\nLb {b} mb {y}u\nRa ma 0 20\nRb mb {c} 30\nK1 La Lb {x}",
    "E": "E1 me 0 {a} {b} {x}\nRe me {c} 75",
    "G": "G1 {a} {b} {c} {d} {x}m",
    "F": "Vf {a} mf 0\nRf mf {b} 120\nF1 {c} {d} Vf {x}",
    "F with multiplier": "Vf {a} mf 0\nRf mf {b} 120\nF1 {c} {d} Vf {x} m=2",
    "H": "Vh {a} mh 0\nRh mh {b} 120\nH1 mo 0 Vh {x}k\nRo mo {c} 90",
    "source between nodes": "V7 {a} m7 DC {x}\nR7 m7 {b} 33",
    "current source": "I7 {a} {b} DC {x}m",
    "B current": "B1 {a} {b} i = {x}m * v({c})^2 + {y}m * tanh(v({d}, {a}))",
    "B current with multiplier": "B1 {a} {b} i = {x}m * v({c})^2 m=3",
    "B voltage": "B1 mb 0 v = {x} * v({c}) * v({d}) / (1 + v({a})^2)\nRb mb {b} 80",
    "B of a current": "Vi {a} mi 0\nRi mi {b} 150\nB1 mb 0 v = {x}k * i(Vi) * (1 + {y} * v({c}))\nRb mb {d} 80",
    "B of itself": "B1 {a} mb v = 20 * i(B1) * (1 + 50 * i(B1)^2)\nRb mb {b} 60",
    "B with conditional": "B1 {a} 0 i = v({c}) > 0.1 ? {x}m * v({b}) : {y}m * v({d})\n"
    "B2 {b} 0 i = {x}m * max(v({a}), v({c}))",
    "R by expression": "R9 {a} {b} r='100 * {x} * (1 + v({c}) * v({c}))'",
    "R by expression with multiplier": "R9 {a} {b} r='300 * {x} * (1 + v({c}) * v({c}))' m=2",
    "C by expression": "C9 {a} {b} c='5p * {x} * (1 + 0.2 * v({c}))'",
    "L by expression": "L9 {a} m9 l='50n * {x} * (1 + 0.1 * v({c}))'\nR9 m9 {b} 20",
    "subcircuit": "X1 {a} {b} {c} cell g={x}\n.subckt cell a b c g=1\nR1 a m {{100 * g}}\n"
    "B1 m b v = {{g}} * v(c) * 0.1\nC1 m c 1p\n.ends",
    "D": "D1 {a} {b} dm\nD2 {c} 0 dm 2\nD3 0 {d} dm",
    "Q": "Q1 {a} {b} {c} qm\nQ2 {c} {d} {a} qp",
}  # fmt: skip
MODELS = (
    ".model dm d(is=1e-13 n=1.3 rs=4 cjo=2p vj=0.7 m=0.4 tt=2n ikf=20m)\n"
    ".model qm npn(is=1e-15 bf=80 br=3 vaf=30 ikf=50m rb=40 rbm=8 rc=5 re=1 cje=2p cjc=1p xcjc=0.6 tf=0.2n tr=8n xtf=2 "
    "vtf=3 itf=30m)\n"
    ".model qp pnp(is=1e-14 bf=40 br=2 rb=60 rc=8 re=2 cje=3p cjc=2p tf=0.5n tr=20n)"
)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("kind", KINDS)
def test_random_network(engine, kind, seed):
    random = np.random.default_rng([seed, list(KINDS).index(kind)])
    body = "\n".join([*skeleton(random), draw(random, KINDS[kind])])
    models = MODELS if kind in ("D", "Q") else ""
    difference, s = compare(engine, body, temperature=(27.0, -40.0, 85.0)[seed], models=models)
    assert difference < 1e-3
    # the network does pass something: the comparison is not one of noise
    assert np.abs(s[:, 1, 0]).max() > 1e-3


def test_a_node_that_a_zero_resistance_joins(engine):
    # ngspice makes it 1 mohm
    difference, _ = compare(engine, "R1 p1 m 0\nR2 m p2 10\nR3 p1 0 1e3\nR4 p2 0 1e3")
    assert difference < 1e-4
