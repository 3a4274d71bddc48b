"""A path of the user's own with a line in it: envelope (ringing) and carrier-resolved analysis agree."""

from __future__ import annotations

import pytest

from transim.design.toml import read_design
from transim.engine.ngspice import find_engine
from transim.parts.catalogue import shipped_folder
from transim.study.simulate import simulate

DESIGN = """
title = "a line before the junction"
parts = "own"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "0.6 us"
period = "1.2 us"
[carrier]
frequency = "400 MHz"
level = "-30 dBm"
[switch]
path = "lined_single"
junction = "j"
dc_block = "100 pF"
bypass = "22 pF"
[junction.j]
part = "pin_lumped"
lifetime = "300 ns"
width = "20 um"
transit_time = "1 ns"
[driver.stage]
part = "push_pull_speedup"
speedup_cap = "100 pF"
[numerics]
solution = "ringing"
"""


def test_a_line_of_one_period_is_in_all_analyses(tmp_path):
    text = (shipped_folder() / "paths" / "series_single.cir").read_text()
    text = text.replace("series_single", "lined_single")
    text = text.replace("Cin p1 a {dc_block}", "T1 p1 0 x 0 Z0=50 TD={line_delay}\nCin x a {dc_block}")
    text = text.replace("* note:", "* parameter: line_delay | s | 2.5 ns | 1 ps .. 1 us | delay of the line\n* note:", 1)
    text = text.replace(".subckt lined_single p1 p2 bias", ".subckt lined_single p1 p2 bias line_delay=2.5e-9")
    folder = tmp_path / "own" / "paths"
    folder.mkdir(parents=True)
    (folder / "lined_single.cir").write_text(text)
    (tmp_path / "design.toml").write_text(DESIGN)
    design = read_design(tmp_path / "design.toml")
    envelope, carrier = simulate(design, design.drivers[0], 25.0, find_engine(), ["envelope", "carrier"]).results
    assert not envelope.faults
    assert envelope.method.startswith("ringing")
    for name in ("on_time", "off_time"):
        assert envelope.figures[name].value == pytest.approx(carrier.figures[name].value, rel=0.01)
    assert carrier.figures["level_isolation"].value == pytest.approx(envelope.figures["isolation"].value, abs=0.3)
