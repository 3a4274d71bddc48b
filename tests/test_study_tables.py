"""Study tables of a design, parameters by name, and what is said of wrong ones."""

from pathlib import Path

import pytest

from transim.design.parameters import changed_design, parameter_value, parameters_of
from transim.design.studies import Spread, Sweep, Tune
from transim.design.toml import read_design
from transim.design.vary import study_of
from transim.errors import DesignError, InvalidDesign

EXAMPLE = Path(__file__).parents[1] / "examples" / "commutator_pin.toml"
TABLES = """
[sweep]
driver = "fast"
[sweep.vary]
driver.fast.speedup_cap = { from = "100 pF", to = "1 nF", steps = "E6" }
"control.edge" = { values = ["1 ns", "3 ns"] }
[tune]
goal = "smallest on_time"
runs = 40
[tune.vary]
driver.fast.speedup_cap = { from = "100 pF", to = "1 nF" }
[spread]
trials = 50
points = "sobol"
[spread.vary]
driver.fast.vp = { tolerance = "5 %" }
driver.fast.vn = { tolerance = "0.1 V", distribution = "normal", sigmas = 2.5 }
junction.hp7.lifetime = { tolerance = "30 %", lot = "wafer" }
environment.temperature = { from = "-20 degC", to = "60 degC" }
"""


@pytest.fixture
def design(tmp_path):
    def write(tables=TABLES):
        text = EXAMPLE.read_text(encoding="utf-8")
        for name in ("sweep", "tune", "spread"):
            text = text.split(f"\n[{name}]")[0]
        file = tmp_path / "mine.toml"
        file.write_text(text + tables, encoding="utf-8")
        return read_design(file)

    return write


def test_sweep_table(design):
    sweep = study_of(design(), Sweep)
    assert sweep.drivers == ("fast",)
    assert sweep.axes[0].values == (1e-10, 1.5e-10, 2.2e-10, 3.3e-10, 4.7e-10, 6.8e-10, 1e-9)
    assert (sweep.axes[1].parameter, sweep.axes[1].values, sweep.axes[1].unit) == ("control.edge", (1e-9, 3e-9), "s")


def test_tune_table(design):
    tune = study_of(design(), Tune)
    assert (tune.goal.direction, tune.goal.metric, tune.runs) == ("smallest", "on_time", 40)
    assert len(tune.axes[0].values) == 25


def test_spread_table(design):
    spread = study_of(design(), Spread)
    found = {tolerance.parameter: tolerance for tolerance in spread.tolerances}
    assert (spread.trials, spread.points) == (50, "sobol")
    assert (found["driver.fast.vp"].low, found["driver.fast.vp"].high) == (4.75, 5.25)
    assert (found["driver.fast.vn"].low, found["driver.fast.vn"].high) == (-5.1, -4.9)
    assert found["driver.fast.vn"].sigmas == 2.5
    assert (found["junction.hp7.lifetime"].low, found["junction.hp7.lifetime"].lot) == (7e-7, "wafer")
    assert (found["environment.temperature"].low, found["environment.temperature"].nominal) == (-20.0, 25.0)


@pytest.mark.parametrize(
    ("kind", "entry", "wanted"),
    [
        (Sweep, "control.edge = 1 ns .. 5 ns, linear 5", (1e-9, 2e-9, 3e-9, 4e-9, 5e-9)),
        (Sweep, "control.edge = 1 ns .. 100 ns, logarithmic 3", (1e-9, 1e-8, 1e-7)),
        (Sweep, "environment.temperature = -40 degC, 85 degC", (-40.0, 85.0)),
        (Tune, "driver.fast.series_resistor = 100 ohm .. 220 ohm, E6", (100.0, 150.0, 220.0)),
    ],
)
def test_a_command_line_takes_the_place_of_the_table(design, kind, entry, wanted):
    (axis,) = study_of(design(), kind, [entry]).axes
    assert axis.values == wanted


def test_tolerances_of_a_command_line(design):
    spread = study_of(design(), Spread, ["driver.fast.speedup_cap = 10 %, corners", "driver.fast.vp = 4 V .. 6 V"])
    first, second = spread.tolerances
    assert (first.low, first.high, first.distribution) == (1.08e-9, 1.32e-9, "corners")
    assert (second.low, second.high, second.nominal) == (4.0, 6.0, 5.0)


@pytest.mark.parametrize(
    ("table", "line", "key", "words"),
    [
        ('[sweep.vary]\ndriver.fast.speedupcap = { values = ["1 pF"] }', 1, "sweep.vary.driver.fast.speedupcap", "did you mean driver.fast.speedup_cap"),
        ('[sweep.vary]\ndriver.fast.speedup_cap = { values = ["1 pF", "1 F"] }', 1, "sweep.vary.driver.fast.speedup_cap.values[1]", "out of range"),
        ('[sweep.vary]\ncontrol.edge = { from = "1 ns", to = "1 V", steps = "E6" }', 1, "sweep.vary.control.edge.to", "voltage"),
        ('[sweep.vary]\ncontrol.edge = { from = "5 ns", to = "1 ns", steps = "E6" }', 1, "sweep.vary.control.edge", "range is empty"),
        ('[sweep.vary]\ncontrol.edge = { from = "5 ns", to = "9 ns", steps = "E7" }', 1, "sweep.vary.control.edge.steps", "unknown choice"),
        ('[sweep.vary]\ncontrol.edge = { from = "1 ns", to = "9 ns", steps = "linear" }', 1, "sweep.vary.control.edge.points", "missing"),
        ('[sweep.vary]\ndriver.fast.vn = { from = "-9 V", to = "9 V", steps = "E6" }', 1, "sweep.vary.driver.fast.vn", "above zero"),
        ('[tune]\ngoal = "smallest on_tme"\n[tune.vary]\ncontrol.edge = { from = "1 ns", to = "2 ns" }', 1, "tune.goal", "did you mean on_time"),
        ('[tune]\nrun = 3\n[tune.vary]\ncontrol.edge = { from = "1 ns", to = "2 ns" }', 1, "tune.run", "did you mean runs"),
        ('[spread.vary]\ncarrier.level = { tolerance = "5 %" }', 1, "spread.vary.carrier.level.tolerance", "says nothing"),
        ('[spread.vary]\ncarrier.frequency = { tolerance = "5 %" }', 1, "spread.vary.carrier.frequency.tolerance", "several values"),
        ('[spread.vary]\ndriver.fast.vp = { tolerance = "5 %", sigmas = 2.0 }', 1, "spread.vary.driver.fast.vp.sigmas", "normal"),
        ('[spread.vary]\ndriver.fast.vp = { tolerance = 5 }', 1, "spread.vary.driver.fast.vp.tolerance", "share of the value"),
        ('[spread.vary]\njunction.hp7.width = { tolerance = "200 %" }', 1, "spread.vary.junction.hp7.width.tolerance", "out of range"),
        ('[spread]\ntrials = 10\npoints = "corners"\n[spread.vary]\ndriver.fast.vp = { tolerance = "5 %" }', 1, "spread.trials", "corners"),
        ('[sweep]\ndriver = "fasst"\n[sweep.vary]\ncontrol.edge = { values = ["1 ns"] }', 1, "sweep.driver", "did you mean fast"),
    ],
)  # fmt: skip
def test_a_wrong_table_is_refused_at_its_place(design, table, line, key, words):
    with pytest.raises(InvalidDesign) as caught:
        design("\n" + table)
    (error,) = caught.value.errors
    assert error.key == key
    assert words in str(error)
    lines = Path(error.file).read_text(encoding="utf-8").splitlines()
    assert key.split(".")[-1].split("[")[0] in lines[error.line - 1] or "missing" in words
    assert error.line > len(lines) - len(table.splitlines()) - line


def test_every_parameter_can_be_set_to_its_own_value(design):
    plain = design("")
    for name in parameters_of(plain):
        value = parameter_value(plain, name)
        if value is not None:
            assert changed_design(plain, {name: value}) == plain


def test_one_parameter_changes_and_nothing_else(design):
    plain = design("")
    changed = changed_design(plain, {"junction.hp7.lifetime": 2e-6, "driver.fast.vp": 6.0, "environment.temperature": 85.0})
    assert {junction.values["lifetime"] for junction in changed.switch.junctions.values()} == {2e-6}
    assert [driver.values["vp"] for driver in changed.drivers] == [3.3, 5.0, 6.0]
    assert changed.environment.temperature == (85.0,)
    back = {"junction.hp7.lifetime": 1e-6, "driver.fast.vp": 5.0, "environment.temperature": 25.0}
    assert changed_design(changed, back) == plain


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ({"control.edge": 1e-3}, "longer than the pulse"),
        ({"driver.fast.vp": 1e6}, "out of range"),
        ({"driver.fast.vq": 1.0}, "did you mean driver.fast.v"),
    ],
)
def test_a_value_that_cannot_be_is_refused(design, values, words):
    with pytest.raises(DesignError, match=words):
        changed_design(design(""), values)
