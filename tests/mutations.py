"""Valid inputs of every kind with one mutation each, as hypothesis strategies: design files, parts, raw files, records.

Outside reference: none; a mutation is what an editor, a disk or a stranger does to a file.
"""

from __future__ import annotations

import functools
from pathlib import Path

import numpy as np
from hypothesis import strategies as st

from transim.engine.rawfile import Plot, write_raw

ROOT = Path(__file__).parents[1]
DESIGNS = tuple(sorted((ROOT / "examples").glob("*.toml")))
PARTS = tuple(sorted((ROOT / "netlists").rglob("*.cir")))

#: What a line or a value of a text file may be replaced by.
ODD = (
    "", " ", "0", "-1", "1e999", "-1e-400", "nan", "inf", "true", "[]", "{}", '""', '"0 s"', '"1e400 V"', '"-5 ohm"',
    '"1 parsec"', '"2 ns\\n.control"', '"\\u2028"', '"' + "x" * 300 + '"', "[[[[", "]", "=", '"', "'''", "\\", "\t", "#",
    "1979-05-27", '["1 V", 2, []]', "{ max = 3 }", "\u00b5", "\u202e", "a.b.c = 1", "[switch]", "[driver]", '[""]',
    "9" * 400, "0x10", '"10 MHz" .. "20 MHz"', '"../../../etc/passwd"', '"/dev/zero"', '"."', '"a/../b\\u0000"',
    ".", ".model", ".subckt", ".ends", "X1", "x=3", "X1 =", "X1 a=2", "R1", "+", "* key: value", "* slot: a | b | c", ".model d",
    ".subckt a", "B1 a k v=", "D1 a k", "|", "1 s .. 0 s", "> .. <", ",", ";;;;", "nan,nan", "1;2;3", "1,5",
)  # fmt: skip


def _pick(draw: st.DrawFn, values: tuple[str, ...]) -> str:
    return draw(st.sampled_from(values))


@st.composite
def mutated_text(draw: st.DrawFn, text: str) -> str:
    """Give a text with one mutation: of a line, of a value after its =, of some characters, or of its order."""
    lines = text.split("\n")
    place = draw(st.integers(0, len(lines) - 1))
    kind = draw(st.sampled_from(("drop", "double", "swap", "value", "line", "characters", "cut", "insert", "name")))
    if kind == "drop":
        del lines[place]
    elif kind == "double":
        lines.insert(place, lines[place])
    elif kind == "swap":
        other = draw(st.integers(0, len(lines) - 1))
        lines[place], lines[other] = lines[other], lines[place]
    elif kind == "value":
        head, sign, _ = lines[place].partition("=")
        lines[place] = f"{head}{sign or ':'} {_pick(draw, ODD)}"
    elif kind == "line":
        lines[place] = draw(st.one_of(st.sampled_from(ODD), st.text(max_size=40)))
    elif kind == "insert":
        lines.insert(place, draw(st.one_of(st.sampled_from(ODD), st.text(max_size=40))))
    elif kind == "name":
        words = lines[place].split(" ")
        word = draw(st.integers(0, len(words) - 1))
        words[word] = draw(st.one_of(st.sampled_from(ODD), st.text(max_size=12)))
        lines[place] = " ".join(words)
    else:
        whole = "\n".join(lines)
        start = draw(st.integers(0, len(whole)))
        if kind == "cut":
            return whole[:start]
        stop = min(len(whole), start + draw(st.integers(0, 6)))
        return whole[:start] + draw(st.text(max_size=6)) + whole[stop:]
    return "\n".join(lines)


@functools.cache
def _text(file: Path) -> str:
    return file.read_text(encoding="utf-8")


def mutated_designs() -> st.SearchStrategy[str]:
    """Give one of the examples with one mutation."""
    return st.sampled_from(DESIGNS).flatmap(lambda file: mutated_text(_text(file)))


@st.composite
def mutated_parts(draw: st.DrawFn) -> tuple[str, str]:
    """Give the file name of a shipped part, and its text with one mutation."""
    file = draw(st.sampled_from(PARTS))
    return file.name, draw(mutated_text(_text(file)))


def _plots() -> tuple[tuple[Plot, ...], ...]:
    time = np.linspace(0.0, 1e-6, 7)
    real = np.column_stack([time, np.exp(-time / 1e-6), time * 0.0])
    transient = Plot(
        "t", "Transient Analysis", "real", ("time", "v(out)", "i(v1)"), ("time", "voltage", "current"), real, True
    )
    lines = np.array([[1e6 + 0j, 0.5 - 0.5j], [1e7 + 0j, 0.1 - 0.3j]])
    ac = Plot("t", "AC Analysis", "complex", ("frequency", "v(out)"), ("frequency", "voltage"), lines, True)
    cut = Plot("t", "Transient Analysis", "real", transient.names, transient.kinds, real, False)
    return (transient,), (ac,), (transient, ac), (cut,), (cut, ac)


@functools.cache
def raw_files(folder: Path) -> tuple[bytes, ...]:
    """Return valid raw files, binary and text."""
    found = []
    for plots in _plots():
        file = folder / "valid.raw"
        write_raw(file, plots)
        found.append(file.read_bytes())
    rows = "".join(f"{k}\t{1e-7 * k}\n\t{0.5 * k}\n" for k in range(4))
    found.append(
        b"Title: t\nDate: now\nPlotname: Transient Analysis\nFlags: real\nNo. Variables: 2\nNo. Points: 4\n"
        b"Variables:\n\t0\ttime\ttime\n\t1\tv(out)\tvoltage\nValues:\n" + rows.encode()
    )
    return tuple(found)


#: Pieces of a raw file that a mutation puts in place of others.
PIECES = (
    b"", b"\n", b"\0" * 8, b"\xff" * 8, b"Title: x\n", b"Binary:\n", b"Values:\n", b"No. Points: 0\n",
    b"No. Points: 99999999999\n", b"No. Points: -1\n", b"No. Variables: 0\n", b"No. Variables: 4000000000\n",
    b"Flags: complex\n", b"Flags: real unpadded\n", b"Variables:\n", b"1e999", b",", b"nan",
)  # fmt: skip


@st.composite
def mutated_raw(draw: st.DrawFn, folder: Path) -> bytes:
    """Give a raw file with one mutation: cut short, some bytes replaced, a header line replaced or doubled."""
    content = draw(st.sampled_from(raw_files(folder)))
    start = draw(st.integers(0, len(content)))
    kind = draw(st.sampled_from(("cut", "bytes", "piece", "header", "double", "grown")))
    if kind == "cut":
        return content[:start]
    if kind == "bytes":
        return content[:start] + draw(st.binary(max_size=12)) + content[start + draw(st.integers(0, 12)) :]
    if kind == "piece":
        return content[:start] + draw(st.sampled_from(PIECES)) + content[start:]
    if kind == "grown":
        return content + draw(st.binary(max_size=40))
    lines = content.split(b"\n")
    place = draw(st.integers(0, min(10, len(lines) - 1)))
    if kind == "double":
        lines.insert(place, lines[place])
    else:
        lines[place] = draw(st.sampled_from(PIECES)).rstrip(b"\n")
    return b"\n".join(lines)


def record_text() -> str:
    """Return a record as an oscilloscope writes it: time, command and detector, one pulse."""
    rows = ["Model,scope", "Sample Interval,2e-08,s", "TIME,CH1,CH2"]
    for k in range(300):
        time = 2e-8 * (k - 50)
        command = 3.3 if 0.0 < time < 3e-6 else 0.0
        rf = 0.5 * (1.0 - np.exp(-time / 2e-7)) if 0.0 < time < 3e-6 else 0.5 * np.exp(-(time - 3e-6) / 2e-7) if time > 0 else 0
        rows.append(f"{time:.4e},{command:.3f},{rf:.5f}")
    return "\n".join(rows) + "\n"


def mutated_records() -> st.SearchStrategy[str]:
    """Give a record with one mutation."""
    return mutated_text(record_text())
