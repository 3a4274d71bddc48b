"""The engine without ngspice: small shell scripts stand in for it.

Outside reference: POSIX (exit statuses, signals, process groups); the texts in `LOGS` are what ngspice 39
printed on standard error for such decks.
"""

from __future__ import annotations

import os
import pickle
import shlex
import signal
import time
import tracemalloc
from pathlib import Path

import numpy as np
import pytest

from transim.engine import Engine, Plot, find_engine, ngspice, self_check, write_raw
from transim.engine.log import find_failure, log_tail, warnings_in
from transim.errors import (
    ConvergenceError,
    DeckRejected,
    EngineCrashed,
    EngineError,
    EngineNotFound,
    EngineTimeout,
    OutputError,
    RawFileError,
)

DECK = "* a deck\n.end\n"


def transient(stop: float = 1e-6, *, complete: bool = True) -> Plot:
    time_axis = np.linspace(0, stop, 5)
    data = np.column_stack([time_axis, np.exp(-time_axis / 1e-6)])
    return Plot("t", "Transient Analysis", "real", ("time", "v(out)"), ("time", "voltage"), data, complete)


def stand_in(folder: Path, *lines: str, plots: tuple[Plot, ...] = (transient(),)) -> Engine:
    """Return an engine whose script runs `lines`, in which $RAW is a raw file with `plots`."""
    prepared = folder / "prepared.raw"
    write_raw(prepared, plots)
    script = folder / "stand_in"
    script.write_text("\n".join(["#!/bin/sh", f"RAW={shlex.quote(str(prepared))}", *lines, ""]))
    script.chmod(0o755)
    return Engine(script)


def private_folders(parent: Path) -> list[Path]:
    return sorted(parent.glob("transim-*"))


@pytest.fixture(autouse=True)
def scratch(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Give the folder in which the private folders are made."""
    folder = tmp_path / "scratch"
    folder.mkdir()
    monkeypatch.setattr("tempfile.tempdir", str(folder))
    return folder


@pytest.fixture(params=["pidfd", "polled"])
def _both_ways_to_wait(request: pytest.FixtureRequest, monkeypatch: pytest.MonkeyPatch) -> None:
    if request.param == "polled":
        monkeypatch.delattr(os, "pidfd_open", raising=False)


def gone(pid: int) -> bool:
    """Wait up to 2 s for a process to be gone (a killed orphan is collected by another)."""
    for _ in range(200):
        try:
            os.kill(pid, 0)
        except ProcessLookupError:
            return True
        state = Path(f"/proc/{pid}/stat")
        if state.exists() and state.read_text().rpartition(")")[2].split()[0] == "Z":
            return True
        time.sleep(0.01)
    return False


# Finding


def executable(folder: Path, name: str) -> Path:
    folder.mkdir(exist_ok=True)
    path = folder / name
    path.write_text("#!/bin/sh\n")
    path.chmod(0o755)
    return path


def test_option_beats_variable_beats_path(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    on_path = executable(tmp_path / "bin", "ngspice")
    by_variable = executable(tmp_path, "by_variable")
    by_option = executable(tmp_path, "by_option")
    monkeypatch.setenv("PATH", str(on_path.parent))
    monkeypatch.delenv("TRANSIM_NGSPICE", raising=False)
    assert find_engine().path == on_path
    monkeypatch.setenv("TRANSIM_NGSPICE", str(by_variable))
    assert find_engine().path == by_variable
    assert find_engine(str(by_option)).path == by_option


def test_option_may_be_a_name_a_relative_path_or_in_the_home(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    on_path = executable(tmp_path / "bin", "ngspice-40")
    here = executable(tmp_path / "here", "ngspice-40")
    monkeypatch.setenv("PATH", str(on_path.parent))
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.chdir(here.parent)
    assert find_engine("ngspice-40").path == on_path
    assert find_engine("./ngspice-40").path == here
    assert find_engine("~/here/ngspice-40").path == here


def test_missing_engine_says_where_it_was_looked_for(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("PATH", str(tmp_path))
    monkeypatch.delenv("TRANSIM_NGSPICE", raising=False)
    with pytest.raises(EngineNotFound) as caught:
        find_engine()
    assert f"PATH is {tmp_path}" in str(caught.value)
    assert "apt-get install ngspice" in str(caught.value)
    assert "TRANSIM_NGSPICE" in str(caught.value)
    assert caught.value.exit_code == 3


@pytest.mark.parametrize("kind", ["missing", "folder", "plain file"])
def test_what_was_asked_for_is_not_replaced(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, kind: str
) -> None:
    monkeypatch.setenv("PATH", str(executable(tmp_path / "bin", "ngspice").parent))
    asked = tmp_path / "asked"
    if kind == "folder":
        asked.mkdir()
    elif kind == "plain file":
        asked.write_text("#!/bin/sh\n")
    with pytest.raises(EngineNotFound, match="as the option asks") as caught:
        find_engine(str(asked))
    assert str(asked) in str(caught.value)
    monkeypatch.setenv("TRANSIM_NGSPICE", str(asked))
    with pytest.raises(EngineNotFound, match="as the environment variable TRANSIM_NGSPICE asks"):
        find_engine()


def test_version_is_asked_once_and_late(tmp_path: Path) -> None:
    engine = stand_in(tmp_path, f"echo asked >> {tmp_path}/asked", "echo '** ngspice-39 : Circuit level'")
    assert not (tmp_path / "asked").exists()
    assert (engine.version, engine.version) == (39, 39)
    assert pickle.loads(pickle.dumps(engine)).version == 39
    assert (tmp_path / "asked").read_text() == "asked\n"


def test_version_comes_free_with_a_deck_that_quits(tmp_path: Path) -> None:
    lines = ('test "$1" = --version && exit 9', 'cp "$RAW" deck.raw', "echo 'ngspice-41 done'")
    engine = stand_in(tmp_path, *lines)
    engine.run(DECK, writes_raw=True)
    assert engine.version == 41


def test_another_program_is_not_taken_for_ngspice(tmp_path: Path) -> None:
    with pytest.raises(EngineNotFound, match="does not say that it is ngspice") as caught:
        _ = stand_in(tmp_path, "echo 'a kettle, version 3'").version
    assert "a kettle" in caught.value.log_tail


@pytest.mark.parametrize("content", [b"\x00not a program", b"#!/nowhere/interpreter\n"])
def test_executable_that_cannot_be_started(tmp_path: Path, scratch: Path, content: bytes) -> None:
    path = tmp_path / "ngspice"
    path.write_bytes(content)
    path.chmod(0o755)
    with pytest.raises(EngineNotFound, match="cannot be started"):
        Engine(path).run(DECK)
    assert private_folders(scratch) == []


# Running


def test_deck_with_analysis_cards_is_run_with_a_raw_file(tmp_path: Path) -> None:
    engine = stand_in(tmp_path, 'echo "$@"; pwd; cat "$5"; cp "$RAW" "$4"')
    run = engine.run(DECK, folder=tmp_path / "new" / "runs", name="spdt.fast-1", stop_time=1e-6)
    folder = tmp_path / "new" / "runs"
    assert run.log == f"-b -n -r spdt.fast-1.raw spdt.fast-1.cir\n{folder}\n{DECK}"
    assert run.deck == folder / "spdt.fast-1.cir"
    names = [f"spdt.fast-1.{suffix}" for suffix in ("cir", "log", "raw")]
    assert sorted(path.name for path in folder.iterdir()) == names
    assert (folder / "spdt.fast-1.log").read_text() == run.log
    assert run.plots[0]["v(out)"][-1] == pytest.approx(np.exp(-1))
    assert 0 < run.seconds < 10


def test_deck_that_writes_its_raw_file_is_run_without(tmp_path: Path) -> None:
    engine = stand_in(tmp_path, 'echo "$@"; cp "$RAW" deck.raw')
    assert engine.run(DECK, writes_raw=True).log == "-b -n deck.cir\n"


def test_private_folder_is_removed_after_a_success(tmp_path: Path, scratch: Path) -> None:
    run = stand_in(tmp_path, 'cp "$RAW" "$4"').run(DECK)
    assert run.deck.parent.parent == scratch
    assert private_folders(scratch) == []


def test_private_folder_keeps_deck_and_log_after_a_failure(tmp_path: Path, scratch: Path) -> None:
    with pytest.raises(DeckRejected) as caught:
        stand_in(tmp_path, 'cp "$RAW" "$4"; echo why >&2; exit 1').run(DECK)
    (folder,) = private_folders(scratch)
    assert caught.value.deck == folder / "deck.cir"
    assert sorted(path.name for path in folder.iterdir()) == ["deck.cir", "deck.log"]
    assert f"The deck was kept at {folder}/deck.cir" in str(caught.value)
    assert caught.value.log_tail == "why"
    assert caught.value.return_code == 1


def test_raw_file_of_an_earlier_run_is_no_result(tmp_path: Path) -> None:
    stand_in(tmp_path, 'cp "$RAW" deck.raw').run(DECK, folder=tmp_path, writes_raw=True)
    with pytest.raises(DeckRejected, match=r"wrote no deck\.raw"):
        stand_in(tmp_path, "exit 0").run(DECK, folder=tmp_path, writes_raw=True)


def test_environment_is_clean(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    for name in ("SPICE_SCRIPTS", "SPICE_ASCIIRAWFILE", "NGSPICE_MEAS_PRECISION", "SECRET"):
        monkeypatch.setenv(name, "1")
    monkeypatch.setenv("LD_LIBRARY_PATH", "/opt/lib")
    monkeypatch.setenv("LC_ALL", "de_DE.UTF-8")
    run = stand_in(tmp_path, 'cp "$RAW" "$4"; env; cat').run(DECK)
    seen = dict(line.partition("=")[::2] for line in run.log.splitlines())
    shell_own = {"PWD", "OLDPWD", "SHLVL", "_"}
    wanted = {"HOME", "LC_ALL", "LD_LIBRARY_PATH", "OMP_NUM_THREADS", "PATH"}
    assert set(seen) - shell_own - {"TMPDIR"} == wanted
    assert seen["LC_ALL"] == "C"
    assert seen["LD_LIBRARY_PATH"] == "/opt/lib"
    assert seen["HOME"] == str(run.deck.parent)


def test_output_and_errors_are_not_cut_into_each_other(tmp_path: Path) -> None:
    run = stand_in(tmp_path, 'cp "$RAW" "$4"; printf half; echo "Warning: x" >&2; echo -line').run(DECK)
    assert run.log == "half-line\nWarning: x\n"
    assert run.warnings == ("Warning: x",)


def test_listing_of_some_megabytes_is_complete(tmp_path: Path) -> None:
    run = stand_in(tmp_path, 'cp "$RAW" "$4"; seq 1 900000').run(DECK)
    assert run.log.split() == [str(n) for n in range(1, 900001)]


def test_flood_of_log_keeps_head_and_tail(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(ngspice, "LOG_LIMIT", 2**16)
    engine = stand_in(tmp_path, 'cp "$RAW" "$4"; seq 1 3000000; seq 1 3000000 >&2')
    tracemalloc.start()
    try:
        run = engine.run(DECK, folder=tmp_path)
        peak = tracemalloc.get_traced_memory()[1]
    finally:
        tracemalloc.stop()
    assert run.log.startswith("1\n2\n")
    assert run.log.endswith("\n2999999\n3000000\n")
    assert run.log.count("bytes left out") == 2
    assert len(run.log) < 2 * 2**16 + 100
    assert (tmp_path / "deck.log").stat().st_size == len(run.log)
    assert peak < 4 * 2**20


@pytest.mark.parametrize("name", ["", "a/b", "..", "-r", ".x", "a b", "naïve", "a\n"])
def test_name_must_be_a_plain_file_name(tmp_path: Path, name: str) -> None:
    with pytest.raises(ValueError, match="a deck cannot be called"):
        stand_in(tmp_path).run(DECK, name=name)


@pytest.mark.parametrize("timeout", [0.0, -1.0, float("nan"), float("inf")])
def test_time_limit_must_be_one(tmp_path: Path, timeout: float) -> None:
    with pytest.raises(ValueError, match="time limit"):
        stand_in(tmp_path).run(DECK, timeout=timeout)


def test_folder_that_cannot_be_written(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(OutputError, match="file cannot be written"):
        stand_in(tmp_path).run(DECK, folder=tmp_path / "file")
    (tmp_path / "deck.cir").mkdir()
    with pytest.raises(OutputError, match="cannot be written"):
        stand_in(tmp_path).run(DECK, folder=tmp_path)


# Ending


@pytest.mark.usefixtures("_both_ways_to_wait")
def test_time_out_ends_the_whole_group(tmp_path: Path) -> None:
    lines = (f"sleep 60 & echo $! > {tmp_path}/pid", 'cp "$RAW" "$4"; echo started; wait')
    engine = stand_in(tmp_path, *lines, plots=(transient(2.5e-7, complete=False),))
    started = time.perf_counter()
    with pytest.raises(EngineTimeout, match=r"within 0\.4 s .* at 2\.5e-07 s of 1e-06 s") as caught:
        engine.run(DECK, timeout=0.4, stop_time=1e-6)
    assert time.perf_counter() - started < 3
    assert caught.value.return_code is None
    assert caught.value.log_tail == "started"
    assert gone(int((tmp_path / "pid").read_text()))


def test_what_a_finished_run_left_behind_is_ended(tmp_path: Path) -> None:
    engine = stand_in(tmp_path, f"sleep 60 & echo $! > {tmp_path}/pid", 'cp "$RAW" "$4"')
    started = time.perf_counter()
    engine.run(DECK)
    assert time.perf_counter() - started < 3
    assert gone(int((tmp_path / "pid").read_text()))


@pytest.mark.usefixtures("_both_ways_to_wait")
def test_interrupt_ends_the_group_and_leaves_nothing(tmp_path: Path, scratch: Path) -> None:
    engine = stand_in(tmp_path, f"echo $$ > {tmp_path}/pid", "exec sleep 60")

    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    before = signal.signal(signal.SIGALRM, interrupt)
    try:
        signal.setitimer(signal.ITIMER_REAL, 0.4)
        with pytest.raises(KeyboardInterrupt):
            engine.run(DECK, timeout=30)
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, before)
    assert gone(int((tmp_path / "pid").read_text()))
    assert private_folders(scratch) == []


@pytest.mark.usefixtures("_both_ways_to_wait")
@pytest.mark.parametrize("name", ["SEGV", "KILL", "ABRT"])
def test_signal_is_a_crash(tmp_path: Path, name: str) -> None:
    with pytest.raises(EngineCrashed, match=f"SIG{name}") as caught:
        stand_in(tmp_path, 'cp "$RAW" "$4"; ulimit -c 0', f"kill -{name} $$").run(DECK)
    assert caught.value.return_code == -getattr(signal, f"SIG{name}")


# The verdict


def verdict(folder: Path, *lines: str, plots: tuple[Plot, ...], stop: float | None = 1e-6) -> EngineError:
    with pytest.raises(EngineError) as caught:
        stand_in(folder, 'cp "$RAW" "$4"', *lines, plots=plots).run(DECK, stop_time=stop)
    assert caught.value.command[1:] == ("-b", "-n", "-r", "deck.raw", "deck.cir")
    return caught.value


def test_transient_must_reach_its_stop(tmp_path: Path) -> None:
    error = verdict(tmp_path, plots=(transient(), transient(0.5e-6)))
    assert isinstance(error, ConvergenceError)
    assert (error.time_reached, error.stop) == (0.5e-6, 1e-6)
    assert isinstance(verdict(tmp_path, plots=(transient(1e-6 * (1 - 2e-6)),)), ConvergenceError)
    nearly = stand_in(tmp_path, 'cp "$RAW" "$4"', plots=(transient(1e-6 * (1 - 5e-7)),))
    assert len(nearly.run(DECK, stop_time=1e-6).plots) == 1


def test_transient_that_is_wanted_must_be_there(tmp_path: Path) -> None:
    point = Plot("t", "Operating Point", "real", ("v(out)",), ("voltage",), np.ones((1, 1)))
    assert isinstance(verdict(tmp_path, plots=(point,)), DeckRejected)


def test_plot_without_its_end_or_without_samples_is_no_result(tmp_path: Path) -> None:
    for plots in ((transient(complete=False),), (transient(), transient(complete=False))):
        assert isinstance(verdict(tmp_path, plots=plots), RawFileError)
    empty = Plot("t", "AC Analysis", "real", ("frequency",), ("frequency",), np.ones((0, 1)))
    assert isinstance(verdict(tmp_path, plots=(empty,), stop=None), RawFileError)


def test_raw_file_that_is_cut_short_is_kept(tmp_path: Path, scratch: Path) -> None:
    error = verdict(tmp_path, 'head -c 300 "$RAW" > "$4"', plots=(transient(), transient()))
    assert isinstance(error, RawFileError)
    assert error.deck is not None
    assert error.deck.with_suffix(".raw").stat().st_size == 300
    assert len(private_folders(scratch)) == 1


def test_constants_and_nameless_nodes_are_no_result(tmp_path: Path) -> None:
    constants = Plot("Constant values", "constants", "real", ("pi",), ("notype",), np.ones((1, 1)))
    assert "no analysis ran" in verdict(tmp_path, plots=(constants,)).message
    nameless = Plot("t", "Operating Point", "real", ("v()",), ("voltage",), np.ones((1, 1)))
    assert "lacks a node" in verdict(tmp_path, plots=(nameless,)).message


def test_exit_status_counts_beside_a_correct_raw_file(tmp_path: Path) -> None:
    engine = stand_in(tmp_path, 'cp "$RAW" deck.raw; exit 1')
    with pytest.raises(DeckRejected, match=r"exit status 1; a \.control block must end with 'quit 0'"):
        engine.run(DECK, writes_raw=True)


def test_failure_in_the_log_counts_beside_exit_status_0(tmp_path: Path) -> None:
    text = 'doAnalyses: TRAN:  Timestep too small; time = 5e-07, timestep = 1e-21: trouble with node "out"'
    error = verdict(tmp_path, f"echo {shlex.quote(text)} >&2", plots=(transient(5e-7),))
    assert isinstance(error, ConvergenceError)
    assert (error.time_reached, error.stop) == (5e-7, 1e-6)
    assert "at 5e-07 s of 1e-06 s" in error.message


def test_time_reached_is_not_that_of_an_earlier_transient(tmp_path: Path) -> None:
    text = "doAnalyses: TRAN:  Timestep too small; initial timepoint: cause unrecorded."
    error = verdict(tmp_path, f"echo {shlex.quote(text)} >&2", plots=(transient(),))
    assert isinstance(error, ConvergenceError)
    assert error.time_reached is None


def test_words_of_a_title_are_no_failure(tmp_path: Path) -> None:
    line = "echo 'Circuit: * doAnalyses: timestep too small, simulation(s) aborted'"
    assert stand_in(tmp_path, 'cp "$RAW" "$4"', line).run(DECK, stop_time=1e-6).plots


def test_self_check_sees_a_wrong_answer(tmp_path: Path) -> None:
    version = 'test "$1" = --version && { echo ngspice-39; exit; }'
    right = transient(5e-6)
    # Twice the time constant: exp(-t/2RC) - exp(-t/RC) is at most 1/4, at t = 2 RC ln 2.
    doubled = np.column_stack([right["time"], np.sqrt(right["v(out)"])])
    wrong = Plot("t", right.name, "real", right.names, right.kinds, doubled)
    good = self_check(stand_in(tmp_path, version, 'cp "$RAW" "$4"', plots=(right,)))
    bad = self_check(stand_in(tmp_path, version, 'cp "$RAW" "$4"', plots=(wrong,)))
    assert (good.passed, bad.passed) == (True, False)
    assert 0.2 < bad.deviation <= 0.25


# What ngspice says

LOGS = [
    ("Error: unknown subckt: x1 in 0 nosuch\n", True, "'x1 in 0 nosuch' is unknown"),
    (
        "warning, can't find model 'dj' from line\n    d1 in 0 dj\nError on line 3",
        True,
        "'dj' (used in 'd1 in 0 dj')",
    ),
    ("Netlist line no. 3:\nUndefined parameter [rx]\n", True, "parameter 'rx' on line 3"),
    (
        "Error on line 4 or its substitute:\n  .foo bar\n unimplemented control card - error \n",
        True,
        "line 4 '.foo bar' was refused: unimplemented control card - error",
    ),
    ("Error: Could not find include file a b.lib\n", True, "file a b.lib was"),
    ('Too many parameters for subcircuit type "two" (instance: xx1)\n', True, "x1 has too many nodes"),
    ("opp: no such command available in ngspice\n", True, "command 'opp'"),
    ("doAnalyses: no such parameter on this device\n\nrun simulation(s) aborted\n", True, "no such param"),
    ("Error: there aren't any circuits loaded.\n", True, "see what ngspice said"),
    (
        "Warning: singular matrix:  check node v1#branch\n\n"
        "doAnalyses: OP:  Timestep too small; cause unrecorded.\n",
        False,
        "singular at the current of v1",
    ),
    (
        "Trying gmin =   1.0000E-03 Warning: singular matrix:  check nodes adrift and e2#branch\n"
        "doAnalyses: TRAN:  Timestep too small; initial timepoint: cause unrecorded.\n",
        False,
        "singular at node adrift",
    ),
    (
        "Warning: singular matrix:  check node a\nNote: Transient op finished successfully\n"
        'doAnalyses: TRAN:  Timestep too small; time = 3e-07, timestep = 1e-21: trouble with node "b"\n',
        False,
        'no solution was found (trouble with node "b"): the time step became too small',
    ),
    ("doAnalyses: iteration limit reached\n", False, "no solution was found"),
    (
        'doAnalyses: AC:  Timestep too small; frequency = 0: trouble with node "out"\n\n'
        "ac simulation(s) aborted\n"
        "Warning from checkvalid: vector b1#branch is not available or has zero length.\n",
        False,
        "no operating point was found",
    ),
]


@pytest.mark.parametrize(("text", "converged", "words"), LOGS)
def test_failure_is_named(text: str, converged: bool, words: str) -> None:
    failure = find_failure(text)
    assert failure is not None
    assert failure.converged is converged
    assert words in failure.message


def test_warnings_are_no_failure() -> None:
    text = (
        "Warning: singular matrix:  check node a\n\nNote: Starting dynamic gmin stepping\n"
        "Trying gmin =   1.0000E-03 Warning: Further gmin increment\nWarning: Dynamic gmin stepping failed\n"
        "Warning: source stepping failed\nWarning: singular matrix:  check node a\n\n"
        "Warning : IC on non-existent node - b, ignored\n   Please check line .ic v(b)=1\n\n"
        "Warning: Model issue on line 4 :\n  .model dd d(n2=3) ...\nunrecognized parameter (n2) - ignored\n"
        "Error: -0.00056 out of range for sqrt\n    in line b1\n"
    )
    assert find_failure(text) is None
    assert warnings_in(text) == (
        "Warning: singular matrix: check node a",
        "Warning : IC on non-existent node - b, ignored Please check line .ic v(b)=1",
        "Warning: Model issue on line 4 : .model dd d(n2=3) ... unrecognized parameter (n2) - ignored",
    )


def test_tail_has_what_matters() -> None:
    text = (
        "first\n" + "".join(f"line {n}\n" for n in range(11)) + "Error: 1 out of range\n" * 50
        + "Trying gmin =   1.0000E-03 Note: One successful gmin step\n\n"
        "Total elapsed time (seconds) = 0.005 \nTotal DRAM available = 24105.062 MB.\n"
        "DRAM currently available = 23795.336 MB.\n"
        "Maximum ngspice program size =   21.859 MB.\nCurrent ngspice program size =   12.164 MB.\n"
        "Shared ngspice pages =   10.473 MB.\nText (code) pages =    5.430 MB.\nStack = 0 bytes.\n"
        "Library pages =    2.117 MB.\n"
    )
    assert log_tail(text).splitlines() == [*(f"line {n}" for n in range(11)), "Error: 1 out of range"]
