"""What ngspice would do with the hostile files, were they let in: proof that the canaries of their test can die.

Outside reference: ngspice itself, on decks that take the files as they are.
"""

from __future__ import annotations

import contextlib
from pathlib import Path

import pytest

from transim.errors import EngineError

HOSTILE = Path(__file__).parents[1] / "hostile"
#: Of the files that write, those which ngspice 39 obeys inside a subcircuit.
WRITING = ("control_block", "control_indented", "comment_command", "comment_command_indented", "early_end")


@pytest.mark.parametrize("name", WRITING)
def test_ngspice_would_obey(engine, tmp_path, name):
    body = (HOSTILE / f"{name}.cir").read_text(encoding="utf-8").replace("@CANARY@", str(tmp_path))
    deck = f"* unguarded\n{body}\nX1 1 0 {name}\nV1 1 0 1\n.op\n.end\n"
    # the deck may fail after its command has run
    with contextlib.suppress(EngineError):
        engine.run(deck, folder=tmp_path / "run")
    assert (tmp_path / "written").exists()
