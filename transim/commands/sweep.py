"""Command `sweep`: step one or two parameters through a range."""

from __future__ import annotations

from transim.commands.console import Console
from transim.commands.studying import StudyRequest, keep_decks, planned

__all__ = ["sweep_and_report"]


def sweep_and_report(console: Console, request: StudyRequest) -> int:
    """Run a sweep, or go on with it, and report it.

    Parameters
    ----------
    console : Console
        Where table and document go.
    request : StudyRequest
        What is asked for.

    Returns
    -------
    int
        Exit status: 0 where all limits hold at some point, 1 where they hold nowhere.

    Raises
    ------
    TransimError
        As `run_sweep`.
    """
    from transim.design.studies import Sweep
    from transim.design.toml import read_design
    from transim.design.vary import study_of
    from transim.report.document import json_text
    from transim.report.sweep_tables import sweep_document, sweep_lines
    from transim.study.store import write_whole
    from transim.study.sweep import run_sweep

    design = read_design(request.design_file)
    sweep = study_of(design, Sweep, request.vary, {"driver": list(request.drivers) or None})
    folder = request.folder("sweep")
    with planned(console, request, "sweep") as plan:
        outcome = run_sweep(design, sweep, plan)
        document = sweep_document(outcome, str(folder))
        write_whole(folder / "result.json", json_text(document))
        keep_decks(folder, "best", outcome.best)
        if request.figures is not None:
            from transim.report.study_gallery import sweep_figures, write_study_figures

            write_study_figures(request.figures, sweep_figures(outcome))
    console.write(sweep_lines(outcome, str(folder)))
    console.document(document)
    return 0 if outcome.feasible.any() else 1
