"""Figures: what is drawn, where, and under which words.

Outside references: instants of a single pole (IEEE Std 181-2011: 10 and 90 % at 0.105361 and 2.302585 time constants);
the Fourier integral of a decaying exponential, |V(f)| = V0 tau / sqrt(1 + (2 pi f tau)^2), and the line power
2 (P |V|)^2 / Z0 that follows (derived; the same as a published table gives for a repeated pulse).
"""

import re
import subprocess
import sys

import numpy as np
import pytest
from matplotlib.figure import Figure

from transim.measure.sweep import BiasSweep
from transim.report.cycle import cycles_of
from transim.report.gallery import run_figures
from transim.report.leakage_figures import spectrum_figure
from transim.report.static_figures import bias_figure, static_figure
from transim.report.study_figures import (
    Bounds,
    Quantity,
    Window,
    spread_figure,
    sweep_figure,
    sweep_map_figure,
    tune_figure,
)
from transim.report.style import axis_scale, save_figure
from transim.report.trace import Trace, thinned
from transim.report.waveform_figures import envelope_figure, overlay_figure

WINDOW = Window("c", "F", (1e-11, 9e-11), (3e-11, 5e-11), 4e-11)
UNIT = re.compile(r".+ \[(1|[fpnumkMGT]?(V|A|s|Hz|C|F|ohm)|dB|dBm)\]")


def _panels(figure: Figure):
    return [axes for axes in figure.axes if axes.get_subplotspec() is not None and axes.get_label() != "<colorbar>"]


def _check_axes(figure: Figure) -> None:
    """Every panel in the left column and in the last row says what it shows, in which unit."""
    for axes in _panels(figure):
        place = axes.get_subplotspec()
        if place.is_last_row():
            assert UNIT.fullmatch(axes.get_xlabel()), axes.get_xlabel()
        if place.is_first_col() and axes.get_yticks().size:
            assert UNIT.fullmatch(axes.get_ylabel()), axes.get_ylabel()


def test_every_figure_has_the_title_and_units_on_every_axis(invent):
    outcome = invent().outcome
    names = []
    for name, figure in run_figures(outcome):
        names.append(name)
        assert figure.get_suptitle().startswith("Reed, arm 2")
        _check_axes(figure)
    assert names[:2] == ["drivers_100MHz", "static"]
    assert {f"{driver}/{what}" for driver in ("slow", "quick") for what in ("cycle", "leakage", "spectrum")} < set(names)


def test_marks_stand_at_the_instants_of_a_single_pole(invent):
    cycle = cycles_of(invent(points=20001).outcome)[0]
    linear = envelope_figure(cycle, 100e6).axes[0]
    marks = [line for line in linear.get_lines() if line.get_label() == "_mark"]
    instants = [float(mark.get_xdata()[0]) for mark in marks]
    full = 10.0 ** (-0.5 / 20.0)
    scale = axis_scale("s", 1e-6)[0] if "us" in envelope_figure(cycle, 100e6).axes[2].get_xlabel() else 1e9
    assert instants == pytest.approx([0.105361 * 200e-9 * scale, 2.302585 * 200e-9 * scale], rel=2e-3)
    assert [float(mark.get_ydata()[0]) for mark in marks] == pytest.approx([0.1 * full, 0.9 * full], rel=1e-6)


def test_drivers_differ_without_colour(invent):
    figure = overlay_figure(cycles_of(invent().outcome), "envelope", 100e6)
    for axes in figure.axes:
        first, second = axes.get_lines()[:2]
        assert first.get_linestyle() != second.get_linestyle()
        assert first.get_marker() != second.get_marker()
    words = [text.get_text() for axes in figure.axes for text in axes.texts]
    assert words.count("slow") == words.count("quick") == 4


def test_spectrum_of_an_exponential_spike(invent):
    cycle = cycles_of(invent(points=20001).outcome)[0]
    frequency = np.array([1e6, 1e7, 3e7])
    tau, rate = 10e-9, 1.0 / 5e-6
    size = 0.1 * tau / np.sqrt(1.0 + (2.0 * np.pi * frequency * tau) ** 2)
    watts = 2.0 * (rate * size) ** 2 / 50.0 * (1e6 / rate)
    assert cycle.leakage_power(cycle.ports[0], frequency) == pytest.approx(10.0 * np.log10(watts / 1e-3), abs=0.05)
    figure = spectrum_figure(cycles_of(invent().outcome)[0])
    assert "resolution bandwidth of 1 MHz" in " ".join(figure.get_suptitle().split())
    assert figure.axes[0].get_ylabel() == "power in 1 MHz [dBm]"


def test_limits_are_hatched_and_in_sight(invent):
    outcome = invent().outcome
    figure = static_figure(cycles_of(outcome), outcome.design.limits)
    by_title = {axes.get_title(loc="left"): axes for axes in figure.axes}
    for title, bound in (("Insertion loss", 1.0), ("Isolation", 35.0)):
        axes = by_title[title]
        hatched = [patch for patch in axes.patches if patch.get_hatch()]
        assert len(hatched) == 1
        low, high = axes.get_ylim()
        assert low < bound < high
        lower = hatched[0].get_bbox().y0 if title == "Insertion loss" else hatched[0].get_bbox().y1
        assert lower == pytest.approx(bound)
    assert not [patch for patch in by_title["Return loss, on"].patches if patch.get_hatch()]


@pytest.mark.parametrize("title", [r"costs $\frac$ each", "\u65e5\u672c", "a_b^c " * 30])
def test_a_title_is_text_whatever_it_holds(tmp_path, title):
    save_figure(tune_figure(title, [WINDOW]), tmp_path / "tune")
    assert (tmp_path / "tune.png").read_bytes().startswith(b"\x89PNG")
    assert "<svg" in (tmp_path / "tune.svg").read_text(encoding="utf-8")
    # nothing keeps figures alive behind the back of the program
    assert "matplotlib.pyplot" not in sys.modules


def test_the_same_run_gives_the_same_file(tmp_path):
    for name in ("first", "second"):
        save_figure(tune_figure("Reed", [WINDOW]), tmp_path / name)
    for suffix in ("png", "svg"):
        assert (tmp_path / f"first.{suffix}").read_bytes() == (tmp_path / f"second.{suffix}").read_bytes()


def test_no_figure_no_cost():
    code = "import sys, transim.report.gallery, transim.report.study_figures; print('matplotlib' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout == "False\n"


@pytest.mark.parametrize("count", [10, 5000, 20001])
def test_thinning_keeps_extremes_and_ends(count):
    time = np.linspace(0.0, 1.0, count)
    value = np.sin(40.0 * time)
    value[count // 3], value[count // 2] = 7.0, -9.0
    trace = Trace("a", "V", time, value)
    short = thinned(trace, 5000)
    assert short.time.size <= 5000
    assert (short.value.max(), short.value.min()) == (7.0, -9.0)
    assert (short.time[0], short.time[-1]) == (0.0, 1.0)
    assert np.array_equal(short.value, value[np.searchsorted(time, short.time)])


@pytest.mark.parametrize(
    ("unit", "largest", "expected"),
    [("s", 3e-7, (1e9, "ns")), ("s", 1e-6, (1e6, "us")), ("A", 0.0, (1.0, "A")), ("dB", 80.0, (1.0, "dB"))],
)
def test_axis_scale(unit, largest, expected):
    scale, symbol = axis_scale(unit, largest)
    assert (scale, symbol) == (pytest.approx(expected[0]), expected[1])


def test_sweep_shows_every_curve_and_the_limit():
    x = np.geomspace(1e-11, 1e-9, 5)
    curves = [Quantity("30 MHz", "s", np.full(5, 2e-7)), Quantity("150 MHz", "s", np.full(5, 3e-7))]
    figure = sweep_figure("Reed", Quantity("speedup_cap", "F", x), "on_time", curves, Bounds(high=2.5e-7))
    axes = figure.axes[0]
    assert [line.get_ydata()[0] for line in axes.get_lines()[:2]] == pytest.approx([200.0, 300.0])
    assert axes.get_xscale() == "log"
    assert len([patch for patch in axes.patches if patch.get_hatch()]) == 1
    assert (axes.get_xlabel(), axes.get_ylabel()) == ("speedup_cap [F]", "on_time [ns]")


def test_map_hatches_what_is_not_feasible():
    z = np.arange(12.0).reshape(3, 4) * 1e-9
    z[0, 0] = np.nan
    feasible = np.isfinite(z) & (z < 6e-9)
    x, y = Quantity("a", "F", np.arange(1.0, 5.0) * 1e-12), Quantity("b", "ohm", np.array([10.0, 20.0, 30.0]))
    figure = sweep_map_figure("Reed", x, y, Quantity("on_time", "s", z), feasible)
    axes = figure.axes[0]
    hatched = [patch for patch in axes.patches if patch.get_hatch() and patch.get_edgecolor()[:3] == (1.0, 1.0, 1.0)]
    # cells are 1 pF wide and 10 ohm high
    assert sum(patch.get_width() * patch.get_height() for patch in hatched) == pytest.approx(10.0 * (~feasible).sum())
    crosses = next(line for line in axes.get_lines() if line.get_label() == "_undefined")
    assert (crosses.get_xdata().tolist(), crosses.get_ydata().tolist()) == ([1.0], [10.0])
    assert figure.axes[1].get_ylabel() == "on_time [ns]"


def test_tune_windows():
    figure = tune_figure("Reed", [WINDOW, Window("r", "ohm", (1e2, 2e2), None, 1.5e2)])
    first, second = figure.axes
    bar = next(patch for patch in first.patches if patch.get_label() == "window")
    assert (bar.get_bbox().x0, bar.get_bbox().x1) == (pytest.approx(30.0), pytest.approx(50.0))
    assert not second.patches
    assert "no window" in second.get_title(loc="left")


def test_spread_counts_every_sample_once():
    values = np.concatenate((np.linspace(1e-7, 2e-7, 99), [np.nan]))
    figure = spread_figure("Reed", Quantity("on_time", "s", values), Bounds(high=1.5e-7), nominal=1.4e-7)
    drawn = sum(patch.get_height() for patch in figure.axes[0].patches if not patch.get_hatch())
    assert drawn == 99
    # 100 ns to 150 ns in 98 steps of 100/98 ns: 0 to 49 of them
    assert "50 of 100 inside the limits, 1 undefined" in figure.get_suptitle()


def test_bias_sweep_has_a_line_a_carrier_and_a_junction():
    current = np.array([1e-6, 1e-4, 1e-2])
    sweep = BiasSweep(25.0, (3e7, 1.5e8), current, current, np.ones((3, 2)), {"xj1": current * 1e-6})
    figure = bias_figure("Reed", sweep)
    words = [text.get_text() for axes in figure.axes for text in axes.texts]
    assert words == ["150 MHz", "30 MHz", "xj1"]
    _check_axes(figure)
