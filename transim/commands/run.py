"""Command `run`: simulate the drivers of a design and judge them."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from transim.commands.console import Console
from transim.report.document import json_text, run_document
from transim.report.output import write_file
from transim.report.places import Places

if TYPE_CHECKING:
    from transim.bench.measured import Measured
    from transim.design.model import Design
    from transim.study.run import Outcome

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
    figures : Path or None
        Folder for figures; may lie in `out`.
    report : Path or None
        File for the report page; may lie in `out`.
    force : bool
        Whether results of an earlier run in it are replaced.
    certify : bool
        Whether every figure gets its numerical uncertainty, by runs at finer settings.
    beside : str or None
        A measured record that the run is held against: ``DRIVER=FILE`` or ``FILE``.
    shortest : bool
        Whether shortest usable pulse and gap are looked for, whatever the design says.
    """

    design_file: Path
    drivers: Sequence[str] = ()
    analysis: str = "envelope"
    ngspice: str | None = None
    out: Path | None = None
    figures: Path | None = None
    report: Path | None = None
    force: bool = False
    beside: str | None = None
    certify: bool = False
    shortest: bool = False


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
    RecordError
        If the record cannot be held against it.
    OutputError
        If a folder is not empty or cannot be written, or what draws the page is not installed.
    EngineError
        If ngspice is missing or fails.
    """
    started = time.perf_counter()
    from transim.design.toml import read_design
    from transim.engine import find_engine
    from transim.report.budget import budget_lines
    from transim.report.cautions import caution_lines
    from transim.report.pulses import pulse_lines
    from transim.report.ratings import rating_tables
    from transim.report.settled import settled_lines
    from transim.report.shortest import shortest_lines
    from transim.report.tables import metric_tables
    from transim.report.verdicts import head_lines, verdict_lines
    from transim.study.run import choose_drivers, run_design

    design = read_design(request.design_file)
    if request.shortest:
        design = design.model_copy(update={"shortest": True})
    choose_drivers(design, request.drivers)
    record = None if request.beside is None else _record(request.beside, design)
    engine = find_engine(request.ngspice)
    places = Places(request.out, request.figures, request.report, force=request.force)
    places.check()
    with places:
        with console.progress() as progress:
            outcome = run_design(
                design,
                engine,
                drivers=request.drivers,
                analysis=request.analysis,
                progress=progress,
                certify=request.certify,
            )
        document = run_document(outcome, time.perf_counter() - started)
        extra = [] if record is None else _beside(places, outcome, record, document)
        _write(places, outcome, document)
    blocks = (
        head_lines, metric_tables, pulse_lines, shortest_lines, budget_lines, rating_tables, settled_lines,
        caution_lines, verdict_lines,
    )  # fmt: skip
    texts = [lines for block in blocks if (lines := block(outcome))]
    texts[-1:-1] = [extra] if extra else []
    console.write([line for lines in texts for line in (*lines, "")][:-1])
    console.document(document)
    return EXIT[outcome.verdict]


def _record(entry: str, design: Design) -> tuple[Measured, str | None]:
    from transim.report.beside import read_beside

    return read_beside(entry, design)


def _beside(
    places: Places, outcome: Outcome, record: tuple[Measured, str | None], document: dict[str, Any]
) -> list[str]:
    """Hold the run against a record: add to the document, write overlays, return lines."""
    from transim.report.beside import beside_document, beside_lines, hold_beside, write_overlays

    measured, driver = record
    besides = hold_beside(outcome, measured, driver)
    document["beside"] = beside_document(measured, besides)
    if places.results is not None:
        write_overlays(places.results, besides, figures=False)
    if places.figures is not None:
        write_overlays(places.figures, besides, figures=True)
    return beside_lines(measured, besides)


def _write(places: Places, outcome: Outcome, document: Mapping[str, Any]) -> None:
    """Write the files that are wanted."""
    if places.results is not None:
        from transim.report.cases import write_cases

        write_cases(places.results, outcome)
        (places.results / "result.json").write_text(json_text(document), encoding="utf-8")
    if places.figures is not None:
        from transim.report.gallery import write_figures

        write_figures(places.figures, outcome)
    if places.report is not None:
        from transim.report.page import page_text

        write_file(places.report, page_text(outcome))
