"""The envelope's own check: ngspice at the bias of an instant agrees with the frozen solution, and catches a wrong one.

Outside reference: ngspice's AC analysis with every nonlinear element held at its bias. All shipped paths with all
junctions that fit. 0.01 dB: the check couples each twin node by 1e-5 ohm, and its arithmetic has a floor at -60 dB.
"""

from dataclasses import replace

import numpy as np
import pytest

from transim.circuit.expression import Dual, Expression
from transim.design.toml import read_design
from transim.envelope.diode import DiodeLaw
from transim.envelope.transistor import TransistorLaw
from transim.parts.catalogue import load_catalogue
from transim.study.run import run_design

DESIGN = """
title = "bias check"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "1 us"
period = "3 us"
[carrier]
frequency = ["50 MHz", "400 MHz"]
level = "-70 dBm"
[switch]
path = "{path}"
junction = "{junction}"
[junction.{junction}]
part = "{junction}"
[driver.rails]
part = "push_pull_speedup"
[limits]
insertion_loss = {{ max = "30 dB" }}
[numerics]
steps = 200
"""


def combinations():
    parts = list(load_catalogue())
    for path in (part for part in parts if part.role == "path" and len(part.bias) == 1):
        for junction in (part for part in parts if part.role == "junction"):
            if all(tuple(slot.terminals) == tuple(junction.terminals) for slot in path.slots):
                yield path.name, junction.name


def simulated(engine, folder, path, junction):
    file = folder / "check.toml"
    file.write_text(DESIGN.format(path=path, junction=junction))
    return run_design(read_design(file), engine)


def test_there_are_combinations():
    found = set(combinations())
    assert {("series_single", "pin_lumped"), ("series_pair", "junction_diode"), ("series_bjt", "bjt_pair")} <= found


@pytest.mark.parametrize(("path", "junction"), list(combinations()))
def test_ngspice_agrees_in_the_middle_of_both_transitions(engine, tmp_path, path, junction):
    outcome = simulated(engine, tmp_path, path, junction)
    names = {deck.name for deck in outcome.cases[0].decks}
    assert {"check_rise", "check_end", "check_fall"} <= names
    for result in outcome.results:
        assert result.check is not None
        assert result.check < 0.01
        assert result.faults == ()
    assert outcome.verdict == "pass"


def wrong_diode(monkeypatch):
    right = DiodeLaw.small_signal

    def small_signal(self, v):
        conductance, capacitance = right(self, v)
        return 1.1 * conductance, 1.1 * capacitance

    monkeypatch.setattr(DiodeLaw, "small_signal", small_signal)


def wrong_transistor(monkeypatch):
    right = TransistorLaw.small_signal

    def small_signal(self, vbe, vbc, vbx):
        found = right(self, vbe, vbc, vbx)
        return replace(found, m=0.9 * found.m)

    monkeypatch.setattr(TransistorLaw, "small_signal", small_signal)


def wrong_expression(monkeypatch):
    right = Expression.evaluate

    def evaluate(self, bias, constants):
        found = right(self, bias, constants)
        return Dual(found.value, {key: 1.1 * np.asarray(slope) for key, slope in found.partial.items()})

    monkeypatch.setattr(Expression, "evaluate", evaluate)


@pytest.mark.parametrize(
    ("path", "junction", "spoil"),
    [
        ("series_single", "junction_diode", wrong_diode),
        ("series_bjt", "bjt_pair", wrong_transistor),
        ("shunt_single", "pin_lumped", wrong_expression),
    ],
)
def test_a_wrong_linearisation_makes_the_run_unfit_to_be_judged(
    engine, tmp_path, monkeypatch, path, junction, spoil
):
    spoil(monkeypatch)
    outcome = simulated(engine, tmp_path, path, junction)
    assert outcome.verdict == "undefined"
    for result in outcome.results:
        assert result.check > 0.05
        assert result.verdict == "undefined"
        assert any("half way on" in fault and "differs by" in fault for fault in result.faults)
