"""The table `[control]` of a design whose command is recorded: levels, edges and pulses come from the record."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from pydantic import ValidationError

from transim.design.command import Command, read_command
from transim.design.faults import Faults
from transim.design.fields import Line, Quantity
from transim.design.model import Control
from transim.errors import DesignError

__all__ = ["read_recorded_control"]

_KNOWN = ("record", "period")
_FROM_RECORD = ("low", "high", "edge", "on_for", "pulses")


def read_recorded_control(faults: Faults, table: Mapping[str, object], folder: Path) -> Control | None:
    """Read a control table with the key `record`.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    table : mapping
        The table.
    folder : Path
        Of the design file; the record is relative to it.

    Returns
    -------
    Control or None
        None, with errors added, if something is wrong.
    """
    for key in table:
        if key in _FROM_RECORD:
            faults.adopt(("control", key), DesignError("the recorded command sets this; remove one of the two"))
        elif key not in _KNOWN:
            faults.unknown(("control", key), (*_KNOWN, *_FROM_RECORD))
    name = faults.value(("control", "record"), table["record"], Line(500))
    period = None
    if "period" in table:
        period = faults.value(("control", "period"), table["period"], Quantity("s", 0.0, 1e3, True))
    if name is None:
        return None
    try:
        command = read_command(folder / name)
    except DesignError as exc:
        faults.adopt(("control", "record"), exc)
        return None
    if period is None and (period := command.spacing) is None:
        faults.missing(("control", "period"), 'from one pulse to the next, such as "8 us": the record holds one pulse')
        return None
    return _control(faults, command, period, stated="period" in table)


def _control(faults: Faults, command: Command, period: float, *, stated: bool) -> Control | None:
    """Make the table; what does not fit is due to the period, where that was stated, else to the record."""
    rise, fall = command.pulses[-1]
    values = {
        "low": command.low,
        "high": command.high,
        "period": period,
        "on_for": fall - rise,
        "edge": command.edge,
        "pulses": len(command.pulses),
        "record": command,
    }
    try:
        return Control.model_validate(values)
    except ValidationError as exc:
        for detail in exc.errors(include_url=False):
            cause = detail.get("ctx", {}).get("error")
            error = cause if isinstance(cause, DesignError) else DesignError("the recorded command cannot be used")
            faults.adopt(("control", "period" if stated else "record"), error)
        return None
