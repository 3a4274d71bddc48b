"""Paths of several throws: what the header may say, how they are fed, and how long throws overlap."""

import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.circuit.assemble import assemble
from transim.circuit.decks import Origin, Tone, carrier_deck, static_deck
from transim.circuit.timeline import timeline_of
from transim.design.toml import read_design
from transim.errors import MeasurementError, NetlistError, TopologyError
from transim.measure.definitions import Definitions, Timing
from transim.measure.overlap import throw_gap, throw_overlap
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.parts.header import read_part
from transim.parts.part import Throw
from transim.report.throws import throw_sentences

PATH = """\
* transim part
* name: fork
* role: path
* terminals: p1 p2 p3 b1 b2
* ports: p1 p2 p3
* bias: b1 b2
* inverted: b2
* throw: left | p1 p2 | high | b1
* throw: right | p1 p3 | low | b2
* slot: junction | a k | both series junctions
* summary: a common port and two arms
.subckt fork p1 p2 p3 b1 b2
Cin p1 m 1e-9
Rm m 0 1000
X1 a1 m junction
X2 a2 m junction
C1 a1 p2 1e-9
C2 a2 p3 1e-9
R1 b1 a1 100
R2 b2 a2 100
.ends
"""

DESIGN = """\
title = "a fork"
parts = "parts"
[control]
low = "0.5 V"
high = "3.3 V"
edge = "2 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = "100 MHz"
impedance = "50 ohm"
[switch]
path = "fork"
junction = "pin"
[junction.pin]
part = "pin_lumped"
[driver.one]
part = "push_pull_speedup"
"""


def write(folder, text=PATH):
    (folder / "parts").mkdir(exist_ok=True)
    file = folder / "parts" / "fork.cir"
    file.write_text(text)
    return file


def design_in(folder, text=DESIGN):
    write(folder)
    file = folder / "design.toml"
    file.write_text(text)
    return read_design(file)


def test_throws_are_read(tmp_path):
    part = read_part(write(tmp_path))
    left, right = part.throws
    assert left == Throw("left", ("p1", "p2"), True, "b1")
    assert right == Throw("right", ("p1", "p3"), False, "b2")
    assert part.inverted == ("b2",)
    # both arms pass under forward bias: the second driver has the inverted command
    assert part.forward(left)
    assert part.forward(right)


@pytest.mark.parametrize(
    ("old", "new", "message", "line"),
    [
        ("* throw: left | p1 p2 | high | b1", "* throw: left | p1 p2 | high", "write", 8),
        ("| p1 p2 | high", "| p1 p4 | high", '"throw" names two of the ports p1 p2 p3', 8),
        ("| p1 p2 | high", "| p1 | high", '"throw" names two of the ports', 8),
        ("| high | b1", "| up | b1", "high or low", 8),
        ("| high | b1", "| high | b3", "one of b1 b2", 8),
        ("* throw: right", "* throw: left", 'throw "left" stands twice', 9),
        ("* inverted: b2", "* inverted: b3", "out of b1 b2", 7),
        ("* inverted: b2", "* passes: biased", "exclude each other", 7),
        ("* inverted: b2", "* through: p1 p2", "exclude each other", 7),
    ],
)
def test_header_faults_are_named_with_their_line(tmp_path, old, new, message, line):
    with pytest.raises(NetlistError, match=message) as found:
        read_part(write(tmp_path, PATH.replace(old, new)))
    assert found.value.line == line


def test_several_bias_entries_need_throws(tmp_path):
    text = PATH.replace("* throw: left | p1 p2 | high | b1\n* throw: right | p1 p3 | low | b2\n", "* passes: biased\n")
    with pytest.raises(NetlistError, match="2 bias entries states its ways"):
        read_part(write(tmp_path, text))


def test_each_bias_entry_has_a_driver(tmp_path):
    design = design_in(tmp_path)
    netlist = assemble(design, design.drivers[0])
    first, second = netlist.feeds
    assert (first.entry, first.node, first.ammeter, first.inverted) == ("b1", "drive", "vdrive", False)
    assert (second.entry, second.node, second.ammeter, second.inverted) == ("b2", "drive2", "vdrive2", True)
    assert [(throw.name, throw.through, throw.passes_high, throw.forward) for throw in netlist.throws] == [
        ("left", (0, 1), True, True),
        ("right", (0, 2), False, True),
    ]
    lines = netlist.text.splitlines()
    drivers = [line.split() for line in lines if line.lower().startswith("xdriver")]
    assert [words[1:3] for words in drivers] == [["ctl", "drive"], ["ctl_inverse", "drive2"]]
    # mirrored about the middle of its levels: 0.5 V becomes 3.3 V
    assert "Vmirror mirror 0 3.8" in lines
    assert "Einverse ctl_inverse mirror ctl 0 -1" in lines
    # rails are shared
    assert sum(line.startswith("Vsupply_vp ") for line in lines) == 1


def test_a_single_way_has_no_name_and_no_mirror(tmp_path):
    design = design_in(tmp_path, DESIGN.replace('"fork"', '"series_pair"'))
    netlist = assemble(design, design.drivers[0])
    assert [throw.name for throw in netlist.throws] == [""]
    assert "mirror" not in netlist.text.lower()


def test_a_holding_current_has_no_place_in_two_entries(tmp_path):
    with pytest.raises(TopologyError, match="2 bias entries"):
        assemble(design_in(tmp_path), None)


def test_decks_excite_every_port_and_save_both_drivers(tmp_path):
    design = design_in(tmp_path)
    netlist, origin = assemble(design, design.drivers[0]), Origin("t", "f", "d", 25.0)
    static = static_deck(netlist, design.control, design.carrier.frequency, design.numerics, origin).text
    assert [f"alter vport_p{k} acmag = 1" in static for k in (1, 2, 3)] == [True] * 3
    tone = Tone(1e8, 0.1, 0.0, 0)
    saved = carrier_deck(netlist, design.control, timeline_of(design), design.numerics, origin, tone).text
    (card,) = (line for line in saved.splitlines() if line.startswith(".save"))
    assert {"v(b1)", "v(b2)", "i(vdrive)", "i(vdrive2)"} <= set(card.split())


def test_sentences_say_who_feeds_what(tmp_path):
    text = "; ".join(throw_sentences(read_part(write(tmp_path))))
    assert "throw left, from p1 to p2, passes while the command is high: forward bias at b1" in text
    assert "throw right, from p1 to p3, passes while the command is low: forward bias at b2" in text
    assert "b2 (inverted command)" in text


def ramp(start, stop, low=0.0, high=1.0):
    """Return a level that goes from low to high between two instants [ns]."""
    time = np.array([0.0, start, stop, 1000.0]) * 1e-9
    return Waveform(time, np.array([low, low, high, high]), "1")


def record(own, others, basis="voltage"):
    return Record(
        timing=Timing(on_edge=100e-9, off_edge=900e-9, edge=2e-9, start=0.0, stop=1e-6, period=2e-6),
        definitions=Definitions(basis=basis),
        carrier=1e8,
        impedance=50.0,
        biased_passes=True,
        envelope=Waveform(own.time, own.value * (0.6 + 0.3j), "1"),
        static_on=0.6 + 0.3j,
        other_throws=others,
    )


def test_make_before_break():
    # own passes 10 % at 210 ns, the other falls to 10 % at 290 ns
    found = record(ramp(200, 300), {"other": ramp(200, 300, 1.0, 0.0)})
    assert throw_overlap(found) == pytest.approx(80e-9)
    assert throw_gap(found) == 0.0


def test_break_before_make():
    # the other falls to 10 % at 190 ns, own passes it at 310 ns
    found = record(ramp(300, 400), {"other": ramp(100, 200, 1.0, 0.0)})
    assert throw_overlap(found) == 0.0
    assert throw_gap(found) == pytest.approx(120e-9)


def test_power_basis_counts_at_10_db():
    share = math.sqrt(0.1)
    found = record(ramp(200, 300), {"other": ramp(200, 300, 1.0, 0.0)}, "power")
    assert throw_overlap(found) == pytest.approx(100e-9 * (1.0 - 2.0 * share))


def test_the_other_throws_count_together():
    # one falls until 190 ns, another conducts from 210 to 390 ns: none does for 20 ns, two do from 310 to 390 ns
    bump = Waveform(np.array([0, 200, 300, 400, 1000]) * 1e-9, np.array([0.0, 0.0, 1.0, 0.0, 0.0]), "1")
    found = record(ramp(300, 400), {"first": ramp(100, 200, 1.0, 0.0), "second": bump})
    assert throw_gap(found) == pytest.approx(20e-9)
    assert throw_overlap(found) == pytest.approx(80e-9)


def test_overlap_needs_another_throw_that_breaks():
    with pytest.raises(MeasurementError, match="single way"):
        throw_overlap(record(ramp(200, 300), {}))
    with pytest.raises(MeasurementError, match="throw other does not fall below 10 %"):
        throw_gap(record(ramp(200, 300), {"other": ramp(200, 300, 1.0, 0.2)}))


@given(st.lists(st.floats(0.0, 1.0), min_size=8, max_size=8), st.lists(st.floats(0.0, 1.0), min_size=7, max_size=7))
def test_overlap_and_gap_agree_with_counting(own, other):
    # Monte Carlo in place of interval arithmetic: the same question asked at many instants
    time = np.linspace(0.0, 1e-6, 8)
    mine = Waveform(time, np.array(own), "1")
    theirs = Waveform(time, np.array([*other, 0.0]), "1")
    found = record(mine, {"other": theirs})
    start, stop = found.timing.on_window()
    instants = np.linspace(start, stop, 20001)
    a, b = (np.interp(instants, time, wave.value.real) > 0.1 for wave in (mine, theirs))
    if theirs.at(stop).real >= 0.1:
        return
    resolution = 40.0 * (stop - start) / 20000
    assert throw_overlap(found) == pytest.approx(np.mean(a & b) * (stop - start), abs=resolution)
    assert throw_gap(found) == pytest.approx(np.mean(~a & ~b) * (stop - start), abs=resolution)
