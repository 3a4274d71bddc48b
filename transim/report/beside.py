"""A run beside a measured record: differences in units of the record's uncertainty, and both envelopes overlaid."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from transim.bench.beside import Difference, Overlay, check_definitions, differences, overlay, same_carrier
from transim.bench.measured import Measured, read_measured
from transim.circuit.timeline import timeline_of
from transim.design.model import Design
from transim.errors import RecordError
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.layout import Column, align, wrap
from transim.report.style import axis_scale, draw_series, drawn, label_lines, name_axis, new_figure, save_figure
from transim.report.waveforms import carrier_name
from transim.study.result import Result
from transim.study.run import Outcome

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["Beside", "beside_document", "beside_lines", "hold_beside", "read_beside", "write_overlays"]

#: A difference of more standard uncertainties is not explained by the record's own.
_AGREES = 2.0


@dataclass(frozen=True)
class Beside:
    """One result beside the record.

    Attributes
    ----------
    result : Result
        The simulated one.
    title : str
        Of the design.
    temperature_named : bool
        Whether the design has several temperatures.
    differences : tuple of Difference
        By metric.
    overlays : tuple of Overlay
        Envelope of each edge.
    """

    result: Result
    title: str
    temperature_named: bool
    differences: tuple[Difference, ...]
    overlays: tuple[Overlay, ...]

    @property
    def name(self) -> str:
        """Driver, throw, carrier and analysis, fit for a file."""
        result = self.result
        at = f"_{format_quantity(result.temperature, 'degC', 12).replace(' ', '')}" if self.temperature_named else ""
        return f"{result.label.replace(' ', '_')}_{carrier_name(result.carrier)}_{result.analysis}{at}"


def read_beside(entry: str, design: Design) -> tuple[Measured, str | None]:
    """Read the record that a run is held against, before it is run.

    Parameters
    ----------
    entry : str
        ``DRIVER=FILE`` or ``FILE``.
    design : Design
        The design.

    Returns
    -------
    Measured
        The record.
    str or None
        The driver that it was taken with; None: held against every driver.

    Raises
    ------
    RecordError
        If it cannot be read, was measured by other definitions, or at another carrier.
    """
    name, equals, file = entry.partition("=")
    driver = name if equals and name in {one.name for one in design.drivers} else None
    measured = read_measured(Path(file if driver else entry))
    check_definitions(measured, design.definitions)
    carriers = design.carrier.frequency
    if not any(same_carrier(measured, carrier) for carrier in carriers):
        found = format_quantity(measured.carrier or 0.0, "Hz")
        wanted = ", ".join(format_quantity(carrier, "Hz") for carrier in carriers)
        raise RecordError(f"taken at {found}; the design's carriers are {wanted}", file=measured.file)
    return measured, driver


def hold_beside(outcome: Outcome, measured: Measured, driver: str | None) -> tuple[Beside, ...]:
    """Compare every result at the record's carrier with it; of several throws, those that pass when the record does.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.
    measured : Measured
        The record.
    driver : str or None
        Its driver; None: all.

    Returns
    -------
    tuple of Beside
        One a result.
    """
    throws = outcome.design.switch.path.throws
    passes = {throw.name if len(throws) > 1 else "": throw.passes_high for throw in throws}
    several = len(outcome.design.environment.temperature) > 1
    found = []
    for case in outcome.cases:
        for result in case.results:
            if driver not in (None, result.driver) or not same_carrier(measured, result.carrier):
                continue
            if len(throws) > 1 and passes[result.throw] != measured.passes_high:
                continue
            timing = timeline_of(outcome.design).timing(passes[result.throw])
            envelope = case.throw(result.throw).envelopes.get((result.analysis, result.carrier))
            loss = result.figures["insertion_loss"].value
            lines: tuple[Overlay, ...] = ()
            if envelope is not None and loss is not None:
                lines = overlay(measured, envelope, timing, 10.0 ** (-loss / 20.0))
            found.append(Beside(result, outcome.design.title, several, differences(measured, result.figures), lines))
    return tuple(found)


def beside_lines(measured: Measured, besides: tuple[Beside, ...]) -> list[str]:
    """Write the differences.

    Parameters
    ----------
    measured : Measured
        The record.
    besides : tuple of Beside
        What it was compared with.

    Returns
    -------
    list of str
        A table a result.
    """
    lines = []
    for one in besides:
        result = one.result
        place = f"{format_quantity(result.carrier, 'Hz', 12)} and {format_quantity(result.temperature, 'degC', 12)}"
        lines += [f"{result.label} at {place}, {result.analysis} analysis, beside {measured.file.name}", ""]
        if not one.differences:
            lines += ["  no metric that both have", ""]
            continue
        lines += align(_columns(one.differences), "  ")
        far = [each.metric for each in one.differences if abs(each.ratio) > _AGREES]
        told = f"more than {_AGREES:g} u apart: {', '.join(far)}" if far else f"all within {_AGREES:g} u"
        lines += ["", *wrap(f"u is the record's standard uncertainty; {told}", "  "), ""]
    return lines[:-1]


def _columns(found: tuple[Difference, ...]) -> list[Column]:
    units = [METRICS[one.metric].unit for one in found]
    rows = list(zip(found, units, strict=True))
    widths = [(one.uncertainty, "dB" if unit == "dBm" else unit) for one, unit in rows]
    return [
        Column("metric", tuple(one.metric for one in found)),
        Column("simulated", tuple(format_quantity(one.simulated, unit) for one, unit in rows), right=True),
        Column("measured", tuple(format_quantity(one.measured, unit) for one, unit in rows), right=True),
        Column("u", tuple(format_quantity(value, unit, 2) for value, unit in widths), right=True),
        Column("difference", tuple(f"{one.ratio:+.1f} u" for one in found), right=True),
    ]


def beside_document(measured: Measured, besides: tuple[Beside, ...]) -> Mapping[str, Any]:
    """Return the comparison for the document of the run.

    Parameters
    ----------
    measured : Measured
        The record.
    besides : tuple of Beside
        What it was compared with.

    Returns
    -------
    dict
        ``ratio`` is simulated less measured over the standard uncertainty.
    """
    return {
        "record": measured.file.name,
        "results": [
            {
                "driver": one.result.driver,
                "throw": one.result.throw or None,
                "carrier": one.result.carrier,
                "temperature": one.result.temperature,
                "analysis": one.result.analysis,
                "differences": [asdict(each) for each in one.differences],
            }
            for one in besides
        ],
    }


def write_overlays(folder: Path, besides: tuple[Beside, ...], *, figures: bool) -> None:
    """Write both envelopes on one time axis.

    Parameters
    ----------
    folder : Path
        Where they go.
    besides : tuple of Beside
        What was compared.
    figures : bool
        Whether as PNG and SVG, or as comma-separated text.
    """
    for one in besides:
        if not one.overlays:
            continue
        if figures:
            save_figure(overlay_figure(one), folder / f"beside_{one.name}")
            continue
        (folder / f"beside_{one.name}.csv").write_text("\n".join(_rows(one)) + "\n", encoding="utf-8")


def _rows(one: Beside) -> Iterator[str]:
    yield "edge,time from the edge [s],measured [1],simulated [1]"
    for part in one.overlays:
        for time, measured, simulated in zip(part.time, part.measured, part.simulated, strict=True):
            yield f"{part.edge},{time:.9g},{measured:.6g},{simulated:.6g}"


@drawn
def overlay_figure(one: Beside) -> Figure:
    """Draw record and simulation over each other.

    Parameters
    ----------
    one : Beside
        A result beside the record.

    Returns
    -------
    Figure
        A column an edge; above linear, below in dB.
    """
    carrier = format_quantity(one.result.carrier, "Hz", 12)
    what = f"driver {one.result.label} at {carrier}, {one.result.analysis} analysis, beside the record"
    figure, panels = new_figure(one.title, what, 2, len(one.overlays), sharex="col")
    for column, part in enumerate(one.overlays):
        scale, unit = axis_scale("s", part.time)
        for row, name in ((0, "RF voltage"), (1, "RF level")):
            axes = panels[row, column]
            lines = []
            for place, (label, size) in enumerate((("measured", part.measured), ("simulated", part.simulated))):
                shown = size if row == 0 else 20.0 * np.log10(np.where(size > 0.0, size, np.nan))
                options = {"linestyle": "none", "markevery": 1, "markersize": 2.5} if place == 0 else {"marker": ""}
                lines.append(draw_series(axes, place, part.time * scale, shown, label, **options))
            name_axis(axes, "y", name, "1" if row == 0 else "dB")
            label_lines(axes, lines)
        name_axis(panels[1, column], "x", f"time from the {part.edge} edge", unit)
    return figure
