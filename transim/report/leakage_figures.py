"""Figures of the video leakage: voltage at each RF port, and its spectrum."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from transim.measure.waveform import Waveform
from transim.quantities import format_quantity
from transim.report.cycle import Cycle, edge_span, lead_in
from transim.report.style import axis_scale, draw_series, drawn, label_lines, log_axis, name_axis, new_figure
from transim.report.trace import Trace

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

__all__ = ["leakage_figure", "spectrum_figure"]

Array = npt.NDArray[np.float64]

#: Frequencies in a decade that the spectrum is averaged around, and instances in each average.
_DECADE, _AVERAGED = 60, 6
#: Most terms of Fourier sums in one spectrum.
_EFFORT = 2e7
#: What is shown below the highest power [dB].
_DEPTH = 110.0


@drawn
def leakage_figure(cycle: Cycle) -> Figure:
    """Draw the voltage at each RF port, zoomed on both edges.

    Parameters
    ----------
    cycle : Cycle
        One case.

    Returns
    -------
    Figure
        A row a port; on edge left, off edge right. The voltage is that behind the video filter, where the
        design has one, and the largest peak of each panel is marked.
    """
    bandwidth = cycle.definitions.video_bandwidth
    seen = "" if bandwidth is None else f", through one pole at {format_quantity(bandwidth, 'Hz')}"
    ports = [_filtered(port, bandwidth) for port in cycle.leaking]
    figure, panels = new_figure(
        cycle.title,
        f"driver {cycle.name}: video leakage at the RF ports, without RF{seen}",
        len(ports),
        2,
        height=2.2,
        sharex="col",
        sharey="all",
    )
    scale, unit = axis_scale("V", *(port.value.real for port in ports))
    for column, edge in enumerate(("on", "off")):
        span = edge_span(cycle, edge, ports)
        times, time_unit = axis_scale("s", span)
        zero, low = cycle.edge(edge), lead_in(cycle, edge, span)
        for row, port in enumerate(ports):
            axes = panels[row, column]
            cut = port.between(zero + low, zero + span)
            draw_series(axes, row, (cut.time - zero) * times, cut.value.real * scale, port.name, marker="None")
            axes.axhline(0.0, color="#5d6570", linewidth=0.7)
            _mark_peak(axes, cut, zero, times, scale)
            name_axis(panels[row, 0], "y", f"voltage at {port.name}", unit)
        panels[0, column].set_title(f"{edge} edge")
        panels[0, column].set_xlim(low * times, span * times)
        name_axis(panels[-1, column], "x", f"time from the {edge} edge", time_unit)
    panels[0, 0].margins(y=0.15)
    return figure


def _filtered(port: Trace, bandwidth: float | None) -> Trace:
    if bandwidth is None:
        return port
    wave = Waveform(port.time, port.value, "V").lowpass(bandwidth)
    return Trace(port.name, "V", wave.time, wave.value)


def _mark_peak(axes: Axes, cut: Trace, zero: float, times: float, scale: float) -> None:
    place = int(np.argmax(np.abs(cut.value)))
    instant, value = float(cut.time[place]) - zero, float(cut.value[place].real)
    if value == 0.0:
        return
    axes.plot(
        [instant * times], [value * scale], "o", color="black", markerfacecolor="white", markersize=5, label="_peak"
    )
    left = place > 0 and instant > 0.55 * (float(cut.time[-1]) - zero)
    axes.annotate(
        f"{format_quantity(value, 'V', 3)} at {format_quantity(instant, 's', 3)}",
        (instant * times, value * scale),
        xytext=(-7 if left else 7, 0),
        textcoords="offset points",
        ha="right" if left else "left",
        va="center",
    )


@drawn
def spectrum_figure(cycle: Cycle) -> Figure:
    """Draw the spectrum of the leakage at each RF port, in the stated resolution bandwidth.

    Parameters
    ----------
    cycle : Cycle
        One case.

    Returns
    -------
    Figure
        Mean power in the resolution bandwidth against frequency; `video_inband` is marked at each carrier.
    """
    band, rate = cycle.definitions.resolution_bandwidth, 1.0 / cycle.timing.period
    carriers = sorted({frequency for _, frequency in cycle.envelopes})
    low = max(rate, 0.1 * band, 1e-3 * carriers[0])
    high = max(3.0 * carriers[-1], 1.0 / cycle.timing.edge)
    figure, panels = new_figure(
        cycle.title,
        f"driver {cycle.name}: spectrum of the video leakage; mean power in a resolution bandwidth of"
        f" {format_quantity(band, 'Hz')}, a pulse every {format_quantity(cycle.timing.period, 's')};"
        " circles: video_inband, at the carrier itself",
        height=3.6,
    )
    axes = panels[0, 0]
    lines, highest = [], -math.inf
    for place, port in enumerate(cycle.leaking):
        frequency, power = _band_power(cycle, port, low, high)
        lines.append(draw_series(axes, place, frequency, power, port.name))
        highest = max(highest, float(power.max()))
    log_axis(axes, "x", "Hz")
    axes.set_xlim(low, high)
    lowest = _mark_carriers(axes, cycle, carriers)
    axes.set_ylim(min(highest - _DEPTH, lowest - 4.0), highest + 6.0)
    name_axis(axes, "x", "frequency", "Hz")
    name_axis(axes, "y", f"power in {format_quantity(band, 'Hz')}", "dBm")
    label_lines(axes, lines)
    return figure


def _band_power(cycle: Cycle, port: Trace, low: float, high: float) -> tuple[Array, Array]:
    """Return frequencies and the mean power around each, so that the zeros between two pulses do not fill the page."""
    effort = _EFFORT / port.time.size
    count = int(min(_DECADE * math.log10(high / low), effort / _AVERAGED)) + 2
    frequency = np.geomspace(low, high, count)
    half = np.minimum(cycle.definitions.resolution_bandwidth / 2.0, 0.5 * frequency)
    half = np.maximum(half, 0.5 * frequency * (high / low) ** (1.0 / count) - 0.5 * frequency)
    offsets = (np.arange(_AVERAGED) + 0.5) / _AVERAGED * 2.0 - 1.0
    around = frequency[:, None] + half[:, None] * offsets
    level = cycle.leakage_power(port, around.ravel()).reshape(around.shape)
    return frequency, 10.0 * np.log10(np.mean(10.0 ** (level / 10.0), axis=1))


def _mark_carriers(axes: Axes, cycle: Cycle, carriers: list[float]) -> float:
    """Mark the leakage at each carrier; return the lowest of them [dBm]."""
    lowest = math.inf
    for number, carrier in enumerate(carriers):
        axes.axvline(carrier, color="black", linewidth=0.8, linestyle=(0, (1, 2)), label="_carrier")
        found = [result for result in cycle.results if result.carrier == carrier]
        value = found[0].figures["video_inband"].value if found else None
        text = format_quantity(carrier, "Hz", 12)
        if value is not None:
            lowest = min(lowest, value)
            axes.plot([carrier], [value], "o", color="black", markerfacecolor="white", label="_inband")
            text += f"\n{format_quantity(value, 'dBm')}"
        axes.annotate(
            text,
            (carrier, 0.97 - 0.13 * (number % 4)),
            xycoords=("data", "axes fraction"),
            xytext=(-4, 0),
            textcoords="offset points",
            ha="right",
            va="top",
            bbox={"boxstyle": "round,pad=0.1", "facecolor": "white", "edgecolor": "none", "alpha": 0.8},
        )
    return lowest
