"""Command `deck`: every deck of a design as a file."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from transim.commands.console import Console
from transim.report.document import FORMAT
from transim.report.output import ResultFolder

__all__ = ["write_design_decks"]


def write_design_decks(
    console: Console, design_file: Path, out: Path, drivers: Sequence[str], *, force: bool
) -> int:
    """Write the decks without running them.

    Parameters
    ----------
    console : Console
        Where to write what was written.
    design_file : Path
        The design file.
    out : Path
        Folder for the decks.
    drivers : sequence of str
        Names of drivers; none means all.
    force : bool
        Whether decks of an earlier call are replaced.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    DesignError
        If the design cannot be used, or has no such driver.
    OutputError
        If the folder is not empty, or cannot be written.
    """
    from transim.design.toml import read_design
    from transim.report.cases import case_name, deck_file, placed_decks, write_decks
    from transim.study.decks import bias_sweep_decks
    from transim.study.run import choose_drivers

    design = read_design(design_file)
    written = []
    with ResultFolder(out, force=force) as folder:
        for driver in choose_drivers(design, drivers):
            for temperature in design.environment.temperature:
                name = case_name(design, driver.name, temperature)
                decks = placed_decks(design, driver, temperature)
                write_decks(folder / name, decks)
                written += [f"{name}/{file}" for file in decks]
        shared = {deck_file(deck): deck for deck in bias_sweep_decks(design)}
        write_decks(folder, shared)
        written += shared
    count = f"{len(written)} decks in {out}; the head of each says how to run it in plain ngspice"
    console.write([*written, count])
    console.document({"format": FORMAT, "folder": str(out), "decks": written})
    return 0
