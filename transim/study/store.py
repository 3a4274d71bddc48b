"""The folder of a study: its points in a database, one committed row each, so that nothing finished is lost."""

from __future__ import annotations

import hashlib
import json
import os
import sqlite3
from collections.abc import Iterator, Mapping
from pathlib import Path
from types import TracebackType
from typing import Any

from transim import __version__
from transim.design.model import Design, Driver, Junction
from transim.errors import OutputError, StudyError
from transim.parts.part import Part
from transim.study.point import Point, Setup

__all__ = ["DATABASE", "MANIFEST", "Store", "study_key", "write_whole"]

DATABASE, MANIFEST = "points.sqlite", "study.json"
_OWN = (DATABASE, f"{DATABASE}-wal", f"{DATABASE}-shm", MANIFEST)
_SCHEMA = "CREATE TABLE IF NOT EXISTS point (place TEXT PRIMARY KEY, failed INTEGER NOT NULL, text TEXT NOT NULL)"

#: Goes up where a stored row gets another form.
_ROWS = 2


def study_key(kind: str, setup: Setup, definition: Mapping[str, Any], engine: int) -> str:
    """Return what tells one study from another: whatever can change a figure is in it.

    Parameters
    ----------
    kind : str
        ``sweep``, ``tune`` or ``spread``.
    setup : Setup
        Design, parameters, drivers and analysis.
    definition : mapping
        What is done with them; of what JSON has.
    engine : int
        Version of ngspice.

    Returns
    -------
    str
        Hexadecimal digest.
    """
    design = setup.design
    content = {
        "kind": kind,
        "version": __version__,
        "rows": _ROWS,
        "engine": engine,
        "definition": definition,
        "parameters": setup.parameters,
        "analysis": setup.analysis,
        "design": _design(design, setup.drivers),
    }
    text = json.dumps(content, sort_keys=True, separators=(",", ":"), default=str)
    return hashlib.sha256(text.encode()).hexdigest()


def _design(design: Design, drivers: tuple[str, ...]) -> dict[str, Any]:
    # whatever the model holds, but for the components that are not run and where things were read
    others = {name: getattr(design, name) for name in type(design).model_fields}
    for name in ("title", "source", "switch", "drivers"):
        others.pop(name)
    return {
        **{name: repr(value) for name, value in others.items()},
        "path": _component(design.switch.path, design.switch.values, None, ""),
        "junctions": {slot: _part(junction) for slot, junction in design.switch.junctions.items()},
        "drivers": [_part(driver) for driver in design.drivers if driver.name in drivers],
    }


def _part(component: Junction | Driver) -> dict[str, Any]:
    ratings = repr(getattr(component, "ratings", None))
    return {"name": component.name, **_component(component.part, component.values, component.model, ratings)}


def _component(part: Part, values: Mapping[str, float], model: str | None, ratings: str) -> dict[str, Any]:
    # what RF and command do at which terminal stands in a header or a design file, not in the body
    roles = repr((part.ports, part.bias, part.throws, part.inverted))
    return {
        "body": part.body, "roles": roles, "probes": repr(part.probes), "values": dict(values), "model": model,
        "ratings": ratings,
    }  # fmt: skip


def write_whole(path: Path, text: str) -> None:
    """Write a text file of a study: an interruption leaves the old one or the new one.

    Parameters
    ----------
    path : Path
        The file; replaced if it exists.
    text : str
        Its content.
    """
    temporary = path.with_name(f".{path.name}.new")
    with temporary.open("w", encoding="utf-8", newline="\n") as stream:
        stream.write(text)
        stream.flush()
        os.fsync(stream.fileno())
    temporary.replace(path)


class Store:
    """The points of one study on disk.

    Used as a context manager. A folder that already holds the same study is gone on with.

    Parameters
    ----------
    folder : Path
        The study's folder; made if it does not exist.
    key : str
        What tells this study from others.
    description : mapping
        Written beside the key for the reader; of what JSON has.
    resume : bool
        Whether there must be a study to go on with.
    force : bool
        Whether another study's points may be discarded.

    Raises
    ------
    StudyError
        On entry where the folder holds another study and `force` is not set, or none and `resume` is.
    OutputError
        If the folder holds something else, or cannot be written.
    """

    def __init__(
        self,
        folder: Path,
        key: str,
        description: Mapping[str, Any],
        *,
        resume: bool = False,
        force: bool = False,
    ) -> None:
        self.folder = folder
        self.key = key
        self._description = description
        self._resume, self._force = resume, force
        self._connection: sqlite3.Connection | None = None

    def __enter__(self) -> Store:
        try:
            self._enter()
        except (OSError, sqlite3.Error) as exc:
            self._close()
            raise OutputError(f"the folder {self.folder} cannot be written: {exc}") from exc
        return self

    def _enter(self) -> None:
        found = self._found()
        if found is None and self._resume:
            raise StudyError(f"there is no study in {self.folder} to go on with; leave out --resume to start it")
        if found not in (None, self.key):
            if not self._force:
                raise StudyError(
                    f"the folder {self.folder} holds another study (another design, range, seed, analysis or version of"
                    " transim or ngspice); name another folder with --out, or discard its points with --force"
                )
            for name in _OWN:
                (self.folder / name).unlink(missing_ok=True)
        self.folder.mkdir(parents=True, exist_ok=True)
        self._connection = sqlite3.connect(self.folder / DATABASE, timeout=5.0)
        # a process that dies loses nothing committed in this mode, and a power cut at most the last rows
        self._connection.execute("PRAGMA journal_mode=WAL")
        self._connection.execute("PRAGMA synchronous=NORMAL")
        try:
            # one writer, or points would be simulated twice; and no shared memory, which network disks do not have
            self._connection.execute("PRAGMA locking_mode=EXCLUSIVE")
            self._connection.execute("BEGIN EXCLUSIVE")
            self._connection.execute(_SCHEMA)
            self._connection.commit()
        except sqlite3.OperationalError as exc:
            raise StudyError(f"the study in {self.folder} is being run by another process ({exc})") from exc
        if found != self.key:
            document = {"format": 1, "key": self.key, **self._description}
            write_whole(self.folder / MANIFEST, json.dumps(document, indent=2) + "\n")

    def _found(self) -> str | None:
        """Return the key of the study in the folder."""
        manifest = self.folder / MANIFEST
        if not self.folder.exists():
            return None
        if not self.folder.is_dir():
            raise OutputError(f"{self.folder} is a file, and a folder is wanted for the study")
        if not manifest.exists():
            strange = [file for file in self.folder.iterdir() if file.name not in _OWN and file.name[0] != "."]
            if strange:
                raise OutputError(
                    f"the folder {self.folder} is not empty and holds no study; name another one with --out"
                )
            # a study that died before its manifest was written has no points yet
            for name in _OWN:
                (self.folder / name).unlink(missing_ok=True)
            return None
        try:
            return str(json.loads(manifest.read_text(encoding="utf-8"))["key"])
        except (ValueError, KeyError, TypeError) as exc:
            raise OutputError(f"{manifest} is no manifest of a study; move it away, or name another folder") from exc

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._close()

    def _close(self) -> None:
        if self._connection is not None:
            self._connection.close()
            self._connection = None

    @property
    def _database(self) -> sqlite3.Connection:
        assert self._connection is not None, "the store is entered"
        return self._connection

    def add(self, place: str, point: Point) -> None:
        """Commit a finished point.

        Parameters
        ----------
        place : str
            Its place in the study.
        point : Point
            What it gave.

        Raises
        ------
        OutputError
            If it cannot be written.
        """
        try:
            with self._database as database:
                database.execute(
                    "INSERT OR IGNORE INTO point VALUES (?, ?, ?)", (place, point.reason is not None, point.text())
                )
        except sqlite3.Error as exc:
            raise OutputError(f"{self.folder / DATABASE} cannot be written: {exc}") from exc

    def get(self, place: str) -> Point | None:
        """Return the point at a place, None where it is not finished."""
        row = self._database.execute("SELECT text FROM point WHERE place = ?", (place,)).fetchone()
        return None if row is None else Point.read(row[0])

    def places(self) -> set[str]:
        """Return the places of all finished points."""
        return {row[0] for row in self._database.execute("SELECT place FROM point")}

    def failures(self) -> int:
        """Return how many points failed."""
        return int(self._database.execute("SELECT count(*) FROM point WHERE failed").fetchone()[0])

    def points(self) -> Iterator[tuple[str, Point]]:
        """Read all finished points, one at a time.

        Yields
        ------
        tuple of str and Point
            Place and point.
        """
        for place, text in self._database.execute("SELECT place, text FROM point ORDER BY rowid"):
            yield place, Point.read(text)
