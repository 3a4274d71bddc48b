"""What `fit` says: parameters with their intervals, residuals, and a table for the design file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from transim.bench.estimation import Estimation
from transim.design.model import Junction
from transim.quantities import format_quantity
from transim.report.document import FORMAT
from transim.report.layout import Column, align, wrap

__all__ = ["Residuals", "fit_document", "fit_lines", "junction_table"]

Array = npt.NDArray[np.float64]

#: Misfit above which the model does not describe the data.
_POOR = 4.0


@dataclass(frozen=True)
class Residuals:
    """What one source leaves.

    Attributes
    ----------
    source : str
        File.
    place : ndarray, shape (n,)
        Instants [s] of a record; rows, counted from 1, of a table.
    value : ndarray, shape (n,)
        Measured less computed, in standard deviations.
    """

    source: str
    place: Array
    value: Array

    @property
    def rms(self) -> float:
        """Root mean square."""
        return float(np.sqrt(np.mean(self.value**2)))


def junction_table(junction: Junction, estimation: Estimation) -> list[str]:
    """Write the junction as a table of the design file.

    Parameters
    ----------
    junction : Junction
        As the design had it.
    estimation : Estimation
        What was fitted.

    Returns
    -------
    list of str
        Lines of TOML; fitted values with their interval in a comment.
    """
    lines = [f"[junction.{junction.name}]", f'part = "{junction.part.name}"']
    fitted = {one.name: one for one in estimation.parameters}
    for parameter in junction.part.parameters:
        name, unit = parameter.name, parameter.unit
        if name in fitted:
            one = fitted[name]
            low, high = (format_quantity(end, unit, 4) for end in (one.low, one.high))
            lines.append(f"{f'{name} = {_toml(one.value, unit, 5)}':<40}  # fitted; 95 %: {low} .. {high}")
        elif name in junction.values and junction.values[name] != parameter.default:
            lines.append(f"{name} = {_toml(junction.values[name], unit, 12)}")
    return lines


def _toml(value: float, unit: str, digits: int) -> str:
    return f"{value:.{digits}g}" if unit == "1" else f'"{format_quantity(value, unit, digits)}"'


def fit_lines(junction: Junction, estimation: Estimation, residuals: Sequence[Residuals]) -> list[str]:
    """Write the result of a fit.

    Parameters
    ----------
    junction : Junction
        As the design had it.
    estimation : Estimation
        What was found.
    residuals : sequence of Residuals
        By source.

    Returns
    -------
    list of str
        Parameters, residuals, then the table to paste.
    """
    found = estimation.parameters
    lines = align(
        [
            Column("parameter", tuple(one.name for one in found)),
            Column("estimate", tuple(format_quantity(one.value, one.unit) for one in found), right=True),
            Column("95 % from", tuple(format_quantity(one.low, one.unit) for one in found), right=True),
            Column("to", tuple(format_quantity(one.high, one.unit) for one in found), right=True),
            Column("in the design", tuple(format_quantity(one.start, one.unit) for one in found), right=True),
        ],
        "  ",
    )
    lines += ["", *align(
        [
            Column("compared with", tuple(one.source for one in residuals)),
            Column("data", tuple(str(one.value.size) for one in residuals), right=True),
            Column("rms residual", tuple(f"{one.rms:.3g}" for one in residuals), right=True),
            Column("largest", tuple(f"{np.abs(one.value).max():.3g}" for one in residuals), right=True),
        ],
        "  ",
    ), ""]  # fmt: skip
    pairs = [
        f"{a.name} and {b.name} {estimation.correlation[i, j]:+.2f}"
        for i, a in enumerate(found)
        for j, b in enumerate(found)
        if j > i
    ]
    if pairs:
        lines += wrap(f"Correlation: {', '.join(pairs)}.")
    lines += wrap("Residuals count in standard deviations of the data, where the data state one.")
    if estimation.misfit > _POOR and any(one.rms > _POOR for one in residuals):
        lines += wrap(
            f"Caution: the residuals are {estimation.misfit**0.5:.2g} times what the data's own noise explains; the "
            "model does not describe these data, and the intervals were widened by that factor."
        )
    return [*lines, "", *junction_table(junction, estimation)]


def fit_document(
    title: str, junction: Junction, estimation: Estimation, residuals: Sequence[Residuals]
) -> Mapping[str, Any]:
    """Return the document of a fit.

    Parameters
    ----------
    title : str
        Of the design.
    junction : Junction
        As the design had it.
    estimation : Estimation
        What was found.
    residuals : sequence of Residuals
        By source.

    Returns
    -------
    dict
        SI units; ``low`` and ``high`` are the ends of the 95 % interval.
    """
    return {
        "format": FORMAT,
        "title": title,
        "junction": junction.name,
        "part": junction.part.name,
        "parameters": [asdict(one) for one in estimation.parameters],
        "correlation": estimation.correlation.tolist(),
        "misfit": estimation.misfit,
        "evaluations": estimation.evaluations,
        "residuals": [
            {"source": one.source, "rms": one.rms, "place": one.place.tolist(), "value": one.value.tolist()}
            for one in residuals
        ],
        "table": "\n".join(junction_table(junction, estimation)) + "\n",
    }
