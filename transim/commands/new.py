"""Command `new`: a starting design file."""

from __future__ import annotations

from pathlib import Path

from transim.commands.console import Console
from transim.errors import OutputError
from transim.report.document import FORMAT
from transim.report.output import write_file

__all__ = ["new_design"]


def new_design(console: Console, file: str, path: str, driver: str, *, force: bool) -> int:
    """Write a complete design file with every key and its meaning.

    Parameters
    ----------
    console : Console
        Where to write.
    file : str
        The design file; ``-`` for standard output.
    path, driver : str
        Names of a path part and a driver part.
    force : bool
        Whether an existing file is replaced.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    OutputError
        If the file exists, or cannot be written.
    DesignError
        If there is no such part.
    """
    from transim.design.toml import starting_design
    from transim.parts.catalogue import load_catalogue

    target = Path(file)
    if file != "-" and target.is_file() and not force:
        raise OutputError(f"the file {file} exists; name another one, or add --force to replace it")
    text = starting_design(path, driver, load_catalogue())
    if file == "-":
        console.write(text.splitlines())
    else:
        write_file(target, text)
        console.write([f"a design with the path {path} and the driver {driver}; next: transim check {file}"])
    console.document(
        {"format": FORMAT, "file": None if file == "-" else file, "path": path, "driver": driver, "text": text}
    )
    return 0
