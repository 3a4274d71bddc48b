"""Records that a script without any part of the program has written."""

import importlib.util
import sys
from pathlib import Path

import pytest


@pytest.fixture(scope="session")
def synthetic():
    """Return the script that makes records."""
    spec = importlib.util.spec_from_file_location("synthesise", Path(__file__).with_name("synthesise.py"))
    module = importlib.util.module_from_spec(spec)
    sys.modules["synthesise"] = module
    spec.loader.exec_module(module)
    return module


@pytest.fixture
def save(tmp_path):
    """Return a function that writes a record as an oscilloscope does."""

    def write(record, name="scope.csv", separator=",", decimal=".", leakage=None):
        columns = [record.time, record.command, record.rf] + ([] if leakage is None else [leakage])
        names = ["TIME", "CH1", "CH2", "CH3"][: len(columns)]
        lines = ["Model,none", separator.join(names), separator.join(["s", "V", "V", "V"][: len(columns)])]
        rows = (separator.join(f"{x:.9e}".replace(".", decimal) for x in row) for row in zip(*columns, strict=True))
        file = tmp_path / name
        file.write_text("\n".join([*lines, *rows]) + "\n")
        return file

    return write
