"""Files with one mutation each: an error with its place or a correct result, and never anything else.

Outside reference: none; tests/bench_fuzz.py does the same with some thousands of files.
"""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.mutations import (
    DESIGNS,
    PARTS,
    mutated_designs,
    mutated_parts,
    mutated_raw,
    mutated_records,
    record_text,
)
from tests.outcomes import design_outcome, part_outcome, raw_outcome, record_outcome

FEW = settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow])


@FEW
@given(text=mutated_designs())
def test_mutated_design_is_refused_with_its_place_or_read(tmp_path: Path, text: str) -> None:
    assert design_outcome(tmp_path, text) in ("read", "refused")


@FEW
@given(part=mutated_parts())
def test_mutated_part_is_refused_with_its_place_or_read(tmp_path: Path, part: tuple[str, str]) -> None:
    assert part_outcome(tmp_path, *part) in ("read", "refused")


@pytest.fixture(scope="module")
def raws(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("raws")


@FEW
@given(data=st.data())
def test_mutated_raw_file_is_refused_or_read(raws: Path, data: st.DataObject) -> None:
    assert raw_outcome(raws, data.draw(mutated_raw(raws))) in ("read", "refused")


@FEW
@given(text=mutated_records())
def test_mutated_record_is_refused_with_its_place_or_measured(tmp_path: Path, text: str) -> None:
    assert record_outcome(tmp_path, text) in ("read", "refused")


def test_what_is_not_mutated_is_read(tmp_path: Path) -> None:
    for design in DESIGNS:
        assert design_outcome(tmp_path, design.read_text()) == "read"
    for part in PARTS:
        assert part_outcome(tmp_path, part.name, part.read_text()) == "read"
    assert record_outcome(tmp_path, record_text()) == "read"


@pytest.mark.parametrize("card", ["x=3", "X1", "X1 a=2", "Xj =", ".model", ".model d", ".subckt"])
def test_cards_that_are_cut_short_are_refused(tmp_path: Path, card: str) -> None:
    head = "* transim part\n* name: mast\n* role: junction\n* terminals: a k\n* summary: s\n.subckt mast a k\nR1 a k 1\n"
    assert part_outcome(tmp_path, "mast.cir", f"{head}{card}\n.ends\n") == "refused"
