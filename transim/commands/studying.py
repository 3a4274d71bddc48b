"""What the commands `sweep`, `tune` and `spread` share: their folder, their progress, and how they are interrupted."""

from __future__ import annotations

import contextlib
import os
import sys
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from transim.commands.console import Console
from transim.errors import StudyError

if TYPE_CHECKING:
    from transim.study.plan import Plan
    from transim.study.run import Outcome
    from transim.study.study import Advance

__all__ = ["StudyRequest", "keep_decks", "planned"]

#: The progress is shown anew no more often than this [s].
_INTERVAL = 0.2


@dataclass(frozen=True)
class StudyRequest:
    """What every study is asked for.

    Attributes
    ----------
    design_file : Path
        The design file.
    vary : tuple of str
        Parameters in place of those that the file varies.
    drivers : tuple of str
        Names of drivers in place of the file's.
    analysis : str
        ``envelope`` or ``carrier``.
    workers : int or None
        Processes; None: one a processor.
    cluster : str or None
        Address of a Dask scheduler.
    out : Path or None
        The study's folder; None: named after the design file.
    figures : Path or None
        Folder for figures.
    resume, force : bool
        Whether there must be a study to go on with; whether another one may be discarded.
    ngspice : str or None
        The executable that is asked for.
    """

    design_file: Path
    vary: tuple[str, ...] = ()
    drivers: tuple[str, ...] = ()
    analysis: str = "envelope"
    workers: int | None = None
    cluster: str | None = None
    out: Path | None = None
    figures: Path | None = None
    resume: bool = False
    force: bool = False
    ngspice: str | None = None

    def folder(self, kind: str) -> Path:
        """Return the study's folder.

        Parameters
        ----------
        kind : str
            ``sweep``, ``tune`` or ``spread``.

        Returns
        -------
        Path
            The one that is asked for, else DESIGN.KIND in the current folder.
        """
        return self.out if self.out is not None else Path(f"{self.design_file.stem}.{kind}")


@contextlib.contextmanager
def planned(console: Console, request: StudyRequest, kind: str) -> Iterator[Plan]:
    """Give the plan of a study; shows its progress, and says how to go on where it is interrupted.

    Parameters
    ----------
    console : Console
        Where the progress goes.
    request : StudyRequest
        What is asked for.
    kind : str
        ``sweep``, ``tune`` or ``spread``.

    Yields
    ------
    Plan

    Raises
    ------
    StudyError
        If options exclude each other.
    """
    from transim.engine import find_engine
    from transim.study.plan import Plan
    from transim.study.study import Place, Workers

    if request.cluster is not None and request.workers is not None:
        raise StudyError("--cluster has its own workers; leave out --workers")
    if request.resume and request.force:
        raise StudyError("--resume goes on with a study and --force discards one; leave out one of the two")
    folder = request.folder(kind)
    seen = _Seen()
    plan = Plan(
        find_engine(request.ngspice),
        Place(folder, request.resume, request.force),
        Workers(request.workers, request.cluster),
        request.analysis,
        request.ngspice,
    )
    try:
        with _status(console) as show:
            seen.show = show
            yield replace(plan, advanced=seen.advanced, said=seen.said)
    except (SystemExit, KeyboardInterrupt):
        if seen.last is not None:
            sys.stderr.write(
                f"stopped with {seen.last.done} of {seen.last.total} points on disk in {folder}; the same command goes"
                " on from there\n"
            )
        raise


class _Seen:
    """Turns what a study tells into lines."""

    def __init__(self) -> None:
        self.last: Advance | None = None
        self.show: _Show | None = None
        self._shown = float("-inf")

    def advanced(self, advance: Advance) -> None:
        self.last = advance
        if self.show is not None and advance.seconds - self._shown >= _INTERVAL:
            self._shown = advance.seconds
            self.show(progress_text(advance))

    def said(self, text: str) -> None:
        if self.show is not None:
            self.show(f"running {text}")


class _Show:
    """A line on the terminal that is written over."""

    def __init__(self, console: Console) -> None:
        from rich.console import Console as Terminal

        self._status = Terminal(stderr=True, no_color=not console.colored(sys.stderr)).status("starting")

    def __call__(self, text: str) -> None:
        self._status.update(text)

    def __enter__(self) -> _Show:
        self._status.__enter__()
        return self

    def __exit__(self, *what: object) -> None:
        self._status.stop()


@contextlib.contextmanager
def _status(console: Console) -> Iterator[_Show | None]:
    if not sys.stderr.isatty() or os.environ.get("TERM") == "dumb":
        yield None
        return
    with _Show(console) as show:
        yield show


def progress_text(advance: Advance) -> str:
    """Write how far a study is.

    Parameters
    ----------
    advance : Advance
        How far.

    Returns
    -------
    str
        Points done, rate, time left, failures so far.
    """
    text = f"{advance.done} of {advance.total} points"
    if advance.rate > 0.0:
        text += f", {advance.rate:.3g} a second"
    left = advance.left
    if left is not None and advance.done < advance.total:
        minutes, seconds = divmod(round(left), 60)
        text += f", {minutes} min {seconds} s left" if minutes else f", {seconds} s left"
    return f"{text}, {advance.failed} failed"


def keep_decks(folder: Path, name: str, outcome: Outcome | None) -> None:
    """Write decks and waveforms of a reported point beside the study.

    Parameters
    ----------
    folder : Path
        The study's folder.
    name : str
        Of the folder in it; an earlier one is replaced.
    outcome : Outcome or None
        The run.
    """
    if outcome is None:
        return
    from transim.report.cases import write_cases
    from transim.report.output import ResultFolder

    with ResultFolder(folder / name, force=True) as place:
        write_cases(place, outcome)
