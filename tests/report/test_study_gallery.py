"""Figures of studies: the right numbers of a table reach the right figure.

Outside reference: the numbers themselves, which are written here.
"""

from dataclasses import replace

import numpy as np
import pytest

from transim.design.axes import Axis
from transim.design.studies import Spread, Sweep, Tune
from transim.report.study_gallery import spread_figures, sweep_figures, tune_figures, write_study_figures
from transim.study.point import Point
from transim.study.spread import SpreadOutcome, Yield
from transim.study.study import Advance
from transim.study.sweep import SweepOutcome
from transim.study.table import CaseLabel, Table
from transim.study.tune import TuneOutcome
from transim.study.windows import Window

CAP = Axis("driver.slow.feed_resistor", "ohm", (100.0, 300.0, 200.0), "values")
LIFE = Axis("junction.reed.lifetime", "s", (1e-6, 2e-6), "values")
ADVANCE = Advance(done=6, total=6, failed=0, reused=0, seconds=1.0)


def _table(values: np.ndarray) -> Table:
    """Make a table whose two cases need 200 ns and 240 ns plus what the first parameter adds."""
    count = len(values)
    cases = tuple(CaseLabel("slow", 25.0, carrier, -10.0) for carrier in (3e7, 1.5e8))
    on = 1e-9 * (np.array([200.0, 240.0]) + values[:, :1] / 4.0)
    good = on <= 300e-9
    return Table(
        places=tuple(map(str, range(count))),
        parameters=("a", "b")[: values.shape[1]],
        units=("ohm", "s")[: values.shape[1]],
        values=values,
        cases=cases,
        figures={"on_time": on},
        case_good=good,
        case_margin=(300e-9 - on) / 300e-9,
        good=good.all(axis=1),
        failed=np.zeros(count, bool),
        margin=((300e-9 - on) / 300e-9).min(axis=1),
        reasons=(),
    )


def _sweep(invent, *axes) -> SweepOutcome:
    values = np.stack([grid.ravel() for grid in np.meshgrid(*(axis.values for axis in axes), indexing="ij")], axis=1)
    outcome = invent().outcome
    return SweepOutcome(outcome.design, Sweep(axes), ("slow",), _table(values), outcome, None, None, ADVANCE)


def test_a_sweep_over_one_parameter(invent):
    ((name, figure),) = sweep_figures(_sweep(invent, CAP))
    axes = figure.axes[0]
    first, second = axes.get_lines()[:2]
    assert name == "on_time"
    assert first.get_xdata().tolist() == [100.0, 200.0, 300.0]
    assert first.get_ydata() == pytest.approx([225.0, 250.0, 275.0])
    assert second.get_ydata() == pytest.approx([265.0, 290.0, 315.0])
    assert {text.get_text() for text in axes.texts} == {"30 MHz", "150 MHz"}
    assert [line.get_ydata()[0] for line in axes.get_lines() if line.get_label() == "_limit"] == pytest.approx([300.0])


def test_a_sweep_over_two_parameters(invent):
    figures = dict(sweep_figures(_sweep(invent, CAP, LIFE)))
    assert list(figures) == ["slow_margin", "slow_on_time"]
    axes = figures["slow_on_time"].axes[0]
    drawn = axes.collections[0].get_array()
    # the worst of both cases, resistors to the right, lifetimes upwards
    assert drawn.tolist() == [pytest.approx([265.0, 290.0, 315.0])] * 2
    hatched = [patch for patch in axes.patches if patch.get_hatch()]
    assert {patch.get_x() for patch in hatched} == {250.0}


def test_windows_of_a_tuning(invent):
    outcome = invent().outcome
    window = Window(CAP.parameter, "ohm", 100.0, 200.0, True, False, True)
    tuned = TuneOutcome(
        outcome.design, Tune((CAP, LIFE)), "slow", True, Point((200.0, 1e-6)), outcome,
        (window,), (), (), 6, ADVANCE,
    )  # fmt: skip
    ((name, figure),) = tune_figures(tuned)
    assert name == "windows"
    assert figure.axes[0].get_xlim() == (100.0, 300.0)
    assert "200 ohm in 100 ohm to 200 ohm" in figure.axes[0].get_title(loc="left")
    assert list(tune_figures(replace(tuned, best=None))) == []


def test_distribution_of_a_spread(invent, tmp_path):
    outcome = invent().outcome
    table = _table(np.array([[100.0], [200.0], [300.0], [100.0]]))
    total = Yield(3, 4, 0, 0.2, 0.9, 0.95)
    spread = SpreadOutcome(
        outcome.design, Spread(()), ("slow",), table, outcome, None, None, total, (total,), (), ADVANCE
    )
    figures = list(spread_figures(spread))
    assert [name for name, _ in figures] == ["slow_on_time"]
    assert "3 of 4 inside the limits" in figures[0][1].get_suptitle()
    (tmp_path / "notes.txt").write_text("mine")
    for _ in range(2):
        write_study_figures(tmp_path, figures)
    assert {file.name for file in tmp_path.iterdir()} == {
        "notes.txt", "files.txt", "slow_on_time.png", "slow_on_time.svg",
    }  # fmt: skip
