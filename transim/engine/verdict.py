"""The verdict on one run: which of the engine's errors it ended with, if any.

A success is: exit status 0, no failure in what ngspice printed, a raw file, at least one point in every plot,
and every transient at its stop.
"""

from __future__ import annotations

import math
import signal
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from transim.engine import bounds
from transim.engine.log import find_failure, log_tail
from transim.engine.rawfile import Plot, time_reached
from transim.errors import ConvergenceError, DeckRejected, EngineCrashed, EngineTimeout, RawFileError

__all__ = ["Attempt", "check_end", "check_plots"]

STOP_TOLERANCE = 1e-6


@dataclass(frozen=True)
class Attempt:
    """One run of a deck, as far as its verdict needs it.

    Parameters
    ----------
    deck, raw : Path
        The deck and the raw file that belongs to it.
    stop_time : float or None
        Time that every transient must reach [s].
    writes_raw : bool
        True where a ``.control`` block of the deck writes the raw file.
    command : tuple of str
        The command line.
    return_code : int or None
        Exit status, negative for a signal; None where the run was stopped at the time limit.
    log : str
        All that was printed.
    flooded : bool
        Whether the run was stopped because it printed too much.
    """

    deck: Path
    raw: Path
    stop_time: float | None
    writes_raw: bool
    command: tuple[str, ...]
    return_code: int | None
    log: str
    flooded: bool = False

    @property
    def context(self) -> dict[str, Any]:
        """The keywords that every error of the engine takes."""
        return {
            "command": self.command,
            "return_code": self.return_code,
            "log_tail": log_tail(self.log),
            "deck": self.deck,
        }


def check_end(attempt: Attempt, errors: str, timeout: float) -> None:
    """Raise the failure that the end of the process or its standard error tells of.

    Parameters
    ----------
    attempt : Attempt
        The run.
    errors : str
        What was printed on standard error.
    timeout : float
        The time limit [s].

    Raises
    ------
    EngineTimeout, EngineCrashed, DeckRejected, ConvergenceError
        As their names say.
    """
    code, deck, stop = attempt.return_code, attempt.deck.name, attempt.stop_time
    if code is None and attempt.flooded:
        raise EngineCrashed(
            f"ngspice printed more than {bounds.LOG_ROOM // 2**20} MiB while it ran {deck} and was stopped; look for a "
            "part that makes it warn at every step",
            **attempt.context,
        )
    if code == -signal.SIGXFSZ:
        raise EngineCrashed(
            f"ngspice wrote more than {bounds.FILE_LIMIT / 2**30:g} GiB into one file while it ran {deck} and was "
            f"stopped{_progress(time_reached(attempt.raw), stop)}; let the run be shorter or take longer steps",
            **attempt.context,
        )
    if code is None or code == -signal.SIGXCPU:
        raise EngineTimeout(
            f"ngspice did not finish {deck} within {timeout:g} s and was stopped"
            f"{_progress(time_reached(attempt.raw), stop)}; raise the time limit, "
            "or let the run take fewer and longer steps",
            **attempt.context,
        )
    if code < 0:
        raise EngineCrashed(
            f"ngspice was ended by {_signal_name(-code)} while it ran {deck}; look for a .func or .include "
            "that calls itself, then try another version of ngspice",
            **attempt.context,
        )
    failure = find_failure(errors)
    if failure is not None and failure.converged:
        raise DeckRejected(f"ngspice refused {deck}: {failure.message}", **attempt.context)
    if failure is not None:
        # Not from the raw file: its last transient may be another one that came to its end.
        raise ConvergenceError(
            f"ngspice stopped in {deck}{_progress(failure.time, stop)}: {failure.message}",
            time_reached=failure.time,
            stop=stop,
            **attempt.context,
        )
    if code > 0:
        unquit = attempt.writes_raw and attempt.raw.exists()
        advice = "a .control block must end with 'quit 0'" if unquit else "see what ngspice said"
        raise DeckRejected(f"ngspice ended {deck} with exit status {code}; {advice}", **attempt.context)
    if not attempt.raw.exists():
        advice = "no analysis ran; add an analysis card (.op, .ac, .tran)"
        if attempt.writes_raw:
            advice = f"it wrote no {attempt.raw.name}; let the .control block write it after each analysis"
        raise DeckRejected(f"ngspice ran {deck}, but {advice}", **attempt.context)


def check_plots(attempt: Attempt, plots: tuple[Plot, ...]) -> None:
    """Raise where the plots are not what a run to the end leaves.

    Parameters
    ----------
    attempt : Attempt
        The run.
    plots : tuple of Plot
        What its raw file has.

    Raises
    ------
    DeckRejected, RawFileError, ConvergenceError
        No analysis, a nameless node, a plot without its end, a transient that ended early.
    """
    deck, stop = attempt.deck.name, attempt.stop_time
    for plot in plots:
        if plot.name == "constants":
            raise DeckRejected(
                f"{deck} wrote the constants of ngspice: no analysis ran before 'write'", **attempt.context
            )
        if "v()" in plot.names:
            raise DeckRejected(f"an element of {deck} lacks a node; complete its line", **attempt.context)
        if not plot.complete:
            raise RawFileError(
                f"'{plot.name}' of {deck} was not written to its end; is the disk full?", **attempt.context
            )
        finite = np.isfinite(plot.data)
        if not finite.all():
            row, column = (int(k) for k in np.argwhere(~finite)[0])
            at = float(plot.data[row, 0].real)
            where = f" from {plot.names[0]} = {at:.6g} on" if math.isfinite(at) else ""
            raise ConvergenceError(
                f"{plot.names[column]} in {deck} is not a finite number{where}; look for a division by zero or a "
                "power that grows without bound in a behavioural source",
                time_reached=at if plot.names[0] == "time" else None,
                stop=stop,
                **attempt.context,
            )
    if stop is None:
        return
    transients = [plot for plot in plots if plot.names[0] == "time"]
    if not transients:
        raise DeckRejected(f"{deck} has no transient analysis; add a .tran card", **attempt.context)
    reached = min(float(plot["time"][-1].real) for plot in transients)
    if not reached >= stop * (1 - STOP_TOLERANCE):
        raise ConvergenceError(
            f"the transient of {deck} ended early{_progress(reached, stop)}; correct its stop time, "
            "or take out what stops it",
            time_reached=reached,
            stop=stop,
            **attempt.context,
        )


def _progress(reached: float | None, stop: float | None) -> str:
    if reached is None or not math.isfinite(reached):
        return ""
    return f" at {reached:.6g} s" + ("" if stop is None else f" of {stop:.6g} s")


def _signal_name(number: int) -> str:
    try:
        return signal.Signals(number).name
    except ValueError:
        return f"signal {number}"
