"""What becomes of a mutated file: read, or refused with its place; anything else raises.

Outside reference: none.
"""

from __future__ import annotations

import contextlib
import io
import json
import unittest.mock
from pathlib import Path

import numpy as np

from transim.bench.uncertainty import measure_cycle
from transim.cli import main
from transim.engine.rawfile import read_raw
from transim.errors import NetlistError, RawFileError
from transim.parts.header import read_part

#: What is missing has no line.
MISSING = ("this required table is missing", "no driver is given")


def _placed(errors: list[dict[str, object]], file: Path) -> None:
    assert errors, "an error without a record"
    for error in errors:
        assert error["message"], error
        assert "Traceback" not in str(error["message"])
        assert not str(error["message"]).startswith("unexpected "), error
        # the place is a field of its own, or begins the message where the whole file is meant
        assert str(file.parent) in f"{error['file']} {error['message']}", error
        if file.suffix == ".toml":
            assert error["line"] is not None or error["message"] in MISSING, error


def _status(words: list[str], file: Path, good: tuple[int, ...]) -> str:
    """Run a command; its document tells of the errors."""
    output, errors = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(output), contextlib.redirect_stderr(errors):
        status = main([*words, "--json", "-"])
    said = errors.getvalue()
    assert "Traceback" not in said, said
    document = json.loads(output.getvalue())
    if status in good and "errors" not in document:
        return "read"
    assert status in (2, 4), f"exit status {status}: {said}"
    _placed(document["errors"], file)
    return "refused"


def design_outcome(folder: Path, text: str) -> str:
    """Check a design file by the command `check`."""
    file = folder / "design.toml"
    file.write_text(text, encoding="utf-8", errors="surrogatepass", newline="")
    return _status(["check", str(file)], file, (0,))


def part_outcome(folder: Path, name: str, text: str) -> str:
    """Read a part file."""
    file = folder / name
    file.write_text(text, encoding="utf-8", errors="surrogatepass", newline="")
    try:
        part = read_part(file)
    except NetlistError as error:
        refused = error
    else:
        assert part.name == file.stem
        return "read"
    assert refused.file == file
    assert refused.message
    return "refused"


def raw_outcome(folder: Path, content: bytes) -> str:
    """Read a raw file; what is read is as large as it says."""
    file = folder / "mutated.raw"
    file.write_bytes(content)
    try:
        plots = read_raw(file)
    except RawFileError as error:
        message = error.message
        plots = None
    if plots is None:
        assert str(file) in message
        return "refused"
    for plot in plots:
        assert plot.data.shape[1] == len(plot.names)
        assert plot.data.nbytes <= 8 * len(content)
        assert np.iscomplexobj(plot.data) == ("complex" in plot.flags)
    return "read"


def record_outcome(folder: Path, text: str) -> str:
    """Measure a record, with fewer repetitions under noise than the command takes: they all go the same way."""
    file = folder / "record.csv"
    file.write_text(text, encoding="utf-8", errors="surrogatepass", newline="")
    words = ["measure", str(file), "--command", "CH1", "--rf", "CH2", "--detector", "linear", "--carrier", "100 MHz"]
    with unittest.mock.patch.dict(measure_cycle.__kwdefaults__, replicates=4):
        return _status([*words, "--period", "10 us"], file, (0,))


__all__ = ["design_outcome", "part_outcome", "raw_outcome", "record_outcome"]
