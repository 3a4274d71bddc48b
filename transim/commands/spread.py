"""Command `spread`: what tolerances do to a design."""

from __future__ import annotations

from transim.commands.console import Console
from transim.commands.studying import StudyRequest, keep_decks, planned

__all__ = ["spread_and_report"]


def spread_and_report(
    console: Console,
    request: StudyRequest,
    trials: int | None = None,
    points: str | None = None,
    seed: int | None = None,
) -> int:
    """Run the trials of a spread, or go on with them, and report them.

    Parameters
    ----------
    console : Console
        Where table and document go.
    request : StudyRequest
        What is asked for.
    trials, points, seed : int, str, int or None
        Number of trials, how they are chosen, and their seed, in place of the design file's.

    Returns
    -------
    int
        Exit status: 0 where every trial meets all limits, 1 where one does not, 3 where none could be simulated.

    Raises
    ------
    TransimError
        As `run_spread`.
    """
    from transim.design.studies import Spread
    from transim.design.toml import read_design
    from transim.design.vary import study_of
    from transim.report.document import json_text
    from transim.report.spread_tables import spread_document, spread_lines
    from transim.study.spread import run_spread
    from transim.study.store import write_whole

    design = read_design(request.design_file)
    settings = {"driver": list(request.drivers) or None, "trials": trials, "points": points, "seed": seed}
    spread = study_of(design, Spread, request.vary, settings)
    folder = request.folder("spread")
    with planned(console, request, "spread") as plan:
        outcome = run_spread(design, spread, plan)
        document = spread_document(outcome, str(folder))
        write_whole(folder / "result.json", json_text(document))
        keep_decks(folder, "worst", outcome.worst)
        if request.figures is not None:
            from transim.report.study_gallery import spread_figures, write_study_figures

            write_study_figures(request.figures, spread_figures(outcome))
    console.write(spread_lines(outcome, str(folder)))
    console.document(document)
    if not outcome.total.judged:
        return 3
    return 0 if outcome.total.good == outcome.total.judged else 1
