"""Points of a study, whose static and video decks run as one, against single runs of the same values.

Outside reference: ngspice itself, run on each deck by itself as ``transim run`` does.
"""

from __future__ import annotations

import subprocess
from dataclasses import dataclass, field
from pathlib import Path

import pytest

from transim.design.toml import read_design
from transim.engine.ngspice import Engine
from transim.engine.rawfile import read_raw
from transim.errors import ConvergenceError, EngineTimeout
from transim.study import together
from transim.study.case import Case
from transim.study.point import Setup, simulate_point
from transim.study.run import run_design

EXAMPLES = Path(__file__).parents[2] / "examples"


def example(name, *, drivers=(), carriers=1, **tables):
    design = read_design(EXAMPLES / f"{name}.toml")
    carrier = design.carrier.model_copy(update={"frequency": design.carrier.frequency[-carriers:]})
    chosen = tuple(driver for driver in design.drivers if driver.name in drivers or not drivers)
    changes = {key: getattr(design, key).model_copy(update=value) for key, value in tables.items()}
    return design.model_copy(update={"static": None, "carrier": carrier, "drivers": chosen, **changes})


def point_of(design, parameters=(), values=()):
    return simulate_point(Setup(design, tuple(parameters), ()), tuple(values))


def assert_like_a_single_run(point, design, engine):
    assert point.reason is None
    results = run_design(design, engine).results
    assert len(point.cases) == len(results) > 0
    for case, result in zip(point.cases, results, strict=True):
        assert (case.driver, case.carrier, case.throw) == (result.driver, result.carrier, result.throw)
        assert set(case.figures) == set(result.figures)
        for name, figure in result.figures.items():
            if figure.value is None:
                assert (case.figures[name], case.notes[name]) == (None, figure.note), name
            else:
                assert case.figures[name] == pytest.approx(figure.value, rel=1e-9), name
        judged = [(one.metric, one.verdict) for one in (*result.judgements, *result.ratings)]
        assert [(one.metric, one.verdict) for one in case.judgements] == judged
        assert case.faults == result.faults


@pytest.mark.parametrize(
    ("name", "options"),
    [
        ("commutator_pin", {}),
        ("commutator_pin", {"carriers": 2, "drivers": ("fast",), "environment": {"temperature": (-40.0, 85.0)}}),
        ("commutator_pin", {"drivers": ("rails",), "control": {"pulses": 3, "period": 4e-6}}),
        ("commutator_bjt", {}),
        ("commutator_two", {"drivers": ("rails",), "carriers": 2}),
    ],
    ids=["p-i-n", "temperatures and carriers", "train", "transistor", "two throws"],
)
def test_a_point_is_like_a_single_run(engine, name, options):
    design = example(name, **options)
    assert_like_a_single_run(point_of(design), design, engine)


def cells(tmp_path):
    """Return a design whose flattened circuit changes with a parameter."""
    text = (EXAMPLES / "commutator_pin.toml").read_text().replace('"pin_lumped"', '"pin_distributed"')
    file = tmp_path / "cells.toml"
    file.write_text(text)
    design = read_design(file)
    drivers = tuple(driver for driver in design.drivers if driver.name == "gate")
    control = design.control.model_copy(update={"on_for": 0.4e-6, "period": 0.8e-6})
    carrier = design.carrier.model_copy(update={"frequency": (150e6,)})
    return design.model_copy(update={"static": None, "drivers": drivers, "carrier": carrier, "control": control})


def rows(design, order, parameter):
    together._known.clear()
    return {value: point_of(design, [parameter], [value]).text() for value in order}


def test_points_do_not_depend_on_those_before_where_the_circuit_itself_changes(tmp_path):
    design = cells(tmp_path)
    first = rows(design, (2.0, 3.0), "junction.hp7.cells")
    assert rows(design, (3.0, 2.0), "junction.hp7.cells") == first


def test_points_do_not_depend_on_those_before_where_numbers_change():
    design = example("commutator_pin", drivers=("fast", "rails"))
    values = (150.0, 220.0, 330.0)
    first = rows(design, values, "driver.fast.series_resistor")
    assert rows(design, values[::-1], "driver.fast.series_resistor") == first
    assert len(set(first.values())) == len(values)


@pytest.mark.parametrize("wrong", [(), ("@d.nowhere[vd]",), ("@d.xpath.xj1.x1.dj[vd]",)], ids=["none", "other", "one"])
def test_a_wrong_guess_of_what_to_save_changes_nothing(wrong):
    design = example("commutator_pin", drivers=("fast",))
    together._known.clear()
    right = point_of(design).text()
    ((shape, known),) = together._known.items()
    together._known[shape] = wrong
    assert point_of(design).text() == right
    assert together._known[shape] == known


@dataclass(frozen=True)
class Watched(Engine):
    """ngspice that fails on decks of some names, and keeps the names of all."""

    failing: dict = field(default_factory=dict)
    names: list = field(default_factory=list)

    def run(self, deck, **options):
        name = options["name"]
        self.names.append(name)
        if name in self.failing:
            raise self.failing[name]
        return super().run(deck, **options)


def watched(monkeypatch, engine, **failing):
    own = Watched(engine.path, failing)
    monkeypatch.setattr("transim.study.point._engine", lambda *_: own)
    return own


def test_one_process_a_driver_is_enough_once_the_circuit_is_known(engine, monkeypatch):
    own = watched(monkeypatch, engine)
    design = example("commutator_pin", drivers=("fast",))
    point_of(design, ["driver.fast.speedup_cap"], [1e-9])
    own.names.clear()
    point_of(design, ["driver.fast.speedup_cap"], [2e-9])
    assert own.names == ["point"]


def test_without_a_solution_a_point_is_run_as_a_single_run_is(engine, monkeypatch):
    own = watched(monkeypatch, engine, point=ConvergenceError("no solution was found"))
    design = example("commutator_pin", drivers=("fast",))
    point_of(design)
    own.names.clear()
    assert_like_a_single_run(point_of(design), design, engine)
    assert own.names == ["point", "static", "video"]


def test_the_reason_of_a_failed_point_is_that_of_a_single_run(engine, monkeypatch):
    error = "no solution was found: the time step became too small"
    own = watched(monkeypatch, engine, point=ConvergenceError(error), video=ConvergenceError(error))
    point = point_of(example("commutator_pin", drivers=("fast",)))
    assert point.cases == ()
    assert "the time step became too small; a second try with reltol=0.001" in point.reason
    assert own.names[-2:] == ["video", "video"]


def test_a_time_limit_ends_a_point_at_once(engine, monkeypatch):
    design = example("commutator_pin", drivers=("fast",))
    point_of(design)
    own = watched(monkeypatch, engine, point=EngineTimeout("ngspice did not finish point.cir within 60 s"))
    assert "did not finish" in point_of(design).reason
    assert own.names == ["point"]


def test_the_time_limit_of_the_design_holds_for_the_deck():
    design = example("commutator_pin", drivers=("fast",))
    point_of(design)
    short = design.model_copy(update={"numerics": design.numerics.model_copy(update={"timeout": 1e-3})})
    point = point_of(short)
    assert "within 0.001 s" in point.reason
    assert point.deck.startswith("* transim point deck")


def test_the_deck_runs_in_plain_ngspice(engine, tmp_path):
    design = example("commutator_two", drivers=("rails",), carriers=2)
    case = Case(design, design.drivers[0], 25.0, engine)
    case.point(())
    (tmp_path / "point.cir").write_text(case.decks[0].text)
    done = subprocess.run([engine.path, "-b", "point.cir"], cwd=tmp_path, capture_output=True, check=False, timeout=60)
    assert done.returncode == 0
    transient, *waves = read_raw(tmp_path / "point.raw")
    assert transient["time"][-1] == pytest.approx(case.timeline.stop)
    # two states, one port that RF enters, two carriers
    assert [float(plot["frequency"][0].real) for plot in waves] == [30e6, 150e6] * 2

