"""Command `tune`: choose preferred values."""

from __future__ import annotations

from transim.commands.console import Console
from transim.commands.run import EXIT
from transim.commands.studying import StudyRequest, keep_decks, planned

__all__ = ["tune_and_report"]


def tune_and_report(
    console: Console, request: StudyRequest, goal: str | None = None, runs: int | None = None, seed: int | None = None
) -> int:
    """Search for the best values, or go on with it, and report them.

    Parameters
    ----------
    console : Console
        Where table and document go.
    request : StudyRequest
        What is asked for.
    goal : str or None
        What is made best, in place of the design file's.
    runs, seed : int or None
        Most points that are simulated, and the seed of the first ones, in place of the design file's.

    Returns
    -------
    int
        Exit status: that of a run of the best values; 3 where none could be simulated.

    Raises
    ------
    TransimError
        As `run_tune`.
    """
    from transim.design.studies import Tune
    from transim.design.toml import read_design
    from transim.design.vary import study_of
    from transim.report.document import json_text
    from transim.report.tune_tables import tune_document, tune_lines
    from transim.study.store import write_whole
    from transim.study.tune import run_tune

    design = read_design(request.design_file)
    settings = {"driver": list(request.drivers) or None, "goal": goal, "runs": runs, "seed": seed}
    tune = study_of(design, Tune, request.vary, settings)
    folder = request.folder("tune")
    with planned(console, request, "tune") as plan:
        outcome = run_tune(design, tune, plan)
        document = tune_document(outcome, str(folder))
        write_whole(folder / "result.json", json_text(document))
        keep_decks(folder, "best", outcome.verified)
        if request.figures is not None:
            from transim.report.study_gallery import tune_figures, write_study_figures

            write_study_figures(request.figures, tune_figures(outcome))
    console.write(tune_lines(outcome, str(folder)))
    console.document(document)
    return 3 if outcome.verified is None else EXIT[outcome.verified.verdict]
