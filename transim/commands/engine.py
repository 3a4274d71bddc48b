"""Command `engine`: which ngspice is used, and whether it solves."""

from __future__ import annotations

import os

from transim.commands.console import Console
from transim.engine import find_engine, self_check
from transim.engine.ngspice import OLDEST, TESTED, VARIABLE
from transim.errors import EngineError
from transim.report.document import engine_document

__all__ = ["show_engine"]


def show_engine(console: Console, ngspice: str | None) -> int:
    """Say which ngspice is used and why, and let it solve a circuit with a known answer.

    Parameters
    ----------
    console : Console
        Where to write.
    ngspice : str or None
        The executable that is asked for.

    Returns
    -------
    int
        Exit status: 0 where the answer is right, 3 where it is wrong.

    Raises
    ------
    EngineError
        If there is no ngspice, or it fails.
    """
    engine = find_engine(ngspice)
    variable = os.environ.get(VARIABLE)
    if ngspice:
        origin = "named by the option --ngspice"
    elif variable:
        origin = f"named by the environment variable {VARIABLE}"
    else:
        origin = f"found on PATH; neither the option --ngspice nor the variable {VARIABLE} names another"
    check = self_check(engine)
    tested = "" if check.version == TESTED else f"; it is run from {OLDEST} on, and was tested with {TESTED}"
    deviation = f"{check.deviation:.2g} V at most (limit {check.limit:g} V)"
    console.write(
        [
            f"engine     {engine.path}",
            f"           {origin}",
            f"version    ngspice {check.version}{tested}",
            f"self-test  {'PASS' if check.passed else 'FAIL'}; the discharge of a capacitor from 1 V differs from",
            f"           exp(-t/RC) by {deviation}; {1e3 * check.seconds:.0f} ms",
        ]
    )
    console.document(engine_document(engine, origin, check))
    return 0 if check.passed else EngineError.exit_code
