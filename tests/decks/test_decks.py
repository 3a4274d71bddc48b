"""Decks are stored text: the same design gives the same deck, byte for byte.

Outside reference: the stored decks, which run in plain ngspice by themselves (``ngspice -b``) and were read by a
person. ``pytest tests/decks --snapshot-update`` stores them anew after a wanted change; read the difference before it
is kept.
"""

import shutil
from pathlib import Path

from syrupy.extensions.single_file import SingleFileSnapshotExtension, WriteMode

from transim.design.toml import read_design
from transim.study.decks import carrier_decks, case_decks

DESIGN = Path(__file__).with_name("arm.toml")


class DeckFile(SingleFileSnapshotExtension):
    """One .cir file for each deck."""

    _write_mode = WriteMode.TEXT
    file_extension = "cir"


def written(file):
    design = read_design(file)
    (driver,) = design.drivers
    temperature = design.environment.temperature[0]
    decks = [
        *case_decks(design, driver, temperature),
        *carrier_decks(design, driver, temperature, design.carrier.frequency[0], design.carrier.level[0])[0],
    ]
    return {deck.name: deck.text for deck in decks}


NAMES = ("static", "video", "carrier_0", "carrier_90", "carrier_quiet")


def test_decks_are_the_stored_ones(snapshot):
    for name, text in written(DESIGN).items():
        assert text == snapshot(name=name, extension_class=DeckFile)


def test_all_decks_are_stored():
    assert set(written(DESIGN)) == set(NAMES)


def test_where_the_design_lies_does_not_matter(tmp_path):
    copy = shutil.copy(DESIGN, tmp_path / DESIGN.name)
    assert written(Path(copy)) == written(DESIGN)


def test_decks_are_plain_lines():
    for text in written(DESIGN).values():
        assert text.endswith("\n.end\n")
        assert "\r" not in text
        assert text.isascii()
        assert not any(line.endswith(" ") for line in text.splitlines())
