"""Command `run`: simulate the drivers of a design and judge them."""

from __future__ import annotations

import contextlib
import time
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from transim.commands.console import Console
from transim.report.document import json_text, run_document
from transim.report.output import ResultFolder

__all__ = ["EXIT", "RunRequest", "run_and_report"]

#: Exit status of each verdict.
EXIT = {"pass": 0, "fail": 1, "undefined": 4}


@dataclass(frozen=True)
class RunRequest:
    """What is to be run, and where the results go.

    Attributes
    ----------
    design_file : Path
        The design file.
    drivers : sequence of str
        Names of drivers; none means all.
    analysis : str
        ``envelope``, ``carrier`` or ``both``.
    ngspice : str or None
        The executable that is asked for.
    out : Path or None
        Folder for decks and waveforms.
    force : bool
        Whether results of an earlier run in it are replaced.
    """

    design_file: Path
    drivers: Sequence[str] = ()
    analysis: str = "envelope"
    ngspice: str | None = None
    out: Path | None = None
    force: bool = False


def run_and_report(console: Console, request: RunRequest) -> int:
    """Run a design and write its tables, its document and its folder.

    Parameters
    ----------
    console : Console
        Where tables and document go.
    request : RunRequest
        What to run.

    Returns
    -------
    int
        Exit status: 0 all limits met, 1 one missed, 4 one undefined.

    Raises
    ------
    DesignError, NetlistError
        If the design cannot be used.
    OutputError
        If the folder is not empty, or cannot be written.
    EngineError
        If ngspice is missing or fails.
    """
    started = time.perf_counter()
    from transim.design.toml import read_design
    from transim.engine import find_engine
    from transim.report.cautions import caution_lines
    from transim.report.ratings import rating_tables
    from transim.report.settled import settled_lines
    from transim.report.tables import metric_tables
    from transim.report.verdicts import head_lines, verdict_lines
    from transim.study.run import choose_drivers, run_design

    design = read_design(request.design_file)
    choose_drivers(design, request.drivers)
    engine = find_engine(request.ngspice)
    target = None if request.out is None else ResultFolder(request.out, force=request.force)
    with target or contextlib.nullcontext() as folder:
        with console.progress() as progress:
            outcome = run_design(
                design, engine, drivers=request.drivers, analysis=request.analysis, progress=progress
            )
        document = run_document(outcome, time.perf_counter() - started)
        if folder is not None:
            from transim.report.cases import write_cases

            write_cases(folder, outcome)
            (folder / "result.json").write_text(json_text(document), encoding="utf-8")
    blocks = (head_lines, metric_tables, rating_tables, settled_lines, caution_lines, verdict_lines)
    texts = [lines for block in blocks if (lines := block(outcome))]
    console.write([line for lines in texts for line in (*lines, "")][:-1])
    console.document(document)
    return EXIT[outcome.verdict]
