"""Raw files: read, written, and refused.

Outside reference: the layout, read off files that ngspice 39 wrote (tests/spice lets ngspice itself read and
write them), with samples packed here by the standard library's struct.
"""

from __future__ import annotations

import struct
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from transim.engine.rawfile import Plot, read_raw, time_reached, write_raw
from transim.errors import RawFileError

ROWS = [(0.0, 1.5, -2e-3), (1e-9, 1.25, -1e-3), (2e-9, 1.0, 5e-324)]


def header(
    points: int | str = 3, *, flags: str = "real", variables: int = 3, kind: str = "Binary:"
) -> bytes:
    lines = ["Title: * t", "Date: Tue Dec  1 11:31:27  2026", "Plotname: Transient Analysis"]
    lines += [f"Flags: {flags}", f"No. Variables: {variables}", f"No. Points: {points}", "Variables:"]
    lines += ["\t0\ttime\ttime", "\t1\tv(out)\tvoltage", "\t2\ti(v1)\tcurrent", kind, ""]
    return "\n".join(lines).encode()


def samples(rows: list[tuple[float, ...]] = ROWS) -> bytes:
    return b"".join(struct.pack("<3d", *row) for row in rows)


def stored(folder: Path, content: bytes) -> Path:
    path = folder / "t.raw"
    path.write_bytes(content)
    return path


def test_binary_file_of_reals(tmp_path: Path) -> None:
    (plot,) = read_raw(stored(tmp_path, header("3       ") + samples()))
    assert (plot.title, plot.name, plot.flags, plot.complete) == ("* t", "Transient Analysis", "real", True)
    assert plot.names == ("time", "v(out)", "i(v1)")
    assert plot.kinds == ("time", "voltage", "current")
    assert plot.data.tolist() == [list(row) for row in ROWS]
    assert plot["i(v1)"].tolist() == [-2e-3, -1e-3, 5e-324]


def test_binary_file_of_complex_numbers(tmp_path: Path) -> None:
    content = header(1, flags="complex").replace(b"time\ttime", b"frequency\tfrequency grid=3")
    content += struct.pack("<6d", 1e6, 0, 0.5, -0.5, 1e-3, 2e-3)
    (plot,) = read_raw(stored(tmp_path, content))
    assert plot.names[0] == plot.kinds[0] == "frequency"
    assert plot["v(out)"].tolist() == [0.5 - 0.5j]
    assert plot["i(v1)"].tolist() == [1e-3 + 2e-3j]


def test_text_file_of_reals(tmp_path: Path) -> None:
    text = b" 0\t0.0e+00\n\t1.5e+00\n\t-2.0e-03\n\n 1\t1.0e-09\n\t1.25e+00\n\t-1.0e-03\n\n"
    (plot,) = read_raw(stored(tmp_path, header(2, kind="Values:") + text))
    assert plot.data.tolist() == [list(row) for row in ROWS[:2]]


def test_text_file_of_complex_numbers(tmp_path: Path) -> None:
    text = b" 0\t1.0e+06,0.0e+00\n\t0.5e+00,-0.5e+00\n\t1e-3,2e-3\n\n"
    (plot,) = read_raw(stored(tmp_path, header(1, flags="complex", kind="Values:") + text))
    assert plot.data.tolist() == [[1e6, 0.5 - 0.5j, 1e-3 + 2e-3j]]


def test_plots_of_both_kinds_in_one_file(tmp_path: Path) -> None:
    text = b" 0\t0.0\n\t1.5\n\t-2e-3\n\n"
    parts = [header() + samples(), header(1, kind="Values:") + text, header() + samples()]
    plots = read_raw(stored(tmp_path, b"".join(parts)))
    assert [len(plot.data) for plot in plots] == [3, 1, 3]


def test_samples_cannot_be_changed(tmp_path: Path) -> None:
    (plot,) = read_raw(stored(tmp_path, header() + samples()))
    with pytest.raises(ValueError, match="read-only"):
        plot["v(out)"][0] = 1.0


def test_vector_is_found_in_any_case(tmp_path: Path) -> None:
    (plot,) = read_raw(stored(tmp_path, header() + samples()))
    assert "V(OUT)" in plot
    assert "v(in)" not in plot
    assert 3 not in plot
    assert plot["V(Out)"] is not None


@pytest.mark.parametrize("written", ["@d1[charge]", "v(@d1[charge])", "i(@d1[charge])"])
def test_device_quantity_is_found_under_each_of_its_names(written: str) -> None:
    plot = Plot("t", "Operating Point", "real", (written,), ("notype",), np.array([[3e-12]]))
    assert plot["@d1[charge]"].tolist() == [3e-12]
    assert "@d1[charge]" in plot
    assert "d1[charge]" not in plot


def test_missing_vector_is_answered_with_the_nearest(tmp_path: Path) -> None:
    (plot,) = read_raw(stored(tmp_path, header() + samples()))
    with pytest.raises(RawFileError, match=r"no vector 'v\(outt\)'; the nearest is v\(out\)"):
        plot["v(outt)"]


@pytest.mark.parametrize("tail", [b"", b"\x00" * 23])
def test_run_that_died_leaves_samples_without_their_number(tmp_path: Path, tail: bytes) -> None:
    path = stored(tmp_path, header("0       ") + samples() + tail)
    (plot,) = read_raw(path)
    assert not plot.complete
    assert plot.data.tolist() == [list(row) for row in ROWS]
    assert time_reached(path) == 2e-9


def test_plot_that_died_ends_where_the_next_begins(tmp_path: Path) -> None:
    # The title stands among the samples too, but not with a date line after it, or not on a row.
    decoy = b"Title: * t\nDat" + bytes(10)
    assert len(decoy) == 24
    off_row = bytes(4) + b"Title: x\nDate: y\n" + bytes(3)
    assert len(off_row) == 24
    died = header("0       ") + samples() + decoy + off_row + samples()
    first, second = read_raw(stored(tmp_path, died + header() + samples()))
    assert (first.complete, len(first.data)) == (False, 8)
    assert (second.complete, len(second.data)) == (True, 3)


def test_text_of_a_run_that_died_loses_its_last_line_only(tmp_path: Path) -> None:
    text = b" 0\t0.0\n\t1.5\n\t-2e-3\n\n 1\t1e-9\n\t1.25\n\t-1.0"
    path = stored(tmp_path, header(0, kind="Values:") + text)
    (plot,) = read_raw(path)
    assert (plot.complete, plot.data.tolist()) == (False, [list(ROWS[0])])
    assert time_reached(path) == 0.0


def test_time_reached_is_that_of_the_last_transient(tmp_path: Path) -> None:
    spectrum = header(1).replace(b"time\ttime", b"frequency\tfrequency") + samples(ROWS[:1])
    assert time_reached(stored(tmp_path, header() + samples() + spectrum)) == 2e-9
    assert time_reached(stored(tmp_path, spectrum)) is None
    assert time_reached(stored(tmp_path, header(0))) is None
    assert time_reached(stored(tmp_path, header() + samples() + header(0))) is None
    assert time_reached(stored(tmp_path, header(0, kind="Values:") + b" 0\t0.0\n\t1.5\n")) is None
    assert time_reached(stored(tmp_path, b"no raw file")) is None
    assert time_reached(tmp_path / "missing.raw") is None


def test_every_cut_of_a_binary_file_is_refused(tmp_path: Path) -> None:
    content = header() + samples()
    for length in range(len(content)):
        with pytest.raises(RawFileError):
            read_raw(stored(tmp_path, content[:length]))


REFUSED = {
    "empty": (b"", "is empty"),
    "other": (b"\x89PNG\r\n\x1a\n" * 9, "no raw file"),
    "unpadded": (header(flags="real unpadded") + samples(), "set nopadding"),
    "flags": (header(flags="quaternion") + samples(), "expected real or complex"),
    "more": (header() + samples() + b"\x01", "after its last plot"),
    "more text": (header(1, kind="Values:") + b" 0\t0\n1\n2\n 1\t0\n1\n2\n", "more samples"),
    "no header end": (header(kind="Numbers:") + samples(), "must stand"),
    "no variables": (header(variables=0) + samples(), "declares 0 variables"),
    "fewer variables": (header(variables=4) + samples(), "variable 3 is expected"),
    "absurd variables": (header(variables=10**12) + samples(), "declares 1000000000000 variables"),
    "absurd points": (header(10**15) + samples(), "cut short"),
    "absurd text": (header(10**15, kind="Values:") + b" 0\t0\n1\n2\n", "cut short"),
    "negative": (header(-3) + samples(), "expected a count"),
    "no number": (header("many") + samples(), "expected a count"),
    "died at once": (header(0).partition(b"\t0\t")[0], "died before its first sample"),
    "not a number": (header(1, kind="Values:") + b" 0\t0.0\n\tx\n\t1\n\n", "no number"),
    "numbering": (header(1, kind="Values:") + b" 7\t0.0\n\t1\n\t1\n\n", "not numbered"),
    "complex as real": (header(1, kind="Values:") + b" 0\t0,0\n\t1,1\n\t1,1\n\n", "no number"),
}


@pytest.mark.parametrize("case", REFUSED)
def test_what_is_no_whole_raw_file_is_refused_without_memory(tmp_path: Path, case: str) -> None:
    content, words = REFUSED[case]
    path = stored(tmp_path, content)
    tracemalloc.start()
    try:
        with pytest.raises(RawFileError) as caught:
            read_raw(path)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert words in str(caught.value)
    assert str(path) in str(caught.value)
    assert peak < 2**20


def test_missing_file_and_folder_are_refused(tmp_path: Path) -> None:
    for path in (tmp_path, tmp_path / "missing.raw"):
        with pytest.raises(RawFileError, match="cannot be read"):
            read_raw(path)


@given(content=st.binary(max_size=400), cut=st.integers(0, 300))
def test_garbage_is_refused_and_never_a_traceback(
    tmp_path_factory: pytest.TempPathFactory, content: bytes, cut: int
) -> None:
    path = tmp_path_factory.mktemp("raw") / "t.raw"
    for text in (content, (header() + samples())[:cut] + content):
        path.write_bytes(text)
        try:
            plots = read_raw(path)
        except RawFileError:
            continue
        # Random bytes may complete a header by chance; then the samples are as many as declared.
        assert all(plot.data.shape[1] == len(plot.names) for plot in plots)


VECTORS = st.lists(
    st.text("abcdefghijklmnopqrstuvwxyz0123456789_.()#@[]", min_size=1, max_size=12), min_size=1, max_size=5
)


@st.composite
def plots_to_write(draw: st.DrawFn) -> Plot:
    names = tuple(draw(VECTORS))
    dtype = draw(st.sampled_from([np.float64, np.complex128]))
    data = draw(arrays(dtype, (draw(st.integers(1, 6)), len(names))))
    title = draw(st.text("abc *:-0", max_size=9)).strip()
    flags = "complex" if dtype is np.complex128 else "real"
    return Plot(title, "AC Analysis", flags, names, ("notype",) * len(names), data)


@given(plots=st.lists(plots_to_write(), min_size=1, max_size=3))
def test_what_is_written_is_read_back(tmp_path_factory: pytest.TempPathFactory, plots: list[Plot]) -> None:
    path = tmp_path_factory.mktemp("raw") / "t.raw"
    write_raw(path, plots)
    back = read_raw(path)
    assert len(back) == len(plots)
    for before, after in zip(plots, back, strict=True):
        for field in ("title", "name", "flags", "names", "kinds", "complete"):
            assert getattr(after, field) == getattr(before, field)
        # Bytes, so that signed zeros and NaN count.
        assert after.data.tobytes() == before.data.tobytes()


def test_incomplete_plot_stays_incomplete(tmp_path: Path) -> None:
    names, kinds = ("time", "v(a)"), ("time", "voltage")
    died = Plot("t", "Transient Analysis", "real", names, kinds, np.ones((4, 2)), complete=False)
    write_raw(tmp_path / "t.raw", [died])
    (back,) = read_raw(tmp_path / "t.raw")
    assert (back.complete, back.data.shape) == (False, (4, 2))
