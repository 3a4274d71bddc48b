"""Each way in which ngspice fails has a deck in tests/broken, and an error that names it.

Outside reference: ngspice itself; the first line of a deck says what it does where its exit status misleads.
"""

from __future__ import annotations

import math
import os
import time
from pathlib import Path

import numpy as np
import pytest

from transim.engine import Engine, Plot, find_engine, read_raw, self_check, write_raw
from transim.errors import (
    ConvergenceError,
    DeckRejected,
    EngineCrashed,
    EngineError,
    EngineTimeout,
    RawFileError,
)

BROKEN = Path(__file__).parents[1] / "broken"
STOP = 1e-6

# (deck, error, words of its message, time limit [s])
CASES = [
    ("unknown_element_parameter", DeckRejected, "line 4 'r2 out 0 1e3 colour=3'", 20),
    ("unknown_card", DeckRejected, "line 4 '.transient 1e-9 1e-6'", 20),
    ("unknown_subcircuit", DeckRejected, "'x1 in 0 pin_missing' is unknown", 20),
    ("too_few_nodes", DeckRejected, "x1 has too few nodes for subcircuit feed", 20),
    ("unknown_model", DeckRejected, "no .model 'missing' (used in 'd1 in 0 missing')", 20),
    ("unknown_parameter", DeckRejected, "'bias_resistance' on line 3", 20),
    ("unknown_function", DeckRejected, "no function 'cube'", 20),
    ("unknown_controlling_source", DeckRejected, "f1 is controlled by vsense", 20),
    ("open_subcircuit", DeckRejected, "no .ends", 20),
    ("missing_include", DeckRejected, "missing_models.lib was not found", 20),
    ("missing_node", DeckRejected, "lacks a node", 20),
    ("nothing_saved", DeckRejected, ".save", 20),
    ("no_analysis", DeckRejected, "add an analysis card", 20),
    ("only_operating_point", DeckRejected, "add a .tran card", 20),
    ("singular_loop", ConvergenceError, "singular at the current of v1", 20),
    ("singular_node", ConvergenceError, "singular at node adrift", 20),
    ("no_operating_point", ConvergenceError, 'no operating point was found (trouble with node "out")', 20),
    ("no_sweep_point", ConvergenceError, "at v1 = 0.6", 20),
    ("small_time_step", ConvergenceError, "the time step became too small", 20),
    ("dies_between", ConvergenceError, "the time step became too small", 20),
    ("early_stop", ConvergenceError, "ended early at 5e-07 s of 1e-06 s", 20),
    ("endless", EngineTimeout, "within 0.5 s", 0.5),
    ("flood", EngineTimeout, "within 0.5 s", 0.5),
    ("crash", EngineCrashed, "SIGSEGV", 20),
    ("unpadded", RawFileError, "set nopadding", 20),
    ("control_unknown_command", DeckRejected, "'operating_point'", 20),
    ("control_no_analysis", DeckRejected, "no analysis ran before 'write'", 20),
    ("control_unknown_device", DeckRejected, "names vbias", 20),
    ("control_unknown_vector", DeckRejected, "asks for nowhere", 20),
    ("control_aborted", ConvergenceError, "the time step became too small", 20),
    ("control_no_write", DeckRejected, "wrote no control_no_write.raw", 20),
    ("control_no_quit", DeckRejected, "must end with 'quit 0'", 20),
]


@pytest.fixture(scope="module")
def engine() -> Engine:
    return find_engine()


def failure(engine: Engine, name: str, folder: Path, timeout: float = 20.0) -> EngineError:
    text = (BROKEN / f"{name}.cir").read_text()
    with pytest.raises(EngineError) as caught:
        engine.run(
            text, folder=folder, name=name, timeout=timeout, stop_time=STOP, writes_raw=".control" in text
        )
    return caught.value


def test_every_broken_deck_is_tried() -> None:
    assert sorted(name for name, *_ in CASES) == sorted(deck.stem for deck in BROKEN.glob("*.cir"))


@pytest.mark.parametrize(("name", "error", "words", "timeout"), CASES, ids=[case[0] for case in CASES])
def test_failure_has_its_class_and_says_why(
    engine: Engine, tmp_path: Path, name: str, error: type[EngineError], words: str, timeout: float
) -> None:
    caught = failure(engine, name, tmp_path, timeout)
    assert type(caught) is error
    assert words in caught.message
    assert caught.deck == tmp_path / f"{name}.cir"
    assert caught.deck.read_text() == (BROKEN / f"{name}.cir").read_text()
    assert (tmp_path / f"{name}.log").exists()
    assert caught.command[:3] == (str(engine.path), "-b", "-n")
    assert len(caught.log_tail.splitlines()) <= 12
    assert "DRAM" not in caught.log_tail
    assert "Traceback" not in str(caught)


@pytest.mark.parametrize("name", ["small_time_step", "dies_between", "control_aborted"])
def test_convergence_error_knows_how_far_the_run_came(engine: Engine, tmp_path: Path, name: str) -> None:
    caught = failure(engine, name, tmp_path)
    assert isinstance(caught, ConvergenceError)
    assert caught.stop == STOP
    assert caught.time_reached is not None
    # The last sample that was kept is of the same time; the message has six digits of it.
    plots = [plot for plot in read_raw(tmp_path / f"{name}.raw") if plot.name == "Transient Analysis"]
    assert caught.time_reached == pytest.approx(plots[0]["time"][-1], rel=1e-5)
    assert f"at {caught.time_reached:.6g} s of 1e-06 s" in caught.message


def test_convergence_error_at_the_operating_point_has_no_time(engine: Engine, tmp_path: Path) -> None:
    caught = failure(engine, "no_operating_point", tmp_path)
    assert isinstance(caught, ConvergenceError)
    assert caught.time_reached is None


def test_plot_that_dies_is_read_up_to_its_end(engine: Engine, tmp_path: Path) -> None:
    failure(engine, "dies_between", tmp_path)
    plots = read_raw(tmp_path / "dies_between.raw")
    whole = [(plot.name, plot.complete) for plot in plots]
    assert whole[:2] == [("Operating Point", True), ("Transient Analysis", False)]
    assert ("Noise Spectral Density Curves", True) in whole
    died = plots[1]
    assert np.all(np.diff(died["time"]) > 0)
    assert 0.2 * STOP < died["time"][-1] < STOP


def test_time_out_ends_the_process_soon_and_says_how_far_it_came(engine: Engine, tmp_path: Path) -> None:
    started = time.perf_counter()
    caught = failure(engine, "endless", tmp_path, timeout=0.5)
    assert time.perf_counter() - started < 5
    reached = float(caught.message.partition(" at ")[2].partition(" s of ")[0])
    assert 0 < reached < 1
    with pytest.raises(ChildProcessError):
        os.waitpid(-1, os.WNOHANG)


def test_transient_agrees_with_its_closed_form(engine: Engine) -> None:
    # v = exp(-t/RC) is the solution of C dv/dt = -v/R.
    check = self_check(engine)
    assert check.passed
    assert 0 < check.deviation < check.limit == 1e-4
    assert check.version == engine.version >= 39


def test_deck_that_writes_several_plots(engine: Engine, tmp_path: Path) -> None:
    deck = (
        "* several plots\nv1 in 0 dc 1 ac 1 pulse(1 0 0 1e-9 1e-9 1 2)\nr1 in out 1e3\nc1 out 0 1e-9\n"
        ".control\nlisting expand\nset appendwrite\nop\nwrite three.raw\nac lin 1 1e6 1e6\nwrite three.raw\n"
        "tran 1e-9 1e-6\nwrite three.raw\nquit 0\n.endc\n.end\n"
    )
    engine.run(deck, folder=tmp_path, name="three", writes_raw=True)
    run = engine.run(deck, folder=tmp_path, name="three", writes_raw=True, stop_time=1e-6)
    assert [plot.name for plot in run.plots] == ["Operating Point", "AC Analysis", "Transient Analysis"]
    assert run.plots[0]["v(out)"] == pytest.approx([1.0])
    # Voltage divider 1/(1 + j w RC).
    assert run.plots[1]["v(out)"] == pytest.approx([1 / (1 + 2j * math.pi * 1e6 * 1e-6)], rel=1e-9)
    assert "c1 out 0 1e-9" in run.log
    assert "version" in vars(engine)


def test_ngspice_reads_what_is_written_here(engine: Engine, tmp_path: Path) -> None:
    names, kinds = ("time", "v(out)", "i(v1)"), ("time", "voltage", "current")
    data = np.array([[0.0, 1.25, -3e-3], [1e-9, 2.5, 4e-3], [3e-9, -7.75, 5e-3]])
    write_raw(tmp_path / "ours.raw", [Plot("ours", "Transient Analysis", "real", names, kinds, data)])
    deck = (
        "* load\nv1 in 0 1\nr1 in 0 1\n.control\nload ours.raw\nset filetype=ascii\nwrite theirs.raw\n"
        "quit 0\n.endc\n.end\n"
    )
    run = engine.run(deck, folder=tmp_path, name="theirs", writes_raw=True)
    for name, column in zip(names, data.T, strict=True):
        assert run.plots[0][name] == pytest.approx(column, rel=1e-14)


def test_binary_and_text_files_agree(engine: Engine) -> None:
    deck = (
        "* two kinds\nv1 in 0 ac 1\nr1 in out 1e3\nc1 out 0 1e-9\n.control\nset appendwrite\n"
        "ac dec 5 1e3 1e6\nwrite deck.raw\nset filetype=ascii\nwrite deck.raw\nquit 0\n.endc\n.end\n"
    )
    # ngspice appends text to binary: both kinds in one file.
    binary, text = engine.run(deck, writes_raw=True).plots
    assert binary.names == text.names
    assert text.data == pytest.approx(binary.data, rel=1e-14)


def test_device_quantity_has_one_name_in_both_kinds_of_deck(engine: Engine) -> None:
    circuit = "* charge\nv1 in 0 0.7\nd1 in 0 dj\n.model dj d(is=1e-14 tt=1e-8)\n"
    card = engine.run(circuit + ".save v(in) @d1[id] @d1[vd]\n.tran 1e-9 1e-8\n.end\n")
    block = engine.run(
        circuit + ".control\nop\nwrite deck.raw v(in) @d1[id] @d1[vd]\nquit 0\n.endc\n.end\n", writes_raw=True
    )
    for name in ("@d1[id]", "@d1[vd]"):
        assert card.plots[0][name][0] == pytest.approx(block.plots[0][name][0], rel=1e-9)


def test_model_parameter_that_is_ignored_is_a_warning(engine: Engine) -> None:
    run = engine.run("* w\nv1 in 0 0.5\nd1 in 0 dj\n.model dj d(is=1e-14 colour=3)\n.op\n.end\n")
    assert len(run.warnings) == 1
    assert "unrecognized parameter (colour) - ignored" in run.warnings[0]


def test_run_that_succeeds_through_gmin_stepping_is_no_failure(engine: Engine) -> None:
    run = engine.run("* floating\nv1 in 0 1\nr1 in 0 1e3\nc1 in a 1e-9\nc2 a 0 1e-9\n.op\n.end\n")
    assert "gmin" in run.log
    assert any("check node a" in text for text in run.warnings)
