"""What ngspice prints for ``listing expand`` is what the tests of the reader have in store, and it is read as it is meant.

Outside reference: ngspice, on tests/listing/netlist.cir.
"""

from pathlib import Path

import pytest

from transim.circuit.elements import listing_lines, read_listing

LISTING = Path(__file__).parents[1] / "listing"


@pytest.fixture(scope="module")
def log(engine):
    return engine.run((LISTING / "netlist.cir").read_text(), name="listing", writes_raw=True).log


def test_ngspice_still_prints_the_stored_listing(log):
    stored = (LISTING / "printed.txt").read_text()
    assert [line.split() for line in listing_lines(log)] == [line.split() for line in listing_lines(stored)]


def test_everything_in_it_is_read(log):
    circuit = read_listing(log)
    assert circuit.refused == ()
    kinds = {part.name[0] for part in (*circuit.elements, *circuit.couplings, *circuit.devices, *circuit.behaviourals)}
    assert kinds == set("rlckviefghdqb")


@pytest.mark.parametrize(
    ("lines", "name", "words"),
    [
        ("M1 a b 0 0 mm\n.model mm nmos", "M1", "MOSFET"),
        ("J1 a b 0 jm\n.model jm njf", "J1", "JFET"),
        ("O1 a 0 b 0 om\n.model om ltra(r=0.1 l=9n c=3.6p len=1)", "O1", "lossy transmission line"),
        ("S1 a b b 0 sw\n.model sw sw(vt=1)", "S1", "voltage-controlled switch"),
        ("E1 b 0 poly(1) a 0 1 2 3", "A$POLY$E1", "code model"),
        ("R9 a b 10 tc1=1e-3", "R9", "tc1"),
        ("R9 a b r='100*(1+v(a)*0)' tc1=1e-3", "BR9", "tc1"),
        ("B1 a b i = ddt(v(a))", "B1", "ddt"),
    ],
)
def test_what_has_no_small_signal_form_is_refused_by_name(engine, lines, name, words):
    deck = (
        f"* refused\nV1 a 0 1\nR1 a b 50\nR2 b 0 50\n{lines}\n.control\nlisting expand\nop\nwrite refused.raw v(a)\n"
        "quit 0\n.endc\n.end\n"
    )
    (refusal,) = read_listing(engine.run(deck, name="refused", writes_raw=True).log).refused
    assert name in str(refusal)
    assert words in str(refusal)
