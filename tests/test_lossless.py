"""Lossless lines without breakpoints of their own: which cards get the setting."""

from __future__ import annotations

import pytest

from transim.circuit.elements import read_listing
from transim.circuit.lossless import without_breakpoints


@pytest.mark.parametrize(
    ("card", "written"),
    [
        ("T1 a 0 b 0 Z0=50 TD=1e-9", "T1 a 0 b 0 rel=2 Z0=50 TD=1e-9"),
        ("tline p1 0 x 0 z0={z} td={line_delay > 0 ? line_delay : 1}", "tline p1 0 x 0 rel=2 z0={z} td={line_delay > 0 ? line_delay : 1}"),
        ("T1 a 0 b 0\n+ Z0=50\n+ TD=1e-9", "T1 a 0 b 0 rel=2\n+ Z0=50\n+ TD=1e-9"),
    ],
)
def test_a_line_gets_the_setting(card, written):
    text = without_breakpoints(f"* a line\nR1 a 0 50\n{card}\nC1 b 0 1e-12\n")
    assert text == f"* a line\nR1 a 0 50\n{written}\nC1 b 0 1e-12\n"


@pytest.mark.parametrize(
    "card",
    [
        "T1 a 0 b 0 Z0=50 TD=1e-9 rel=0.5",
        "T1 a 0 b 0 Z0=50 TD=1e-9\n+ ABS = 1e9",
        "* T1 a 0 b 0 Z0=50 TD=1e-9",
        ".title a line to b and c",
        "R1 t 0 b 0",
    ],
)
def test_other_cards_stay(card):
    assert without_breakpoints(f"{card}\n.end\n") == f"{card}\n.end\n"


def test_the_setting_is_no_property_of_the_line():
    (plain,), (relaxed,) = (read_listing(f"1 : t1 a 0 b 0 {some}z0=75 td=2n\n").delays for some in ("", "rel=2 "))
    assert plain == relaxed
