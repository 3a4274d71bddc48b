"""Plain SPICE files of a user made path and driver: titles, nodes, what is left out, what is refused, and where.

Outside reference: none for the keys, which are the project's own; that the first line of a SPICE file is its title, what
continues a card and which cards start analyses is in the ngspice manual.
"""

from pathlib import Path

import pytest

from transim.circuit.assemble import assemble
from transim.cli import main
from transim.design.toml import read_design
from transim.errors import InvalidDesign, NetlistError
from transim.parts.guard import check_card
from transim.parts.plain import read_plain
from transim.parts.scope import calls_of

HOSTILE = sorted((Path(__file__).parent / "hostile").glob("*.cir"))

PATH = """\
Diodes in a line, two of them
C1 rfin 1 {block}
D1 2 1 pin
D2 2 3
+ pin
C2 3 rfout {block}
L1 1 0 10u
L2 3 0 10u
L3 vb 2 4.7u
.param block=1n
.model pin D(is=1e-13 n=1.8 tt=500n
+ cjo=0.25p)
.end
"""
DRIVER = """\
* a transistor that pulls down
Rb in b 1k
Q1 out b 0 fast
Rc vcc out 330
.model fast NPN(bf=100 tf=0.4n)
"""
DESIGN = """\
title = "own"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "2 us"
period = "6 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "path.cir"
ports = ["rfin", "rfout"]
bias = "vb"
passes = "low"
[driver.own]
part = "driver.cir"
control = "in"
output = "out"
supplies = { vcc = "5 V" }
"""


@pytest.fixture
def own(tmp_path):
    """Return a function that writes path, driver and design, the last with texts replaced, and reads it."""

    def write(*changes, path=PATH, driver=DRIVER):
        (tmp_path / "path.cir").write_text(path)
        (tmp_path / "driver.cir").write_text(driver)
        text = DESIGN
        for before, after in changes:
            assert before in text
            text = text.replace(before, after)
        (tmp_path / "own.toml").write_text(text)
        return read_design(tmp_path / "own.toml")

    return write


def plain(tmp_path, text):
    file = tmp_path / "plain.cir"
    file.write_text(text)
    return read_plain(file)


def cards_or_nothing(tmp_path, text):
    """Return the cards of a file, none where it is refused."""
    try:
        return plain(tmp_path, text).cards
    except NetlistError:
        return ()


def test_path_and_driver_become_parts_with_junctions(own):
    design = own()
    path, driver = design.switch.path, design.drivers[0].part
    assert (path.ports, path.bias, path.throws[0].through) == (("rfin", "rfout"), ("vb",), ("rfin", "rfout"))
    assert path.throws[0].passes_high is False
    assert driver.terminals == ("ctl", "out", "vcc")
    assert design.drivers[0].values == {"vcc": 5.0}
    netlist = assemble(design, design.drivers[0])
    nodes = [tuple(place.nodes.values()) for place in netlist.junctions]
    assert nodes == [("xpath.x1.2", "xpath.x1.1"), ("xpath.x1.2", "xpath.x1.3")]
    assert {probe.quantity for probe in netlist.probes} == {"charge", "current", "reverse"}


def test_command_check_says_what_circuit_it_is(own, tmp_path, capsys):
    own(path=PATH.replace(".end\n", ".tran 1n 1u\n.control\nrun\nplot v(rfout)\n.endc\n.end\n"))
    assert main(["check", str(tmp_path / "own.toml")]) == 0
    said = " ".join(capsys.readouterr().out.split())
    for words in (
        "the circuit of path.cir (2 C, 2 D, 3 L)", "in is its control; out is its output", "junction d1",
        'the first line is taken for a title: "Diodes in a line, two of them"', "the card .tran is left out",
        "a .control block is left out",
    ):  # fmt: skip
        assert words in said


@pytest.mark.parametrize(
    ("first", "kept"),
    [
        ("* a comment", False),
        (".title with a dot", False),
        ("Switch number three, as on the drawing", False),
        ("Resistor divider of 50 ohm", False),
        ("R9 a b 75", True),
        ("V9 a b 5", True),
    ],
)
def test_first_line_is_a_title_unless_the_file_knows_its_nodes(tmp_path, first, kept):
    cards = plain(tmp_path, f"{first}\nR1 a b 50\nR2 b 0 50\n").cards
    assert (cards[0].text == first) is kept
    assert [card.text for card in cards][-2:] == ["R1 a b 50", "R2 b 0 50"]


def test_first_line_that_may_be_either_is_refused(tmp_path):
    with pytest.raises(NetlistError, match="may be a title or an element"):
        plain(tmp_path, "R9 a from 50\nR1 a b 50\nR2 b 0 50\n")


def test_sources_lose_what_excites_them(tmp_path):
    read = plain(tmp_path, "* t\nV1 a 0 DC 5 AC 1 90 SIN(0 1 1k)\nV2 b 0 AC 1V\nI1 a b 1m\nR1 a b 1\n")
    assert [card.text for card in read.cards[:3]] == ["V1 a 0 DC 5 SIN(0 1 1k)", "V2 b 0 0", "I1 a b 1m"]
    assert len(read.notes) == 2


@pytest.mark.parametrize(
    ("text", "line", "words"),
    [
        ("* t\nR1 a 0 1\n.control\nrun\nalter r1 2\n.endc\n", 5, "commands that only analyse or show"),
        ("* t\nR1 a 0 1\n.control\nplot v(a) > file\n.endc\n", 4, "commands that only analyse or show"),
        ("* t\nR1 a 0 1\n.control\nrun\n", 3, "has no .endc"),
        ("* t\nR1 a 0 1\n.include other.cir\n", 3, "reads another file"),
        ("* t\nR1 a 0 1\n.global a\n", 3, "connects to the circuit around it"),
        ("* t\nR1 a 0 1\n.end\nR2 a 0 1\n", 4, "may follow .end"),
        ("* t\nA1 a b gain\n", 2, "code model"),
        ("* t\nR1 a 0 1\n*#shell date\n", 3, "as a command"),
        ("* t\n.op\n", 1, "no circuit"),
    ],
)
def test_what_acts_or_is_no_circuit_is_refused_with_its_line(tmp_path, text, line, words):
    with pytest.raises(NetlistError, match=words) as caught:
        plain(tmp_path, text)
    assert caught.value.line == line


@pytest.mark.parametrize("file", HOSTILE, ids=lambda file: file.stem)
def test_hostile_files_leave_nothing_but_a_circuit(tmp_path, file):
    lines = file.read_text(encoding="utf-8").splitlines()
    body = [line for line in lines if not (line.startswith("* ") and ":" in line) and line != "* transim part"]
    for card in cards_or_nothing(tmp_path, "* plain\n" + "\n".join(body) + "\n"):
        check_card(card.text, file=file, line=card.line)
        assert "@CANARY@" not in card.text
        assert not card.text.lower().startswith((".control", ".tran", ".save", ".print", ".option", ".meas", ".end "))


@pytest.mark.parametrize(
    ("change", "key", "words"),
    [
        (('path = "path.cir"', 'path = "pth.cir"'), "switch.path", "does not exist"),
        (('ports = ["rfin", "rfout"]\n', ""), "switch.ports", "the file has no header"),
        (('bias = "vb"\n', ""), "switch.bias", "required key is missing"),
        (('passes = "low"\n', ""), "switch.passes", '"high" or "low"'),
        (('passes = "low"', 'passes = "off"'), "switch.passes", "high"),
        (('"rfin", "rfout"]', '"rfin", "rfin"]'), "switch.path", "the node rfin is named twice"),
        (('"rfin", "rfout"]', '"rfin", "rfuot"]'), "switch.path", "has no node rfuot, which is named as port"),
        (('bias = "vb"', 'bias = "rfin"'), "switch.path", "as port and as bias entry"),
        (('bias = "vb"', 'bias = "gnd"'), "switch.path", "is ground"),
        (('"rfin", "rfout"]', '"rfin", "rfout", "1"]'), "switch.through", "two of the ports"),
        (('bias = "vb"', 'bias = "vb"\nthrough = ["rfin", "1"]'), "switch.through", "two different ports"),
        (('bias = "vb"', 'bias = "vb"\nblock = "1 nF"'), "switch.block", "no such key"),
        (('bias = "vb"', 'bias = "vb"\nsubcircuit = "arm"'), "switch.path", "has no subcircuit arm"),
        (('control = "in"\n', ""), "driver.own.control", "required key is missing"),
        (('output = "out"', 'output = "uot"'), "driver.own.part", "has no node uot, which is named as output"),
        (('vcc = "5 V"', 'vcc = "5"'), "driver.own.supplies.vcc", "V"),
        (('vcc = "5 V"', 'vdd = "5 V"'), "driver.own.part", "has no node vdd, which is named as supply"),
    ],
)  # fmt: skip
def test_a_mistake_gets_one_message_with_file_line_and_key(own, tmp_path, change, key, words):
    with pytest.raises(InvalidDesign) as caught:
        own(change)
    (error,) = caught.value.errors
    assert error.key == key
    assert error.file == tmp_path / "own.toml"
    assert error.line is not None
    assert words in str(error)


@pytest.mark.parametrize(
    ("card", "words"),
    [
        ("X1 rfin rfout coupler", "X1 calls coupler, which is no subcircuit of the file"),
        ("D3 rfin 0 schottky", "D3 has no model of the file; it has pin"),
        ("M1 rfin 1 0 0 nm w=1u", "M1 has no model of the file"),
        ("R7 rfin", "no whole card of an element"),
        ("C(3 rfin 0 1p", "no whole card of an element"),
    ],
)
def test_what_the_file_lacks_is_said_with_its_line(own, card, words):
    with pytest.raises(InvalidDesign) as caught:
        own(path=PATH.replace(".end\n", f"{card}\n"))
    assert words in str(caught.value)
    assert "path.cir:13" in str(caught.value)


def test_a_source_at_a_named_node_is_refused(own):
    with pytest.raises(InvalidDesign, match=r"Vin holds the node rfin.*remove it"):
        own(path=PATH.replace(".end\n", "Vin rfin 0 SIN(0 1 1meg)\n"))


def test_a_node_that_is_path_and_supply_is_refused(own):
    design = own(("vcc", "vb"), driver=DRIVER.replace("vcc", "vb"))
    with pytest.raises(Exception, match="rename one of the two"):
        assemble(design, design.drivers[0])


def test_numbers_serve_as_nodes(own):
    text = PATH.replace("rfin", "10").replace("rfout", "20").replace("vb", "30")
    design = own(('["rfin", "rfout"]', '[10, "20"]'), ('"vb"', "30"), path=text)
    assert design.switch.path.terminals == ("node_10", "node_20", "node_30")
    assert "X1 node_10 node_20 node_30 own_path_circuit\n.subckt own_path_circuit 10 20 30" in design.switch.path.body


def test_a_subcircuit_is_a_path_and_its_other_terminals_may_be_grounded(own):
    inner = PATH.split("\n", 1)[1].replace(".end\n", "").replace(" 0 10u", " com 10u")
    text = f"* library\n.subckt arm rfin com rfout vb\n{inner}.ends\n"
    with pytest.raises(InvalidDesign, match="terminal com that the design does not name"):
        own(('bias = "vb"', 'bias = "vb"\nsubcircuit = "ARM"'), path=text)
    design = own(('bias = "vb"', 'bias = "vb"\nground = ["com"]\nsubcircuit = "ARM"'), path=text)
    assert "X1 rfin 0 rfout vb arm" in design.switch.path.body
    assert [place.instance for place in assemble(design, design.drivers[0]).junctions] == ["x1.xd1", "x1.xd2"]


def test_devices_in_subcircuits_are_junctions_unless_parameters_reach_into_them(own):
    text = """\
* a file with a subcircuit for the diode
.subckt part 1 2 {head}
D1 1 2 inner {size}
.model inner D(cjo=1p)
.ends
X1 rfin rfout part
L1 vb rfin 1u
L2 rfout 0 1u
"""
    design = own(path=text.replace("{head}", "").replace("{size}", ""))
    places = assemble(design, design.drivers[0]).junctions
    assert [(place.instance, tuple(place.nodes.values())) for place in places] == [("x1.x1.xd1", ("rfin", "rfout"))]
    design = own(path=text.replace("{head}", "area=2").replace("{size}", "{area}"))
    assert assemble(design, design.drivers[0]).junctions == ()
    assert any("D1 in line 3 works but is not looked into" in note for note in design.switch.path.notes)


def test_calls_are_found_on_continued_cards():
    body = ".subckt p a b\nX1 a\n+ m\n+ slot\nXin m b in k=1\n.subckt in c d k=2\nX2 d c slot x=3\n.ends\n.ends\n"
    calls = calls_of(body, Path("p.cir"), {"slot": None})
    assert [(call.instance, call.nodes) for call in calls] == [("x1", ("a", "m")), ("xin.x2", ("b", "m"))]


def test_several_bias_entries_and_inverted_ones(own):
    design = own(('bias = "vb"', 'bias = ["vb", "1"]\ninverted = ["1"]'))
    path = design.switch.path
    assert (path.bias, path.inverted) == (("vb", "node_1"), ("node_1",))
    assert path.throws[0].bias == "vb"
