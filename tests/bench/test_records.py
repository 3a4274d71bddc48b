"""Files as oscilloscopes write them: separators, decimal signs, headers, faults.

Outside reference: the numbers that the files were written from.
"""

import time

import numpy as np
import pytest

from transim.bench.channels import Columns, read_channels
from transim.bench.records import read_table
from transim.errors import RecordError

TIME = 2e-9 * np.arange(40)
COMMAND = np.where(np.arange(40) > 20, 3.25, 0.125)
HEADS = {
    "plain": ["t,ctl,rf"],
    "none": [],
    "model": ["Model,XY 12", "Firmware,1.2", "", "TIME,ctl,rf", "s,V,V"],
    "brackets": ["Time (s),ctl [V],rf [mV]"],
    "quoted": ['"time","ctl","rf"', '"s","V","V"'],
}


def write(tmp_path, lines, *, newline="\n", encoding="utf-8"):
    file = tmp_path / "scope.csv"
    file.write_bytes(newline.join([*lines, ""]).encode(encoding))
    return file


def rows(separator=",", decimal=".", tail=""):
    return [
        separator.join(f"{x:.6e}".replace(".", decimal) for x in row) + tail
        for row in zip(TIME, COMMAND, COMMAND / 10.0, strict=True)
    ]


@pytest.mark.parametrize("head", HEADS)
@pytest.mark.parametrize(("separator", "decimal"), [(",", "."), (";", ","), (";", "."), ("\t", "."), ("\t", ",")])
@pytest.mark.parametrize(("newline", "encoding", "tail"), [("\n", "utf-8", ""), ("\r\n", "utf-8-sig", "{}{}")])
def test_layouts(tmp_path, head, separator, decimal, newline, encoding, tail):
    header = [line.replace(",", separator) for line in HEADS[head]]
    body = rows(separator, decimal, tail.format(separator, separator))
    file = write(tmp_path, [*header, *body], newline=newline, encoding=encoding)
    wanted = Columns("2", "3", time="1") if head == "none" else Columns("ctl", "RF")
    found = read_channels(read_table(file), wanted)
    scale = 1e-3 if head == "brackets" else 1.0
    assert found.time == pytest.approx(TIME, abs=1e-15)
    assert found.command == pytest.approx(COMMAND)
    assert found.rf == pytest.approx(COMMAND / 10.0 * scale)


def test_sample_interval_from_option_and_header(tmp_path):
    body = [f"{x:.3f},{x / 10:.4f}" for x in COMMAND]
    plain = read_table(write(tmp_path, ["ctl,rf", *body]))
    assert read_channels(plain, Columns("ctl", interval=2e-9)).time == pytest.approx(TIME)
    with pytest.raises(RecordError, match="--interval"):
        read_channels(plain, Columns("ctl"))
    stated = read_table(write(tmp_path, ["Sample Interval,2e-9,s", "ctl,rf", *body]))
    assert read_channels(stated, Columns("ctl")).time == pytest.approx(TIME)


def test_units_are_scaled(tmp_path):
    lines = ["time,ctl", "us,mV", *(f"{1e6 * t:.6f},{1e3 * x:.3f}" for t, x in zip(TIME, COMMAND, strict=True))]
    found = read_channels(read_table(write(tmp_path, lines)), Columns("ctl"))
    assert found.time == pytest.approx(TIME, abs=1e-12)
    assert found.command == pytest.approx(COMMAND)


@pytest.mark.parametrize("cell", ["nan", "", "inf", "overload", "1_000"])
def test_bad_cells_are_named_with_their_line(tmp_path, cell):
    body = rows()
    body[29] = f"5.8e-8,{cell},0.1"
    file = write(tmp_path, ["t,ctl,rf", *body])
    with pytest.raises(RecordError) as caught:
        read_channels(read_table(file), Columns("ctl", "rf"))
    assert str(caught.value).startswith(f"{file}:31: column ctl:")
    # a fault in a column that is not used does not matter
    assert read_channels(read_table(file), Columns("rf")).command.size == 40


def test_short_line_and_time_that_goes_back(tmp_path):
    body = rows()
    body[29] = "5.8e-8"
    with pytest.raises(RecordError, match=":31: column ctl: a finite number is wanted, the line is short"):
        read_channels(read_table(write(tmp_path, ["t,ctl,rf", *body])), Columns("ctl"))
    body = rows()
    body[20], body[21] = body[21], body[20]
    with pytest.raises(RecordError, match=":23: column t: time does not increase"):
        read_channels(read_table(write(tmp_path, ["t,ctl,rf", *body])), Columns("ctl"))


@pytest.mark.parametrize("content", [b"", b"\n\n", b"hello\nworld\n", b"\x00\x01binary"])
def test_no_table(tmp_path, content):
    file = tmp_path / "empty.csv"
    file.write_bytes(content)
    with pytest.raises(RecordError, match=r"empty\.csv"):
        read_table(file)
    with pytest.raises(RecordError, match="cannot be read"):
        read_table(tmp_path / "missing.csv")


def test_uneven_time_is_interpolated(tmp_path):
    instants = np.cumsum(1e-9 + 1e-9 * (np.arange(60) % 3))
    lines = ["t,ctl", *(f"{t:.9e},{2e7 * t:.9e}" for t in instants)]
    found = read_channels(read_table(write(tmp_path, lines)), Columns("ctl"))
    assert np.ptp(np.diff(found.time)) < 1e-15
    assert found.command == pytest.approx(2e7 * found.time, rel=1e-6)


def test_a_million_rows(tmp_path):
    line = "1.2345e-01,-4.5678e-02\n"
    file = tmp_path / "long.csv"
    file.write_text("ctl,rf\n" + 1_000_000 * line)
    started = time.process_time()
    found = read_channels(read_table(file), Columns("ctl", "rf", interval=1e-9))
    assert found.command.size == 1_000_000
    assert time.process_time() - started < 8.0


def test_rounded_time_is_evened_out(tmp_path):
    """A step of 0.4 ns printed to 1 ns: rows share an instant, the steps stay 0.4 ns."""
    instants = 0.4e-9 * np.arange(100)
    lines = ["t,ctl", *(f"{t * 1e9:.0f}e-9,{2e7 * t:.9e}" for t in instants)]
    found = read_channels(read_table(write(tmp_path, lines)), Columns("ctl"))
    assert found.time == pytest.approx(instants, abs=1e-9)
    assert np.diff(found.time) == pytest.approx(np.full(99, 0.4e-9), rel=0.02)
