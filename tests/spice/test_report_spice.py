"""A real run with every file it can write. Outside reference: the hashes of the decks that stand beside the page."""

import hashlib
from pathlib import Path

from transim.cli import main

EXAMPLE = Path(__file__).parents[2] / "examples" / "commutator_bjt.toml"


def test_a_run_writes_figures_and_page(tmp_path, capsys):
    out = tmp_path / "arm"
    words = ["run", str(EXAMPLE), "--driver", "gate", "--out", str(out), "--figures", str(out / "figures")]
    status = main([*words, "--report", str(out / "report.html")])
    assert (status, capsys.readouterr().err) == (0, "")
    page = (out / "report.html").read_text(encoding="utf-8")
    decks = list((out / "gate").glob("*.cir"))
    assert len(decks) >= 5
    for deck in decks:
        assert hashlib.sha256(deck.read_bytes()).hexdigest() in page
    figures = {file.stem for file in (out / "figures" / "gate").glob("*.svg")}
    assert figures == {"cycle", "envelope_30MHz", "envelope_100MHz", "leakage", "spectrum"}
    assert {file.stem for file in (out / "figures").glob("*.png")} >= {"drivers_30MHz", "drivers_100MHz", "static"}
    assert "figures/gate/cycle.png" in (out / "files.txt").read_text(encoding="utf-8")
