"""Decks are stored text: the same design gives the same deck, byte for byte.

Outside reference: the stored decks, which run in plain ngspice by themselves (``ngspice -b``) and were read by a
person. ``pytest tests/decks --snapshot-update`` stores them anew after a wanted change; read the difference before it
is kept.
"""

import re
import shutil
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st
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


@settings(deadline=None)
@given(st.floats(1e-8, 1e-4), st.floats(1.5, 15.0), st.floats(1e-12, 1e-9), st.integers(1, 5))
def test_no_run_reaches_the_begin_of_the_next_pulse(on_for, ratio, edge, pulses):
    """As ngspice reads the numbers: a step of rounding's length between that and the end finds no solution."""
    design = read_design(DESIGN)
    times = {"on_for": on_for, "period": ratio * on_for, "edge": edge, "pulses": pulses}
    design = design.model_copy(update={"control": design.control.model_copy(update=times)})
    text = case_decks(design, design.drivers[0], 25.0)[1].text
    (pulse,) = re.findall(r"^Vcontrol .* PULSE\((.*)\)$", text, re.MULTILINE)
    delay, period = float(pulse.split()[2]), float(pulse.split()[6])
    (stop,) = re.findall(r"^\.tran \S+ (\S+) ", text, re.MULTILINE)
    assert float(stop) < delay + pulses * period - 1e-10 * on_for


def test_decks_are_plain_lines():
    for text in written(DESIGN).values():
        assert text.endswith("\n.end\n")
        assert "\r" not in text
        assert text.isascii()
        assert not any(line.endswith(" ") for line in text.splitlines())
