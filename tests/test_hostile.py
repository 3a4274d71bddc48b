"""Foreign netlists that try to act: each is refused with file and line before any engine starts, its canaries untouched.

Outside reference: none for the refusals, which are the project's own rule; that a deck may run commands, read and write
files is in the ngspice manual, and tests/spice/test_hostile_decks.py shows which of these files do so.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from transim.cli import main

HOSTILE = sorted((Path(__file__).parent / "hostile").glob("*.cir"))
SECRET = "* heard on the mast: 173.7\n"

DESIGN = """\
title = "hostile"
parts = "parts"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "2 us"
period = "6 us"
[carrier]
frequency = "30 MHz"
[switch]
path = "series_single"
junction = "foreign"
[junction.foreign]
part = "{part}"
{model}
[driver.gate]
part = "resistor_feed"
"""


@pytest.fixture
def yard(tmp_path):
    """Give a folder with a secret, and a stand-in for ngspice that leaves a mark when it is started."""
    (tmp_path / "secret").write_text(SECRET)
    engine = tmp_path / "ngspice"
    engine.write_text(f"#!/bin/sh\ntouch {tmp_path}/started\n")
    engine.chmod(0o755)
    (tmp_path / "design" / "parts").mkdir(parents=True)
    return tmp_path


def design_of(yard, file):
    """Write the design that uses a hostile file as part or as model card; return it and the hostile file's place."""
    text = file.read_text(encoding="utf-8").replace("@CANARY@", str(yard))
    parts = yard / "design" / "parts"
    if text.startswith("* transim part"):
        place, part, model = parts / file.name, file.stem, ""
    else:
        place, part, model = yard / "design" / file.name, "junction_diode", f'model = "{file.name}"'
    place.write_text(text, encoding="utf-8")
    # a folder of parts wants at least one
    (parts / "calm.cir").write_text(
        "* transim part\n* name: calm\n* role: junction\n* terminals: a k\n* summary: calm\n"
        ".subckt calm a k\nR1 a k 1\n.ends\n"
    )
    design = yard / "design" / "design.toml"
    design.write_text(DESIGN.format(part=part, model=model), encoding="utf-8")
    return design, place


def test_there_are_hostile_files():
    assert len(HOSTILE) >= 30


@pytest.mark.parametrize("file", HOSTILE, ids=lambda file: file.stem)
def test_hostile_file_is_refused_before_any_engine_starts(yard, capsys, file):
    design, place = design_of(yard, file)
    before = (yard / "secret").stat()
    status = main(["run", str(design), "--ngspice", str(yard / "ngspice"), "--out", str(yard / "out")])
    said = capsys.readouterr().err
    assert status == 2
    assert re.search(rf"{re.escape(str(place))}:\d+: ", said), said
    assert SECRET.strip() not in said
    assert not (yard / "written").exists()
    assert not (yard / "started").exists()
    assert not (yard / "out").exists()
    assert (yard / "secret").read_text() == SECRET
    assert (yard / "secret").stat().st_mtime_ns == before.st_mtime_ns


def test_a_calm_part_reaches_the_engine(yard):
    """The stand-in does start where nothing is refused, so the tests above can fail."""
    design, _ = design_of(yard, HOSTILE[0])
    design.write_text(DESIGN.format(part="calm", model=""))
    assert main(["run", str(design), "--ngspice", str(yard / "ngspice")]) == 3
    assert (yard / "started").exists()


@pytest.mark.parametrize("name", ["a\n.control\nshell touch written\n.endc\n.toml", "a\n*#shell touch written\n.toml"])
def test_a_file_name_brings_no_line_into_a_deck(yard, monkeypatch, name):
    monkeypatch.chdir(yard)
    design, _ = design_of(yard, HOSTILE[0])
    text = DESIGN.format(part="calm", model="")
    odd = design.with_name(name)
    odd.write_text(text)
    assert main(["deck", str(odd), "--out", str(yard / "decks")]) == 0
    for deck in (yard / "decks").rglob("*.cir"):
        lines = deck.read_text().splitlines()
        assert not any("touch written" in line and not line.startswith("* design: ") for line in lines), deck


@pytest.mark.parametrize(
    "value",
    ['"1 ns\\n.control\\nshell touch written\\n.endc"', '"{shell}"', '"1e-6 k=2"', '"1 us ; x"'],
)
def test_a_parameter_value_brings_no_line_into_a_deck(yard, capsys, value):
    design, _ = design_of(yard, HOSTILE[0])
    design.write_text(DESIGN.format(part="pin_lumped", model=f"lifetime = {value}"))
    assert main(["deck", str(design), "--out", str(yard / "decks")]) == 2
    assert "junction.foreign.lifetime" in capsys.readouterr().err


@pytest.mark.parametrize("title", ['"x\\n.control"', '"x\\u2028.control"', '"x\\r*#shell"'])
def test_a_title_brings_no_line_into_a_deck(yard, capsys, title):
    design, _ = design_of(yard, HOSTILE[0])
    text = DESIGN.format(part="pin_lumped", model="")
    design.write_text(text.replace('title = "hostile"', f"title = {title}"))
    assert main(["deck", str(design), "--out", str(yard / "decks")]) == 2
    assert "title" in capsys.readouterr().err


@pytest.mark.parametrize("name", ["n" * 180 + "/" + "n" * 15, "parts", "missing.lib", "../secret", "/dev/zero"])
def test_model_file_that_cannot_be_used_is_named(yard, capsys, name):
    design, _ = design_of(yard, HOSTILE[0])
    design.write_text(DESIGN.format(part="junction_diode", model=f'model = "{name}"'))
    assert main(["check", str(design)]) == 2
    said = capsys.readouterr().err
    assert said.startswith(f"error: {design}:")
    assert "unexpected" not in said
