"""The figures of a run: which there are, and where each is written."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from transim.quantities import format_quantity
from transim.report.cases import case_name
from transim.report.cycle import Cycle, cycles_of
from transim.report.leakage_figures import leakage_figure, spectrum_figure
from transim.report.static_figures import bias_figure, static_figure
from transim.report.style import save_figure
from transim.report.waveform_figures import cycle_figure, envelope_figure, overlay_figure
from transim.report.waveforms import carrier_name, envelope_name
from transim.study.run import Outcome

if TYPE_CHECKING:
    from matplotlib.figure import Figure

__all__ = ["run_figures", "write_figures"]


def run_figures(outcome: Outcome) -> Iterator[tuple[str, Figure]]:
    """Draw every figure of a run, one at a time.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Yields
    ------
    str, Figure
        Where it goes, without suffix: a folder a driver and temperature, and the comparisons beside them.
    """
    cycles = cycles_of(outcome)
    by_temperature: dict[float, list[Cycle]] = {}
    for cycle in cycles:
        by_temperature.setdefault(cycle.temperature, []).append(cycle)
    several = len(outcome.design.environment.temperature) > 1
    for temperature, group in by_temperature.items():
        at = f"_{format_quantity(temperature, 'degC', 12).replace(' ', '')}" if several else ""
        for analysis, carrier in group[0].envelopes:
            name = f"drivers_{carrier_name(carrier)}{'_resolved' if analysis == 'carrier' else ''}{at}"
            yield name, overlay_figure(group, analysis, carrier)
        yield f"static{at}", static_figure(group, outcome.design.limits)
    for sweep in outcome.bias_sweeps:
        at = format_quantity(sweep.temperature, "degC", 12).replace(" ", "")
        yield f"bias_{at}", bias_figure(outcome.design.title, sweep)
    for cycle in cycles:
        place = case_name(outcome.design, cycle.driver, cycle.temperature)
        own = f"_{cycle.throw}" if cycle.throw else ""
        yield f"{place}/cycle{own}", cycle_figure(cycle)
        for carrier in dict.fromkeys(frequency for _, frequency in cycle.envelopes):
            yield f"{place}/{envelope_name('envelope', carrier, cycle.throw)}", envelope_figure(cycle, carrier)
        yield f"{place}/leakage{own}", leakage_figure(cycle)
        yield f"{place}/spectrum{own}", spectrum_figure(cycle)


def write_figures(folder: Path, outcome: Outcome) -> None:
    """Write every figure of a run as PNG and as SVG.

    Parameters
    ----------
    folder : Path
        Where they go.
    outcome : Outcome
        The run of a design.
    """
    for name, figure in run_figures(outcome):
        save_figure(figure, folder / name)
