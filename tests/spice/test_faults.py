"""Whole runs under faults with the real ngspice: second try, uncertainties, notes, a full disk, limits of the machine.

Outside reference: ngspice itself at ten times finer settings; the hard limiter is known not to converge at first.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from transim.circuit.decks import Deck
from transim.design.model import Numerics
from transim.design.toml import read_design
from transim.engine import bounds
from transim.errors import DeckRejected
from transim.study.attempt import run_deck
from transim.study.run import run_design

EXAMPLES = Path(__file__).parents[2] / "examples"

#: A source that limits abruptly into a diode without any capacitance.
LIMITER = """* a hard limiter
V1 in 0 PULSE(0 1 1e-7 1e-8 1e-8 4e-7)
B1 0 out i=max(min((v(in)-v(out))*100,0.1),-0.1)
D1 out 0 m
D2 q 0 m
R2 out q 1e3
.model m D(is=1e-14 tt=1e-8)
.options reltol=1e-4 method=gear
.tran 5e-9 1e-6 0 5e-9
.end
"""


def test_second_try_finds_what_the_first_did_not(engine):
    finished = run_deck(engine, Deck("video", LIMITER, False, 1e-6), Numerics())
    assert finished.retry is not None
    assert "no solution at first at 5.1" in finished.retry
    assert finished.run.plots[0]["time"][-1].real == pytest.approx(1e-6)


def only(design, driver, **changes):
    carrier = design.carrier.model_copy(update={"frequency": design.carrier.frequency[:1]})
    drivers = tuple(one for one in design.drivers if one.name == driver)
    return design.model_copy(update={"static": None, "carrier": carrier, "drivers": drivers, **changes})


@pytest.mark.parametrize(("file", "driver"), [("commutator_pin", "fast"), ("commutator_bjt", "gate")])
def test_uncertainty_covers_a_run_at_ten_times_finer_settings(engine, file, driver):
    design = only(read_design(EXAMPLES / f"{file}.toml"), driver)
    finer = design.numerics.model_copy(
        update={"reltol": design.numerics.reltol / 10.0, "steps": design.numerics.steps * 10}
    )
    (result,) = run_design(design, engine, certify=True).results
    (reference,) = run_design(design.model_copy(update={"numerics": finer}), engine).results
    known = {name: figure for name, figure in result.figures.items() if figure.value is not None}
    assert len(known) > 30
    missed = {
        name: (figure.value, figure.uncertainty, reference.figures[name].value)
        for name, figure in known.items()
        if abs(reference.figures[name].value - figure.value) > figure.uncertainty
    }
    assert missed == {}
    # a width that says nothing would cover everything
    assert known["on_time"].uncertainty < 0.05 * known["on_time"].value
    assert known["insertion_loss"].uncertainty < 1e-3 * known["insertion_loss"].value


def test_short_pulse_is_told_not_to_settle(engine):
    design = read_design(EXAMPLES / "commutator_pin.toml")
    control = design.control.model_copy(update={"on_for": 0.15e-6})
    (result,) = run_design(only(design, "gate", control=control), engine).results
    assert any("has not settled by the end of its interval" in note for note in result.notes)


def test_circuit_that_explodes_is_stopped_by_the_memory_it_may_take(engine, tmp_path, monkeypatch):
    monkeypatch.setattr(bounds, "MEMORY_LIMIT", 2 * 10**8)
    lines = ["* each level calls the one below ten times", "V1 1 0 1"]
    for level in range(8):
        inner = "R{0} a b 1" if level == 0 else f"X{{0}} a b s{level - 1}"
        lines += [f".subckt s{level} a b", *(inner.format(k) for k in range(10)), ".ends"]
    with pytest.raises(DeckRejected, match="more memory than a run may take"):
        engine.run("\n".join([*lines, "X1 1 0 s7", ".op", ".end", ""]), folder=tmp_path, timeout=60)
