"""Raw files: the samples that ngspice writes, as arrays.

A raw file is a sequence of plots. Each has a text header (title, plot name, flags, number of variables and
points, one line a variable) and then its samples, either binary (``Binary:``, IEEE doubles, complex numbers
as pairs) or as text (``Values:``). A run that dies leaves ``No. Points: 0`` in the header and samples after
it.
"""

from __future__ import annotations

import mmap
import os
from collections.abc import Iterable
from dataclasses import dataclass, replace
from difflib import get_close_matches
from pathlib import Path
from typing import BinaryIO

import numpy as np
import numpy.typing as npt

from transim.errors import RawFileError

__all__ = ["Plot", "read_raw", "time_reached", "write_raw"]

Samples = npt.NDArray[np.float64] | npt.NDArray[np.complex128]

LONGEST_LINE = 65536
SHORTEST_VARIABLE_LINE = len("\t0\ta\tb\n")
FIRST_WORD = b"Title:"
SECOND_WORD = b"\nDate:"


@dataclass(frozen=True, eq=False)
class Plot:
    """One analysis: its vectors and their samples.

    Parameters
    ----------
    title : str
        First line of the deck.
    name : str
        What was analysed, for example ``Transient Analysis``.
    flags : str
        ``real`` or ``complex``.
    names : tuple of str
        Vector names in lower case: ``time``, ``v(out)``, ``i(v1)``, ``@d1[charge]``.
    kinds : tuple of str
        What ngspice says each vector is: ``time``, ``voltage``, ``current``, ``notype``.
    data : ndarray, shape (points, vectors)
        Samples, float or complex, in SI units; read-only.
    complete : bool
        False where the run died and left no number of points.

    Examples
    --------
    >>> import numpy as np
    >>> plot = Plot("t", "Operating Point", "real", ("v(out)",), ("voltage",), np.array([[2.5]]))
    >>> float(plot["V(out)"][0]), "v(in)" in plot
    (2.5, False)
    """

    title: str
    name: str
    flags: str
    names: tuple[str, ...]
    kinds: tuple[str, ...]
    data: Samples
    complete: bool = True

    def __contains__(self, name: object) -> bool:
        return isinstance(name, str) and self._column(name) is not None

    def __getitem__(self, name: str) -> Samples:
        """Return the samples of one vector.

        Parameters
        ----------
        name : str
            Vector name, in any case. A device quantity ``@d1[charge]`` is also found where ngspice wrote
            it as ``v(@d1[charge])`` or ``i(@d1[charge])``.

        Returns
        -------
        ndarray, shape (points,)
            Its samples, float or complex.

        Raises
        ------
        RawFileError
            Where the plot has no such vector; names the nearest one.
        """
        column = self._column(name)
        if column is None:
            close = get_close_matches(name.lower(), self.names, n=1, cutoff=0.0)
            nearest = f"; the nearest is {close[0]}" if close else ""
            raise RawFileError(
                f"the plot '{self.name}' has no vector '{name}'{nearest} (of {len(self.names)}); "
                "save it in the deck or correct the name"
            )
        return self.data[:, column]

    def _column(self, name: str) -> int | None:
        wanted = name.lower()
        spellings = (wanted, f"v({wanted})", f"i({wanted})") if wanted.startswith("@") else (wanted,)
        return next((self.names.index(text) for text in spellings if text in self.names), None)


@dataclass(frozen=True)
class _Section:
    """A plot's header and the place of its samples in the file."""

    title: str
    name: str
    flags: str
    names: tuple[str, ...]
    kinds: tuple[str, ...]
    points: int
    complete: bool
    binary: bool
    start: int
    end: int

    @property
    def is_complex(self) -> bool:
        return "complex" in self.flags.split()

    @property
    def row_bytes(self) -> int:
        return len(self.names) * (16 if self.is_complex else 8)


def read_raw(path: Path) -> tuple[Plot, ...]:
    """Read every plot of a raw file.

    Parameters
    ----------
    path : Path
        The file, binary or text; several plots may stand one after the other.

    Returns
    -------
    tuple of Plot
        In the order of the file. A plot with ``No. Points: 0`` has the samples that follow it, without a
        last one that is cut short, and is not `complete`.

    Raises
    ------
    RawFileError
        Where the file is missing, empty, cut short, no raw file, or of a kind that is not read (unpadded).
    """
    with _open(path) as stream:
        return tuple(_load(stream, section, path) for section in _scan(stream, path))


def time_reached(path: Path) -> float | None:
    """Return the last time of the last transient in a raw file, reading nothing else of it.

    Parameters
    ----------
    path : Path
        The file; it may be of a run that died.

    Returns
    -------
    float or None
        Time [s]; None where the file is missing, not understood, or has no sample of a transient.
    """
    try:
        with _open(path) as stream:
            found = [section for section in _scan(stream, path) if section.names[0] == "time"]
            if not found or not found[-1].points:
                return None
            last = found[-1]
            if not last.binary:
                times = _load(stream, last, path)["time"]
                return float(times[-1].real) if len(times) else None
            stream.seek(last.start + (last.points - 1) * last.row_bytes)
            return float(np.fromfile(stream, np.float64, 1)[0])
    except RawFileError:
        return None


def write_raw(path: Path, plots: Iterable[Plot]) -> None:
    """Write plots as a binary raw file that ngspice can load.

    Parameters
    ----------
    path : Path
        The file; an old one is replaced.
    plots : iterable of Plot
        Written one after the other, without a date: equal plots give equal files.
    """
    with path.open("wb") as stream:
        for plot in plots:
            points = len(plot.data) if plot.complete else 0
            lines = [f"Title: {plot.title}", "Date: ", f"Plotname: {plot.name}", f"Flags: {plot.flags}"]
            lines += [f"No. Variables: {len(plot.names)}", f"No. Points: {points}", "Variables:"]
            lines += [f"\t{n}\t{v}\t{k}" for n, (v, k) in enumerate(zip(plot.names, plot.kinds, strict=True))]
            stream.write("\n".join([*lines, "Binary:\n"]).encode())
            stream.write(np.ascontiguousarray(plot.data).tobytes())


def _open(path: Path) -> BinaryIO:
    try:
        stream = path.open("rb")
    except OSError as exc:
        raise RawFileError(f"the raw file {path} cannot be read: {exc.strerror}") from exc
    if os.fstat(stream.fileno()).st_size == 0:
        stream.close()
        raise RawFileError(f"the raw file {path} is empty")
    return stream


def _scan(stream: BinaryIO, path: Path) -> list[_Section]:
    """Find every plot, checking each declared size against what is in the file."""
    size = os.fstat(stream.fileno()).st_size
    sections: list[_Section] = []
    while True:
        while (line := stream.readline(LONGEST_LINE)).isspace():
            pass
        if not line and sections:
            return sections
        if not line.startswith(FIRST_WORD):
            where = "after its last plot" if sections else "at its start"
            raise RawFileError(f"{path} is no raw file of ngspice: found {line[:40]!r} {where}, not 'Title:'")
        sections.append(_section(stream, line, size, path))
        stream.seek(sections[-1].end)


def _section(stream: BinaryIO, line: bytes, size: int, path: Path) -> _Section:
    entries: dict[str, str] = {}
    while not line.startswith(b"Variables:"):
        key, colon, value = line.decode("utf-8", "replace").partition(":")
        if not colon:
            raise RawFileError(f"the raw file {path} ends or is garbled in a header, at {line[:40]!r}")
        entries[key.strip().lower()] = value.strip()
        line = stream.readline(LONGEST_LINE)
    flags = entries.get("flags", "").lower()
    if "unpadded" in flags.split():
        raise RawFileError(f"the raw file {path} is unpadded; take 'set nopadding' out of the deck")
    if not {"real", "complex"} & set(flags.split()):
        raise RawFileError(f"the raw file {path} has flags '{flags}'; expected real or complex")
    variables, points = (_count(entries, key, path) for key in ("no. variables", "no. points"))
    if not 0 < variables <= size // SHORTEST_VARIABLE_LINE:
        raise RawFileError(f"the raw file {path} of {size} bytes declares {variables} variables")
    vectors = [_vector(stream, number, path) for number in range(variables)]
    marker = stream.readline(LONGEST_LINE).strip()
    if marker not in (b"Binary:", b"Values:"):
        raise RawFileError(f"the raw file {path} has {marker[:40]!r} where 'Binary:' or 'Values:' must stand")
    return _placed(
        _Section(
            title=entries.get("title", ""),
            name=entries.get("plotname", ""),
            flags=flags,
            names=tuple(name for name, _ in vectors),
            kinds=tuple(kind for _, kind in vectors),
            points=points,
            complete=points > 0,
            binary=marker == b"Binary:",
            start=stream.tell(),
            end=size,
        ),
        stream,
        path,
    )


def _count(entries: dict[str, str], key: str, path: Path) -> int:
    text = entries.get(key, "nothing")
    if not (text.isascii() and text.isdigit() and len(text) < 19):
        raise RawFileError(f"the raw file {path} has '{text[:40]}' for '{key}'; expected a count")
    return int(text)


def _vector(stream: BinaryIO, number: int, path: Path) -> tuple[str, str]:
    line = stream.readline(LONGEST_LINE).decode("utf-8", "replace")
    fields = line.split()
    if not line:
        raise RawFileError(f"the raw file {path} ends in its header: the run died before its first sample")
    if len(fields) < 3 or fields[0] != str(number):
        raise RawFileError(f"the raw file {path} has {line[:40]!r} where variable {number} is expected")
    return fields[1].lower(), fields[2].lower()


def _placed(section: _Section, stream: BinaryIO, path: Path) -> _Section:
    """Return the section with its end, and with its number of points where the header has none."""
    if section.binary and section.complete:
        end = section.start + section.points * section.row_bytes
        if end > section.end:
            raise _cut_short(path, section, (section.end - section.start) // section.row_bytes)
        return replace(section, end=end)
    end = _next_plot(stream, section)
    # Text rows are counted when they are read; until then this is only an upper limit of them.
    rows = (end - section.start) // (section.row_bytes if section.binary else 2 * len(section.names))
    return replace(section, end=end, points=section.points or rows)


def _next_plot(stream: BinaryIO, section: _Section) -> int:
    with mmap.mmap(stream.fileno(), 0, access=mmap.ACCESS_READ) as content:
        place = content.find(FIRST_WORD, section.start)
        while place >= 0:
            line_end = content.find(b"\n", place)
            on_a_row = not section.binary or (place - section.start) % section.row_bytes == 0
            if on_a_row and content[line_end : line_end + len(SECOND_WORD)] == SECOND_WORD:
                return place
            place = content.find(FIRST_WORD, place + 1)
    return section.end


def _load(stream: BinaryIO, section: _Section, path: Path) -> Plot:
    stream.seek(section.start)
    flat: Samples
    count = section.points * len(section.names)
    if section.binary and section.is_complex:
        flat = np.fromfile(stream, np.complex128, count)
    elif section.binary:
        flat = np.fromfile(stream, np.float64, count)
    else:
        flat = _values(stream.read(section.end - section.start), section, path)
    data = flat.reshape(-1, len(section.names))
    data.setflags(write=False)
    return Plot(
        section.title, section.name, section.flags, section.names, section.kinds, data, section.complete
    )


def _values(content: bytes, section: _Section, path: Path) -> Samples:
    """Read text samples: a running number, then one value a vector; complex ones as ``re,im``."""
    width = len(section.names) + 1
    # The last line of a run that died may lack digits.
    words = content.split() if section.complete else content[: content.rfind(b"\n") + 1].split()
    rows = len(words) // width
    if section.complete and rows < section.points:
        raise _cut_short(path, section, rows)
    if section.complete and len(words) > section.points * width:
        raise RawFileError(f"the raw file {path} has more samples than the {section.points} that it declares")
    words = words[: rows * width]
    try:
        numbers = [int(word) for word in words[::width]]
        parts = [word.split(b",") for n, word in enumerate(words) if n % width]
        if section.is_complex:
            flat: Samples = np.array([complex(float(re), float(im)) for re, im in parts], np.complex128)
        else:
            flat = np.array([float(value) for (value,) in parts], np.float64)
    except ValueError as exc:
        raise RawFileError(f"the raw file {path} has a sample that is no number: {exc}") from exc
    if numbers != list(range(rows)):
        raise RawFileError(f"the raw file {path} has samples that are not numbered from 0 to {rows - 1}")
    return flat


def _cut_short(path: Path, section: _Section, rows: int) -> RawFileError:
    return RawFileError(
        f"the raw file {path} is cut short: '{section.name}' declares {section.points} points of "
        f"{len(section.names)} vectors and has at most {rows}; is the disk full?"
    )
