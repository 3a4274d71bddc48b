"""Sweep, spread and tune on real ngspice, through the command line.

Outside reference: the closed form of `pole`; signal(7) for what became of a process.
"""

import json
import math
import os
import random
import signal
import sqlite3
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest
from pole import CAPACITANCE, DESIGN, PART, exact_on_time

from transim.cli import main
from transim.design.preferred import preferred_values

ROOT = Path(__file__).parents[2]


@pytest.fixture
def folder(tmp_path, monkeypatch):
    (tmp_path / "pole_gate.cir").write_text(PART)
    monkeypatch.chdir(tmp_path)

    def write(tables="", limit="250 ns", name="pole.toml"):
        (tmp_path / name).write_text(DESIGN.replace("LIMIT", limit) + tables)
        return name

    return write


@pytest.fixture
def call(capsys):
    def run(*words):
        status = main([str(word) for word in words])
        out, err = capsys.readouterr()
        return status, out, err

    return run


def rows(folder):
    database = sqlite3.connect(Path(folder) / "points.sqlite")
    try:
        return database.execute("SELECT place, failed, text FROM point").fetchall()
    finally:
        database.close()


SPREAD = """
[spread]
trials = 150
seed = 11
[spread.vary]
switch.resistance = { tolerance = "20 %" }
"""


def test_yield_of_a_design_with_a_closed_form(call, folder):
    # on_time rises with R alone, which is uniform: the yield is the share of R below the root
    limit = 250e-9
    low, high = 800.0, 1200.0
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if exact_on_time(middle) <= limit else (low, middle)
    exact = (low - 800.0) / 400.0
    assert 0.6 < exact < 0.8
    status, out, err = call("spread", folder(SPREAD), "--json", "-", "--workers", 2)
    document = json.loads(out)
    assert (status, err) == (1, "")
    found = document["yield"]
    assert found["judged"] == 150
    assert found["low"] <= exact <= found["high"]
    trials = np.load("pole.spread/arrays.npz")
    resistance, on_time = trials["value"][:, 0], trials["metric.on_time"][:, 0]
    # reltol and step of the design's defaults
    assert on_time == pytest.approx([exact_on_time(r) for r in resistance], rel=1e-3)
    near = np.abs(resistance / low - 1.0) < 2e-3
    assert np.array_equal(trials["good"][~near], (resistance <= low)[~near])
    assert document["causes"][0]["name"] == "switch.resistance"
    assert document["worst"]["values"]["switch.resistance"] == resistance.max()
    assert (Path("pole.spread") / "worst" / "source" / "video.cir").exists()


SWEEP = """
[sweep.vary]
switch.resistance = { from = "500 ohm", to = "2 kohm", steps = "linear", points = 60 }
"""


def start(design, out, *words):
    environment = {**os.environ, "PYTHONPATH": str(ROOT)}
    command = [sys.executable, "-m", "transim", "sweep", design, "--out", out, "--workers", "2", *words]
    with Path(f"{out}.err").open("w") as errors:
        return subprocess.Popen(
            command, env=environment, stdout=subprocess.DEVNULL, stderr=errors, start_new_session=True
        )


def group_lives(number):
    try:
        os.killpg(number, 0)
    except ProcessLookupError:
        return False
    return True


def test_ten_times_killed_and_resumed_is_the_study_not_interrupted(folder):
    design = folder(SWEEP)
    whole = start(design, "whole")
    assert whole.wait(120) == 0, Path("whole.err").read_text()
    chance = random.Random(3)
    kills = 0
    counts = []
    while kills < 10:
        process = start(design, "killed")
        log = Path("killed") / "points.sqlite-wal"
        before = log.stat().st_size if log.exists() else 0
        deadline = time.monotonic() + 60.0
        # from the first new row on, at any moment
        while process.poll() is None and time.monotonic() < deadline:
            if log.exists() and log.stat().st_size != before:
                break
            time.sleep(0.002)
        time.sleep(chance.uniform(0.0, 0.12))
        os.kill(process.pid, signal.SIGKILL)
        assert process.wait() == -signal.SIGKILL
        kills += 1
        counts.append(len(rows("killed")))
    assert counts == sorted(counts)
    assert counts[0] < 60
    last = start(design, "killed", "--resume")
    assert last.wait(120) == 0, Path("killed.err").read_text()
    found, wanted = rows("killed"), rows("whole")
    assert len(found) == len(wanted) == len({row[0] for row in found}) == 60
    assert sorted(found) == sorted(wanted)
    assert (Path("killed") / "table.csv").read_bytes() == (Path("whole") / "table.csv").read_bytes()


def test_interrupted_study_says_how_to_go_on(folder):
    process = start(folder(SWEEP), "stopped")
    log = Path("stopped") / "points.sqlite-wal"
    while not (log.exists() and log.stat().st_size > 20_000):
        assert process.poll() is None
        time.sleep(0.01)
    process.send_signal(signal.SIGINT)
    assert process.wait(30) == 130
    err = Path("stopped.err").read_text()
    assert "points on disk in stopped; the same command goes on from there" in err
    assert "Traceback" not in err
    assert 0 < len(rows("stopped")) < 60
    # the workers have ended with it
    deadline = time.monotonic() + 10.0
    while group_lives(process.pid) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not group_lives(process.pid)


def test_results_do_not_depend_on_the_number_of_workers(call, folder):
    tables = '\n[sweep.vary]\nswitch.resistance = { from = "500 ohm", to = "2 kohm", steps = "E12" }\n'
    for workers in (1, 3):
        assert call("sweep", folder(tables), "--workers", workers, "--out", f"by{workers}")[0] == 0
    assert sorted(rows("by1")) == sorted(rows("by3"))
    assert len(rows("by1")) == len(preferred_values("E12", 500.0, 2000.0))


def test_a_sweep_shows_where_the_limit_holds(call, folder):
    values = preferred_values("E12", 500.0, 2000.0)
    status, out, _ = call("sweep", folder(), "--vary", "switch.resistance = 500 ohm .. 2 kohm, E12", "--json", "-")
    document = json.loads(out)
    assert status == 0
    assert [point["values"][0] for point in document["points"]] == list(values)
    assert [point["feasible"]["source"] for point in document["points"]] == [exact_on_time(r) <= 250e-9 for r in values]
    labelled = np.load("pole.sweep/arrays.npz")
    assert labelled["axis.switch.resistance"].tolist() == list(values)
    assert labelled["metric.on_time"].shape == (len(values), 1)
    status, out, _ = call("sweep", folder(), "--vary", "switch.resistance = 500 ohm .. 2 kohm, E12")
    assert status == 0
    assert f"{len(values)} of them from before" in out


def test_points_that_fail_are_kept_with_their_reason(call, folder):
    slow = '\n[numerics]\ntimeout = "1 s"\n[sweep.vary]\ncontrol.edge = { values = ["20 ns", "4 us"] }\n'
    status, out, _ = call("sweep", folder(slow), "--workers", 1)
    assert status == 0
    assert "Failed: 1 of 2 points" in out
    assert "control.edge: the edge is longer than the pulse" in out
    assert [failed for _, failed, _ in rows("pole.sweep")] == [0, 1]


def test_another_study_in_the_folder_is_refused_until_forced(call, folder):
    words = ("--out", "mine", "--workers", 1)
    assert call("sweep", folder(), "--vary", "switch.resistance = 1 kohm, 1.2 kohm", *words)[0] in (0, 1)
    status, out, err = call("sweep", folder(), "--vary", "switch.resistance = 1 kohm, 1.3 kohm", *words)
    assert (status, out) == (2, "")
    assert "holds another study" in err
    assert call("sweep", folder(), "--vary", "switch.resistance = 1 kohm, 1.3 kohm", *words, "--force")[0] == 0
    assert len(rows("mine")) == 2
    status, _, err = call("sweep", folder(), "--vary", "switch.resistance = 1 kohm", "--out", "none", "--resume")
    assert (status, "no study in none" in err) == (2, True)


TUNE = """
[tune.vary]
switch.resistance = { from = "100 ohm", to = "10 kohm", steps = "E12" }
switch.capacitance = { from = "10 pF", to = "1 nF", steps = "E12" }
"""


def test_tune_meets_a_two_sided_limit_best(call, folder):
    design = Path(folder(TUNE))
    # 2.3026 RC within a window: the margin is largest where it is in the middle, counted in shares of each bound
    design.write_text(design.read_text().replace('{ max = "250 ns" }', '{ min = "200 ns", max = "300 ns" }'))
    status, out, err = call("tune", design, "--json", "-", "--seed", 2)
    document = json.loads(out)
    assert (status, err, document["feasible"], document["verdict"]) == (0, "", True, "pass")
    values = [preferred_values("E12", 100.0, 10e3), preferred_values("E12", 10e-12, 1e-9)]

    def margin(resistance, capacitance):
        value = exact_on_time(resistance * capacitance / CAPACITANCE)
        return min((value - 200e-9) / 200e-9, (300e-9 - value) / 300e-9)

    best = max(margin(r, c) for r in values[0] for c in values[1])
    assert document["margin"] == pytest.approx(best, abs=0.01)
    assert document["runs"] <= 120
    found = tuple(document["best"].values())
    (first, second) = document["windows"]
    line = [r for r in values[0] if margin(r, found[1]) >= 0.0]
    assert (first["low"], first["high"]) == (line[0], line[-1])
    line = [c for c in values[1] if margin(found[0], c) >= 0.0]
    assert (second["low"], second["high"]) == (line[0], line[-1])
    slopes = {s["parameter"]: s["change"] for s in document["sensitivities"]}
    # on_time is proportional to either, but for the ramp: 10 % more of it for 10 % more of one, over two steps of E12
    tau = found[0] * found[1]
    for parameter in slopes:
        assert slopes[parameter] == pytest.approx(0.1 * tau * math.log(10.0), rel=0.1)
    assert len(rows("pole.tune")) == document["runs"]
    assert (Path("pole.tune") / "best" / "source" / "video.cir").exists()


def test_tune_names_the_limit_that_cannot_be_met(call, folder):
    tables = '\n[tune.vary]\nswitch.resistance = { from = "1 kohm", to = "10 kohm", steps = "E6" }\n'
    status, out, _ = call("tune", folder(tables, limit="100 ns"))
    assert status == 1
    assert "no simulated point meets all limits" in out
    miss = 100.0 * (exact_on_time(1000.0) / 100e-9 - 1.0)
    text = " ".join(out.split())
    assert (
        f"Cannot be met: on_time at 100 MHz and 25 degC, at most 100 ns; the nearest of all simulated points misses it by {miss:.3g} %"
        in text
    )
