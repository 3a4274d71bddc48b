"""Part files: what a header says, agreement with the subcircuit, the catalogue, published model cards."""

import math
import shutil

import pytest

from transim.errors import DesignError, NetlistError
from transim.parts.cards import joined_cards, read_model_card, read_model_cards
from transim.parts.catalogue import Catalogue, load_catalogue, shipped_folder
from transim.parts.foreign import read_foreign_junction
from transim.parts.header import read_part
from transim.parts.nearest import nearest_name
from transim.parts.part import ROLES, Throw

JUNCTION = """\
* transim part
* name: reed
* role: junction
* terminals: a k
* summary: invented junction of a tag receiver
* source: nobody, invented
*
* parameter: lifetime | s | 800 ns | > 0 s .. 10 ms | carrier lifetime
* parameter: capacitance | F | 0.2 pF | 0 .. 1 nF | across the I-region
* parameter: ideality | 1 | 1.05 | 1 .. - | emission coefficient
* parameter: offset | V | -5 mV | - .. 1 V | shift
* probe: charge | C | 1e-9 * v(q) - 2*v( q , a )
* probe: current | A | i(vsense)
* probe: charge_of_diode | C | -@d1[charge] + v(q)
* note: first
* note: second | with a bar
.subckt reed a k lifetime=8e-7 capacitance = 2e-13
+ ideality=1.05 offset=-0.005 ; comment
* a comment
Vsense a m 0
D1 m k dreed
Cq q 0 {capacitance}
Rq q 0 {lifetime + offset} $ comment
.model dreed D(is=1e-14 n={ideality})
.ends
"""

PATH = """\
* transim part
* name: fork
* role: path
* terminals: p1 p2 p3 bias
* ports: p1 p2 p3
* through: p1 p3
* bias: bias
* passes: unbiased
* slot: series | a k | in the arm
* slot: shunt | a k | to ground
* summary: invented fork
* parameter: dc_block | F | 1 nF | 0.1 pF .. 1 uF | series capacitor
.subckt fork p1 p2 p3 bias dc_block=1e-9
C1 p1 m {dc_block}
X1 m p2 series
Xcell m p3 cell
X2 m 0 shunt
R1 bias m 100
.subckt cell a b
R1 a b 1
.ends cell
.ends fork
"""

DRIVER = """\
* transim part
* name: gate
* role: driver
* terminals: ctl out vp
* summary: invented gate with a transistor of one's own
* supply: vp | V | 5 V | 0 V .. 20 V | rail
* parameter: pull_up | ohm | 1 kohm | 1 ohm .. 1 Mohm | from the rail
* parameter: gain | 1 | 100 | 1 .. 1000 | current gain
* model: NPN PNP | switching
.subckt gate ctl out vp pull_up=1000 gain=100 control_high=1
R1 vp out {pull_up}
Q1 out b 0 switching
R2 ctl b {1000 * control_high}
.model switching NPN(bf={gain})
.ends
"""


def write(folder, text, name=None):
    """Write a part file under the name that its header gives."""
    stem = name or next(line.split(": ")[1] for line in text.splitlines() if line.startswith("* name"))
    folder.mkdir(parents=True, exist_ok=True)
    file = folder / f"{stem}.cir"
    file.write_text(text, encoding="utf-8")
    return file


def line_of(text, beginning):
    """Return the number of the first line that begins so."""
    return next(number for number, line in enumerate(text.splitlines(), 1) if line.startswith(beginning))


def test_junction_is_read_completely(tmp_path):
    part = read_part(write(tmp_path, JUNCTION))
    assert (part.name, part.role, part.terminals) == ("reed", "junction", ("a", "k"))
    assert part.sources == ("nobody, invented",)
    assert part.notes == ("first", "second | with a bar")
    lifetime, capacitance, ideality, offset = part.parameters
    assert (lifetime.default, lifetime.low, lifetime.high, lifetime.low_open) == (8e-7, 0.0, 1e-2, True)
    assert (capacitance.default, capacitance.low, capacitance.low_open) == (2e-13, 0.0, False)
    assert (ideality.high, offset.low, offset.default) == (math.inf, -math.inf, -0.005)
    assert [probe.terms for probe in part.probes] == [
        ((1e-9, "v(q)"), (-2.0, "v(q)"), (2.0, "v(a)")),
        ((1.0, "i(vsense)"),),
        ((-1.0, "@d1[charge]"), (1.0, "v(q)")),
    ]
    assert part.body.startswith(".subckt reed")
    assert "transim part" not in part.body
    assert (part.throws, part.model, part.reserved, part.slots) == ((), None, (), ())


def test_path_is_read_completely(tmp_path):
    part = read_part(write(tmp_path, PATH))
    assert (part.ports, part.bias, part.inverted) == (("p1", "p2", "p3"), ("bias",), ())
    assert part.throws == (Throw("p3", ("p1", "p3"), False, "bias"),)
    assert [slot.name for slot in part.slots] == ["series", "shunt"]
    assert {slot.terminals for slot in part.slots} == {("a", "k")}


def test_driver_is_read_completely(tmp_path):
    part = read_part(write(tmp_path, DRIVER))
    assert part.outputs == ("out",)
    assert part.reserved == ("control_high",)
    assert list(part.settings) == ["vp", "pull_up", "gain"]
    assert (part.model.kinds, part.model.name) == (("NPN", "PNP"), "switching")
    assert part.model.parameters == ("gain",)


def test_two_ports_are_the_through_pair_without_saying_so(tmp_path):
    text = PATH.replace("p1 p2 p3", "p1 p3").replace("* through: p1 p3\n", "").replace("X1 m p2", "X1 m p3")
    assert read_part(write(tmp_path, text)).throws[0].through == ("p1", "p3")


def test_range_admits_its_closed_ends_only(tmp_path):
    lifetime, capacitance, *_ = read_part(write(tmp_path, JUNCTION)).parameters
    assert not lifetime.admits(0.0)
    assert lifetime.admits(1e-2)
    assert not lifetime.admits(1.0001e-2)
    assert capacitance.admits(0.0)
    assert not capacitance.admits(math.nan)
    assert lifetime.range == "> 0 s .. 10 ms"


FAULTS = [
    (JUNCTION, "* transim part", "* another file", "first line", "* another"),
    (JUNCTION, "* role: junction", "* role: diode", "role is one of", "* role"),
    (JUNCTION, "* role: junction\n", "", "no line", "* transim"),
    (JUNCTION, "* summary: i", "* sumary: i", "did you mean summary", "* sumary"),
    (JUNCTION, "* source: nobody, invented", "* source:", "no value", "* source"),
    (JUNCTION, "* source: nobody, invented", "* nobody invented it", "empty line", "* nobody"),
    (JUNCTION, "* source: nobody, invented", "* slot: x | a k | y", 'no key "slot"', "* slot"),
    (JUNCTION, "* source: nobody, invented", "* summary: twice", "stands twice", "* summary: twice"),
    (JUNCTION, "* terminals: a k", "* terminals: a a", "different names", "* terminals"),
    (JUNCTION, "* terminals: a k", "* terminals: k a", "terminals are k a", ".subckt"),
    (JUNCTION, "lifetime | s | 800 ns", "lifetime | fortnight | 800 ns", "no unit", "* parameter: lifetime"),
    (JUNCTION, "lifetime | s | 800 ns", "lifetime | s | 800", "unit is missing", "* parameter: lifetime"),
    (JUNCTION, "lifetime | s | 800 ns", "lifetime | s | 20 ms", "outside its range", "* parameter: lifetime"),
    (JUNCTION, "> 0 s .. 10 ms", "0 s to 10 ms", "low .. high", "* parameter: lifetime"),
    (JUNCTION, " | carrier lifetime", "", "write", "* parameter: lifetime"),
    (JUNCTION, "* parameter: capacitance", "* parameter: lifetime", "taken", "* parameter: lifetime | F"),
    (JUNCTION, "* parameter: capacitance", "* parameter: part", "taken", "* parameter: part"),
    (JUNCTION, "* parameter: capacitance", "* parameter: 2pF", "no name", "* parameter: 2pF"),
    (JUNCTION, "lifetime=8e-7", "lifetime=8e-6", "default of lifetime", ".subckt"),
    (JUNCTION, "lifetime=8e-7", "lifetime=800n", "plain number", ".subckt"),
    (JUNCTION, "lifetime=8e-7", "", "lacks the parameter lifetime", ".subckt"),
    (JUNCTION, "lifetime=8e-7", "lifetime=8e-7 width=1", "does not describe", ".subckt"),
    (JUNCTION, "lifetime=8e-7", "lifetime=8e-7 control_low=0", "does not describe", ".subckt"),
    (
        JUNCTION,
        "{lifetime + offset}",
        "{lifetime}",
        "does not use its parameter offset",
        "* parameter: offset",
    ),
    (JUNCTION, ".subckt reed", ".subckt weed", "the .subckt weed", ".subckt"),
    (JUNCTION, "1e-9 * v(q) - 2*v( q , a )", "v(q) v(a)", "not understood", "* probe: charge"),
    (JUNCTION, "1e-9 * v(q) - 2*v( q , a )", "system(x)", "not understood", "* probe: charge"),
    (JUNCTION, "1e-9 * v(q) - 2*v( q , a )", "v(z)", "has no z", "* probe: charge"),
    (JUNCTION, "i(vsense)", "i(vother)", "has no vother", "* probe: current"),
    (JUNCTION, "* a comment", ".control", "cannot stand", ".control"),
    (JUNCTION, "* a comment", ".include other.cir", "cannot stand", ".include"),
    (JUNCTION, ".ends", "", "no .ends", ".subckt"),
    (JUNCTION, ".ends", ".ends\nR1 a b 1", "nothing outside", "R1"),
    (JUNCTION, ".subckt reed", "+ x\n.subckt reed", "continuation", "+ x"),
    (JUNCTION, "X", "X", "no .subckt", None),
    (PATH, "* passes: unbiased", "* passes: sometimes", "biased or unbiased", "* passes"),
    (PATH, "* passes: unbiased\n", "", 'no line "\\* passes', "* transim"),
    (PATH, "* through: p1 p3", "* through: p1 p4", "two of the ports", "* through"),
    (PATH, "* through: p1 p3\n", "", "through", "* transim"),
    (PATH, "* bias: bias", "* bias: p1", "ports and its bias", "* terminals"),
    (PATH, "* slot: shunt", "* slot: series", "stands twice", "* slot: series | a k | to ground"),
    (PATH, "X2 m 0 shunt", "X2 m 0 series", "calls the slot shunt", "* slot: shunt"),
    (PATH, "X2 m 0 shunt", "X2 m 0 0 shunt", "gives 3 nodes", "X2"),
    (PATH, "Xcell m p3 cell", "Xcell m p3 hell", "calls hell", "Xcell"),
    (PATH, "* parameter: dc_block", "* parameter: series", "taken", "* parameter: series"),
    (DRIVER, "* terminals: ctl out vp", "* terminals: ctl gate vp", "terminals are", ".subckt"),
    (DRIVER, "ctl out vp", "in out vp", "include ctl", "* terminals"),
    (DRIVER, "ctl out vp", "ctl q vp", "ctl, out", "* terminals"),
    (DRIVER, "* supply: vp", "* supply: vn", "include vn", "* terminals"),
    (DRIVER, "* model: NPN PNP", "* model: NMOS", "D, NPN and PNP", "* model"),
    (DRIVER, "* model: NPN PNP", "* model: PNP", "kind NPN", "* model"),
    (DRIVER, "PNP | switching", "PNP | other", "one .model card named other", "* model"),
]


@pytest.mark.parametrize(("text", "old", "new", "message", "where"), FAULTS)
def test_faulty_part_file_is_refused_with_its_line(tmp_path, text, old, new, message, where):
    faulty = text[: text.index(".subckt")] if old == "X" else text.replace(old, new)
    assert faulty != text
    file = write(tmp_path, faulty)
    with pytest.raises(NetlistError, match=message) as caught:
        read_part(file)
    assert caught.value.file == file
    assert caught.value.line == (None if where is None else line_of(faulty, where))


def test_file_must_have_the_name_of_its_part(tmp_path):
    with pytest.raises(NetlistError, match="its file must be reed"):
        read_part(write(tmp_path, JUNCTION, "weed"))


def test_files_that_are_no_text_are_refused(tmp_path):
    with pytest.raises(NetlistError, match="does not exist"):
        read_part(tmp_path / "none.cir")
    with pytest.raises(NetlistError, match="folder"):
        read_part(tmp_path)
    latin = tmp_path / "latin.cir"
    latin.write_bytes(b"* transim part\n* summary: \xb5\n")
    with pytest.raises(NetlistError, match="not UTF-8") as caught:
        read_part(latin)
    assert caught.value.line == 2
    latin.write_bytes(b"* transim part\n\x00\n")
    with pytest.raises(NetlistError, match="control character") as caught:
        read_part(latin)
    assert caught.value.line == 2
    latin.write_bytes(b"*" * 3_000_000)
    with pytest.raises(NetlistError, match="2 MB"):
        read_part(latin)


def test_comments_and_continuations_of_cards(tmp_path):
    text = "* c\nR1 a b 1 ; x\n\n* between\n+ tc1=0 $ y\nC1 a$b 0 1\n"
    assert [(card.line, card.text) for card in joined_cards(text, file=tmp_path)] == [
        (2, "R1 a b 1 tc1=0"),
        (6, "C1 a$b 0 1"),
    ]


def test_every_shipped_part_is_read():
    catalogue = load_catalogue()
    parts = list(catalogue)
    assert len(parts) == len(catalogue) == len(list(shipped_folder().glob("*/*.cir"))) > 0
    assert {part.role for part in parts} == set(ROLES)
    for part in parts:
        assert part.file.parent.name == ROLES[part.role]
        assert all(parameter.admits(parameter.default) for parameter in part.settings.values())
    for path in (part for part in parts if part.role == "path"):
        for slot in path.slots:
            assert any(part.terminals == slot.terminals for part in parts if part.role == "junction")


def test_catalogue_reads_a_part_only_when_it_is_asked_for(tmp_path):
    write(tmp_path / "junctions", JUNCTION)
    write(tmp_path / "junctions", JUNCTION.replace("reed", "weed").replace("* summary", "* sumary"))
    catalogue = Catalogue([tmp_path])
    assert catalogue.names("junction") == ("reed", "weed")
    part = catalogue.find("junction", "reed")
    shutil.rmtree(tmp_path / "junctions")
    assert catalogue.find("junction", "reed") is part
    with pytest.raises(NetlistError):
        catalogue.find("junction", "weed")


def test_unknown_part_is_answered_with_the_nearest_and_all(tmp_path):
    write(tmp_path, JUNCTION)
    write(tmp_path, DRIVER)
    catalogue = Catalogue([tmp_path])
    with pytest.raises(DesignError, match="no junction part named Reet") as caught:
        catalogue.find("junction", "Reet")
    assert caught.value.nearest == "reed"
    assert "reed" in caught.value.expected
    with pytest.raises(DesignError, match="gate is a driver, not a junction"):
        catalogue.find("junction", "gate")
    with pytest.raises(DesignError, match="no path part"):
        catalogue.find("path", "fork")


def test_users_part_takes_the_place_of_a_shipped_one(tmp_path):
    name = load_catalogue().names("junction")[0]
    write(tmp_path, JUNCTION.replace("reed", name))
    catalogue = load_catalogue(tmp_path)
    assert catalogue.find("junction", name).file.parent == tmp_path
    assert set(load_catalogue().names("driver")) <= set(catalogue.names("driver"))


def test_folders_that_hold_no_parts_are_refused(tmp_path):
    with pytest.raises(DesignError, match="does not exist"):
        Catalogue([tmp_path / "none"])
    (tmp_path / "deck.cir").write_text("a deck, no part\n")
    with pytest.raises(DesignError, match="no part file"):
        Catalogue([tmp_path])
    write(tmp_path, JUNCTION)
    write(tmp_path / "junctions", JUNCTION)
    with pytest.raises(NetlistError, match="stands twice"):
        Catalogue([tmp_path])


def test_part_in_the_folder_of_another_role_is_refused(tmp_path):
    write(tmp_path / "drivers", JUNCTION)
    with pytest.raises(NetlistError, match="is a junction, but stands with the drivers"):
        Catalogue([tmp_path]).find("driver", "reed")


CARD = """\
* invented switching transistor
.MODEL TAG_1 npn ( IS=1.0E-14 BF = 120 ; gain
* c
+ TF=0.4n $ t
+ )
"""


def test_model_card_gets_the_name_of_the_slot(tmp_path):
    file = tmp_path / "tag.lib"
    file.write_text(CARD)
    assert read_model_card(file, "switching", ("NPN", "PNP")) == (
        ".model switching npn(IS=1.0E-14 BF = 120 TF=0.4n)"
    )


@pytest.mark.parametrize(
    ("text", "message", "line"),
    [
        ("* nothing\n", "no .model card", None),
        (CARD + CARD.replace("TAG_1", "TAG_2"), "TAG_1 .*TAG_2", 7),
        (CARD.replace("npn", "D"), "kind D, NPN or PNP is wanted", 2),
        (CARD + ".control\n", "only one .model card", 6),
        ("R1 a b 1\n" + CARD, 'found "R1 a b 1"', 1),
        (".model x\n", "only one .model card", 1),
        (".model x npn(is=1e-14\n", "not a list of name=value", 1),
        (".model x npn(is=1e-14) R1 a b 1\n", "not a list of name=value", 1),
        (".model x npn is 3\n", "not a list of name=value", 1),
        ("+ x\n", "continuation", 1),
    ],
)
def test_model_file_with_anything_else_is_refused(tmp_path, text, message, line):
    file = tmp_path / "tag.lib"
    file.write_text(text)
    with pytest.raises(NetlistError, match=message) as caught:
        read_model_card(file, "switching", ("NPN", "PNP"))
    assert (caught.value.file, caught.value.line) == (file, line)


def test_long_faulty_card_is_refused_at_once(tmp_path):
    file = tmp_path / "tag.lib"
    file.write_text(".model x npn(" + "a=b" * 20_000 + ")\n")
    with pytest.raises(NetlistError, match="name=value"):
        read_model_card(file, "switching", ("NPN",))


def test_nearest_name_ignores_case_and_distant_names():
    assert nearest_name("LIFETME", ["lifetime", "width"]) == "lifetime"
    assert nearest_name("zzz", ["lifetime", "width"]) is None


def test_two_places_for_models_of_different_kinds(tmp_path):
    part = load_catalogue().find("driver", "complementary_follower")
    places = {place.name: place.kinds for place in part.model.places}
    assert places == {"upper": ("NPN",), "lower": ("PNP",)}
    file = tmp_path / "pair.lib"
    file.write_text(".model Q1 PNP(bf=50)\n.model Q2 NPN(bf=90)\n")
    assert read_model_cards(file, places) == ".model upper NPN(bf=90)\n.model lower PNP(bf=50)"
    file.write_text(".model Q1 PNP(bf=50)\n")
    assert read_model_cards(file, places) == ".model lower PNP(bf=50)"
    file.write_text(".model Q1 PNP(bf=50)\n.model Q2 PNP(bf=90)\n")
    with pytest.raises(NetlistError, match=r"2 \.model cards") as caught:
        read_model_cards(file, places)
    assert caught.value.line == 2
    faulty = DRIVER.replace("* model: NPN PNP | switching", "* model: NPN | switching\n* model: NPN | other")
    with pytest.raises(NetlistError, match="different kinds"):
        read_part(write(tmp_path, faulty))


FOREIGN = """\
* invented diode in a package
.model chip D(is=1e-14 tt=60n
+ cjo=0.4p)
.SUBCKT WT7 1 2 PARAMS: L = 0.6n
L1 1 3 {L}
D1 2 3 chip
.ENDS WT7
"""


def test_subcircuit_without_header_becomes_a_junction(tmp_path):
    file = tmp_path / "wt7.lib"
    file.write_text(FOREIGN)
    part = read_foreign_junction(file, "wt7", ["k", "a"], "tag")
    assert (part.role, part.terminals, part.settings) == ("junction", ("a", "k"), {})
    assert part.body.splitlines()[:3] == [".subckt tag a k", "X1 k a wt7", ".model chip D(is=1e-14 tt=60n cjo=0.4p)"]
    assert [probe.terms for probe in part.probes] == [((1.0, "v(k)"), (-1.0, "v(a)"))]


@pytest.mark.parametrize(
    ("old", "new", "terminals", "message"),
    [
        ("", "", ["a", "k", "k"], "terminals of a junction"),
        ("", "", ["c", "b", "e"], "has 2 nodes"),
        ("WT7", "WT8", ["a", "k"], "did you mean WT8"),
        ("D1 2 3 chip", ".include chip.lib", ["a", "k"], "reads another file"),
        (".ENDS WT7", "", ["a", "k"], "no .ends"),
        (".ENDS WT7", ".ENDS\nR1 1 2 5", ["a", "k"], "outside its subcircuits"),
    ],
)
def test_subcircuit_that_cannot_be_a_junction_is_refused(tmp_path, old, new, terminals, message):
    file = tmp_path / "wt7.lib"
    file.write_text(FOREIGN.replace(old, new) if old else FOREIGN)
    with pytest.raises(NetlistError, match=message) as caught:
        read_foreign_junction(file, "WT7", terminals, "tag")
    assert caught.value.file == file
