"""The expanded listing read into elements.

Outside reference: tests/listing/printed.txt is what ngspice 39 itself printed for ``listing expand`` of the netlist
beside it; that it still prints so is checked in tests/spice. Multipliers and defaults are those of the ngspice 39 manual, chapters 3
to 8.
"""

from pathlib import Path

import numpy as np
import pytest

from transim.circuit.elements import Behavioural, Circuit, Device, Element, read_listing
from transim.envelope.diode import DiodeLaw
from transim.envelope.transistor import TransistorLaw
from transim.errors import LinearisationError, NetlistError

LISTING = Path(__file__).with_name("listing").joinpath("printed.txt").read_text()


@pytest.fixture(scope="module")
def circuit() -> Circuit:
    return read_listing(LISTING)


def test_everything_is_read(circuit):
    assert circuit.refused == ()
    assert [len(some) for some in (circuit.elements, circuit.couplings, circuit.devices, circuit.behaviourals)] == [
        21, 1, 6, 5,
    ]  # fmt: skip


@pytest.mark.parametrize(
    "expected",
    [
        Element("r.xa.r1", ("p", "xa.m"), 3000.0),
        Element("l.xa.l1", ("xa.m", "xa.n"), 1e-6),
        Element("l.xa.l2", ("xa.n", "q"), 2e-6),
        Element("c.xa.c1", ("p", "q"), 1e-12),
        Element("v1", ("p", "0"), 0.0),
        Element("i1", ("q", "0"), 0.0),
        Element("e1", ("e", "0", "p", "q"), 2.5),
        Element("g1", ("g", "0", "p", "q"), 1e-3),
        Element("f1", ("f", "0"), 3.0, "v1"),
        Element("h1", ("h", "0"), 50.0, "v1"),
        Element("r8", ("q", "0"), 5.0),
        Element("c9", ("q", "0"), 2e-12),
        Element("l9", ("q", "0"), 0.5e-6),
        Element("g9", ("g", "0", "b", "q"), 2e-3),
        Element("f9", ("f", "0"), 6.0, "v1"),
    ],
    ids=lambda element: element.name,
)
def test_elements(circuit, expected):
    found = next(element for element in circuit.elements if element.name == expected.name)
    assert (found.nodes, found.source) == (expected.nodes, expected.source)
    assert found.value == pytest.approx(expected.value, rel=1e-12)


def test_coupling(circuit):
    assert circuit.couplings[0].inductors == ("l.xa.l1", "l.xa.l2")
    assert circuit.couplings[0].factor == 0.5


def test_devices(circuit):
    found: dict[str, Device] = {device.name: device for device in circuit.devices}
    assert found["d.xa.d1"].parameters == {}
    assert found["d.xa.d2"].parameters == {"area": 2.0}
    assert found["d.xa.d3"].parameters == {"area": 3.0, "m": 2.0}
    assert found["q.xa.q1"].nodes == ("p", "q", "0")
    assert found["q.xa.q2"].nodes == ("p", "q", "0", "0")
    assert found["q.xa.q2"].parameters == {"area": 2.0}
    assert found["q.xa.q3"].parameters == {"area": 2.0, "m": 3.0}
    model = found["d.xa.d1"].model
    assert (model.name, model.kind) == ("xa:dj", "d")
    assert model.parameters == pytest.approx({"is": 3e-14, "tt": 1e-6}, rel=1e-12)
    assert found["q.xa.q1"].model.kind == "npn"


def value(circuit, name, **bias):
    source: Behavioural = next(source for source in circuit.behaviourals if source.name == name)
    dual = source.law.evaluate({key.replace("_", ":", 1): np.asarray(x) for key, x in bias.items()}, {})
    return float(dual.value), {key: float(slope) for key, slope in dual.partial.items()}


def test_behavioural_sources(circuit):
    quantities = {source.name: source.quantity for source in circuit.behaviourals}
    assert quantities == {"b.xa.brb": "i", "b.xa.bcb": "i", "b1": "v", "b9": "i", "brc": "i"}
    current, slopes = value(circuit, "b.xa.brb", v_p=2.0, v_q=0.5)
    assert current == pytest.approx(1.5 / 5000.0)
    assert slopes == pytest.approx({"v:p": 1 / 5000.0 - 1.5 * 4.0 / 25000.0, "v:q": -1 / 5000.0})
    assert value(circuit, "b1", v_p=2.0, v_q=0.5)[0] == 3.0


def test_behavioural_capacitor_is_a_capacitance_times_the_current_of_one_farad(circuit):
    source = next(source for source in circuit.behaviourals if source.name == "b.xa.bcb")
    assert source.law.sources == ("e.xa.ecb",)
    dual = source.law.evaluate({"i:e.xa.ecb": np.asarray(1e9), "v:p": np.asarray(2.0)}, {})
    assert float(dual.value) == pytest.approx(3e-3)
    assert float(dual.partial["i:e.xa.ecb"]) == pytest.approx(3e-12)


def test_multiplier_of_a_behavioural_current(circuit):
    assert value(circuit, "b9", v_p=1.5) == (pytest.approx(9.0), {"v:p": pytest.approx(6.0)})
    assert value(circuit, "brc", v_b9=1.0, v_p=0.0)[0] == pytest.approx(0.02)


def test_nodes_are_those_of_the_elements_without_ground(circuit):
    assert set(circuit.nodes) == {"p", "q", "b", "b9", "e", "f", "g", "h", "xa.m", "xa.n", "xa.cb_int1"}


def one(line: str) -> Circuit:
    return read_listing(f"     3 : {line}\n     9 : .model dm d(is=1e-14)\n    10 : .end\n")


@pytest.mark.parametrize(
    ("line", "name", "words"),
    [
        ("m1 d g 0 0 mm", "M1", "MOSFET"),
        ("j1 p q 0 jm", "J1", "JFET"),
        ("z1 p q 0 zm", "Z1", "MESFET"),
        ("o1 p 0 t2 0 om", "O1", "lossy transmission line"),
        ("s1 p q q 0 sw", "S1", "voltage-controlled switch"),
        ("w1 p q v1 sw", "W1", "current-controlled switch"),
        ("a$poly$e3 %vd [ p 0 ] %vd ( e3 0 ) a$poly$e3", "A$POLY$E3", "code model"),
        ("r9 q 0 10 tc1=1e-3", "R9", "tc1"),
        ("r9 q 0 10 rmod", "R9", "rmod"),
        ("c9 q 0 cmod l=10u w=10u", "c9", "cmod"),
        ("e1 e 0 p q 2.5 m=2", "E1", "controlled source"),
        ("h1 h 0 v1 50 m=2", "H1", "controlled source"),
        ("f1 f 0 poly(1) v1 0 3", "F1", "controlled source"),
        ("g1 g 0 p q 1m tc1=1", "G1", "controlled source"),
        ("d1 p q missing", "D1", "its model is not in the listing"),
        ("b1 b 0 i= ddt(v(p))", "B1", "'ddt'"),
        ("b1 b 0 i= v(p)*2 tc1=1e-3", "B1", "tc1"),
        ("b1 b 0 v= v(p)*2 m=2", "B1", "parameter m"),
        ("br1 b 0 i= v(b, 0) / ( 100 ) tc1=1.0e-03 tc2=0 reciproctc=1 reciprocm=0", "BR1", "tc1"),
        ("b1 b 0 pwl= v(p)", "B1", "cannot read its line"),
        ("r1 a", "r1", "cannot read its line"),
    ],
)
def test_what_has_no_small_signal_form_is_refused_by_name(line, name, words):
    found = one(line)
    assert (found.elements, found.devices, found.behaviourals) == ((), (), ())
    (refusal,) = found.refused
    assert isinstance(refusal, LinearisationError)
    assert words in str(refusal)
    assert name.lower() in str(refusal).lower()


@pytest.mark.parametrize(
    ("line", "law", "words"),
    [
        ("d1 p q dm area=2 temp=50", DiodeLaw, "D1.*temp"),
        ("d1 p q dj", DiodeLaw, "D1.*isr"),
        ("d1 p q dm 3 m=2", DiodeLaw, "D1.*m beside area"),
        ("q1 p q 0 qm temp=50", TransistorLaw, "Q1.*temp"),
        ("q1 p q 0 qp", TransistorLaw, "Q1.*ptf"),
        ("q1 p q 0 s qs", TransistorLaw, "Q1.*cjs"),
    ],
)
def test_what_changes_the_small_signal_form_unseen_is_refused(line, law, words):
    cards = (".model dj d(isr=1e-12)", ".model qm npn(bf=90)", ".model qp npn(ptf=30)", ".model qs npn(cjs=1p)")
    found = read_listing("\n".join(f" {k} : {text}" for k, text in enumerate([line, *cards, ".model dm d(isr=0)"])))
    with pytest.raises(LinearisationError, match=words):
        law(found.devices[0], 27.0)


def test_refusals_do_not_stop_what_can_be_read():
    found = read_listing(LISTING + "    99 : m1 p q 0 0 mm\n")
    assert len(found.elements) == 21
    assert [str(refusal).split(":")[0] for refusal in found.refused] == ["M1"]


def test_other_names_of_ground():
    assert one("r1 p gnd 5").elements[0].nodes == ("p", "0")


def test_zero_ohm_is_what_ngspice_makes_of_it():
    assert one("rq q 0 0").elements[0].value == 1e-3


def test_nothing_to_read():
    with pytest.raises(NetlistError, match="no expanded listing"):
        read_listing("ngspice-39 done\n")
