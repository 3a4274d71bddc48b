"""An engine that misbehaves: it hangs, crashes, writes half a file, floods its log, or takes what it is not given.

Outside reference: POSIX (signals, process groups, resource limits). Shell and Python scripts stand in for ngspice.
"""

from __future__ import annotations

import os
import resource
import shlex
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from transim.circuit.decks import Deck
from transim.circuit.robust import robust_deck, robust_settings
from transim.design.model import Numerics
from transim.engine import Engine, Plot, bounds, find_engine, write_raw
from transim.engine.ngspice import discard_kept
from transim.errors import ConvergenceError, DeckRejected, EngineCrashed, EngineNotFound, EngineTimeout, RawFileError
from transim.study.attempt import run_deck

DECK = "* a deck\n.end\n"
linux = pytest.mark.skipif(not hasattr(resource, "prlimit"), reason="limits are set on Linux only")


def plot(last=1.0, stop=1e-6):
    time_axis = np.linspace(0, stop, 5)
    data = np.column_stack([time_axis, [0.0, 0.5, 0.7, 0.9, last]])
    return Plot("t", "Transient Analysis", "real", ("time", "v(out)"), ("time", "voltage"), data, True)


def stand_in(folder: Path, *lines: str, shell: str = "/bin/sh", raw: Plot | None = None) -> Engine:
    prepared = folder / "prepared.raw"
    write_raw(prepared, (raw or plot(),))
    script = folder / "stand_in"
    head = [f"#!{shell}", f"RAW={shlex.quote(str(prepared))}" if shell == "/bin/sh" else ""]
    script.write_text("\n".join([*head, *lines, ""]))
    script.chmod(0o755)
    return Engine(script)


@pytest.fixture(autouse=True)
def scratch(tmp_path, monkeypatch):
    folder = tmp_path / "scratch"
    folder.mkdir()
    monkeypatch.setattr("tempfile.tempdir", str(folder))
    return folder


def gone(pid):
    for _ in range(100):
        state = Path(f"/proc/{pid}/stat")
        if not state.exists() or state.read_text().rpartition(")")[2].split()[0] == "Z":
            return True
        time.sleep(0.02)
    return False


def peak_memory():
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024


@pytest.mark.parametrize("trap", ["", "trap '' TERM INT HUP"], ids=["plain", "deaf"])
def test_hanging_engine_and_its_children_are_gone_within_a_second(tmp_path, trap):
    children = (f"sleep 60 & echo $! > {tmp_path}/one", f"(sleep 60 & echo $! > {tmp_path}/two; sleep 60) &")
    engine = stand_in(tmp_path, trap, *children, "sleep 60")
    started = time.monotonic()
    with pytest.raises(EngineTimeout, match=r"within 0\.5 s"):
        engine.run(DECK, timeout=0.5)
    assert time.monotonic() - started < 1.5
    assert all(gone(int((tmp_path / name).read_text())) for name in ("one", "two"))


@pytest.mark.parametrize("name", ["SEGV", "ABRT", "KILL", "BUS"])
def test_crash_is_named(tmp_path, name):
    with pytest.raises(EngineCrashed, match=f"SIG{name}"):
        stand_in(tmp_path, 'cp "$RAW" "$4"', f"kill -{name} $$").run(DECK)


@pytest.mark.parametrize("share", [0.1, 0.5, 0.99])
def test_half_a_file_is_no_result(tmp_path, share):
    engine = stand_in(tmp_path, f'head -c $(( $(stat -c %s "$RAW") * {int(100 * share)} / 100 )) "$RAW" > "$4"')
    with pytest.raises(RawFileError):
        engine.run(DECK, stop_time=1e-6)


def test_flooded_log_is_stopped_before_the_disk_is_full(tmp_path, monkeypatch):
    monkeypatch.setattr(bounds, "LOG_ROOM", 2**20)
    before = peak_memory()
    started = time.monotonic()
    with pytest.raises(EngineCrashed, match="printed more than 1 MiB"):
        stand_in(tmp_path, f"echo $$ > {tmp_path}/pid", "yes a line without an end").run(DECK, timeout=30)
    assert time.monotonic() - started < 10
    assert gone(int((tmp_path / "pid").read_text()))
    # head and tail of the log are kept, not what the engine printed until it was looked at
    assert peak_memory() - before < 200 * 2**20


@linux
def test_file_that_grows_without_end_is_stopped(tmp_path, monkeypatch):
    monkeypatch.setattr(bounds, "FILE_LIMIT", 2**20)
    with pytest.raises(EngineCrashed, match=r"wrote more than .* into one file"):
        stand_in(tmp_path, 'exec cat /dev/zero > "$4"').run(DECK, timeout=30)


@linux
def test_memory_is_bounded(tmp_path, monkeypatch):
    monkeypatch.setattr(bounds, "MEMORY_LIMIT", 2**28)
    # the limit is set right after the start, so the script waits a moment
    lines = ("import time", "time.sleep(0.3)", "taken = bytearray(2**29)", "print('too much')")
    with pytest.raises(DeckRejected, match="exit status 1") as caught:
        stand_in(tmp_path, *lines, shell=sys.executable).run(DECK, timeout=30)
    assert "MemoryError" in caught.value.log_tail


@linux
def test_processor_time_is_bounded_by_the_time_limit(tmp_path):
    lines = ("import resource, shutil, sys, time", "time.sleep(0.3)")
    told = "print(resource.getrlimit(resource.RLIMIT_CPU), resource.getrlimit(resource.RLIMIT_CORE))"
    engine = stand_in(tmp_path, *lines, told, f"shutil.copy({str(tmp_path / 'prepared.raw')!r}, sys.argv[4])", shell=sys.executable)
    assert engine.run(DECK, timeout=40).log == "(42, 42) (0, 0)\n"
    assert resource.getrlimit(resource.RLIMIT_CPU)[0] == resource.RLIM_INFINITY


@pytest.mark.parametrize("value", [np.nan, np.inf, -np.inf])
def test_a_waveform_that_is_no_number_is_no_solution(tmp_path, value):
    engine = stand_in(tmp_path, 'cp "$RAW" "$4"', raw=plot(value))
    with pytest.raises(ConvergenceError, match=r"v\(out\) in deck.cir is not a finite number from time = 1e-06 on"):
        engine.run(DECK, stop_time=1e-6)


@pytest.mark.parametrize(("version", "accepted"), [(35, False), (26, False), (36, True), (39, True), (45, True)])
def test_versions_from_36_on_are_run(tmp_path, version, accepted):
    engine = stand_in(tmp_path, f'[ "$1" = --version ] || cp "$RAW" "$4"; echo "ngspice-{version} done"')
    if accepted:
        assert engine.version == version
        assert len(engine.run(DECK).plots) == 1
        return
    with pytest.raises(EngineNotFound, match=f"is ngspice {version}, and 36 or newer is needed"):
        _ = engine.version
    with pytest.raises(EngineNotFound, match="36 or newer"):
        engine.run(DECK)


# Second try

NO_SOLUTION = "echo 'doAnalyses: TRAN:  Timestep too small; time = 2.5e-07, timestep = 1e-20: trouble with node \"out\"' >&2; exit 1"


def deck():
    return Deck("video", "* a deck\n.options reltol=1e-4\n.end\n", writes_raw=False, stop=1e-6)


def test_no_solution_gets_one_second_try_that_is_told(tmp_path, scratch):
    engine = stand_in(tmp_path, f"echo run >> {tmp_path}/runs", f'grep -q itl4=200 deck.cir video.cir || {{ {NO_SOLUTION}; }}', 'cp "$RAW" "$4"')
    finished = run_deck(engine, deck(), Numerics())
    assert finished.retry is not None
    assert robust_settings(Numerics()) in finished.retry
    assert "2.5e-07 s" in finished.retry
    assert robust_settings(Numerics()) in finished.deck.text
    assert (tmp_path / "runs").read_text().count("run") == 2
    assert list(scratch.iterdir()) == []


def test_a_second_failure_is_the_last(tmp_path, scratch):
    engine = stand_in(tmp_path, f"echo run >> {tmp_path}/runs", NO_SOLUTION)
    with pytest.raises(ConvergenceError, match=r"a second try with reltol=0.001 .* found no solution either") as caught:
        run_deck(engine, deck(), Numerics())
    assert (tmp_path / "runs").read_text().count("run") == 2
    assert [caught.value.deck.parent] == list(scratch.iterdir())


@pytest.mark.parametrize("line", ["sleep 9", "kill -SEGV $$", "exit 1"])
def test_other_failures_get_no_second_try(tmp_path, line):
    engine = stand_in(tmp_path, f"echo run >> {tmp_path}/runs", line)
    with pytest.raises((EngineTimeout, EngineCrashed, DeckRejected)):
        run_deck(engine, deck(), Numerics(timeout=0.5))
    assert (tmp_path / "runs").read_text().count("run") == 1


def test_solution_at_once_is_not_told(tmp_path):
    finished = run_deck(stand_in(tmp_path, 'cp "$RAW" "$4"'), deck(), Numerics())
    assert finished.retry is None
    assert finished.deck == deck()


def test_settings_of_the_second_try_stand_after_the_first_ones():
    text = robust_deck(deck(), Numerics()).text
    assert text.index("reltol=1e-4") < text.index("reltol=0.001") < text.index(".end")
    own = Deck("static", "* a deck\n.control\nop\n.endc\n.end\n", writes_raw=True)
    assert robust_deck(own, Numerics()).text.index("itl4") < robust_deck(own, Numerics()).text.index(".control")


def test_only_a_private_folder_is_discarded(tmp_path):
    kept = tmp_path / "transim-mine"
    kept.mkdir()
    discard_kept(ConvergenceError("x", deck=kept / "deck.cir"))
    assert kept.exists()


def test_an_engine_that_cannot_be_found_is_one_message(monkeypatch):
    monkeypatch.setenv("TRANSIM_NGSPICE", os.devnull)
    with pytest.raises(EngineNotFound, match="TRANSIM_NGSPICE"):
        find_engine()
