"""Commands that run ngspice: results, folder, exit status, and what signals leave behind.

Outside reference: plain ngspice, to which the written decks are given as their heads say; the definition of the
decibel; signal(7) for what became of a process.
"""

import json
import math
import os
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from transim.cli import main
from transim.engine import read_raw
from transim.measure.metrics import METRICS

NGSPICE = shutil.which("ngspice")

#: A shunt junction blocks while it is biased: the RF passes before the pulse and after it.
DESIGN = """\
title = "Reed commutator, arm 3"
[control]
low = "0 V"
high = "5 V"
edge = "2 ns"
on_for = "400 ns"
period = "1 us"
[carrier]
frequency = ["50 MHz", "200 MHz"]
level = "-30 dBm"
[switch]
path = "shunt_single"
junction = "reed"
[junction.reed]
part = "pin_lumped"
lifetime = "200 ns"
[driver.slow]
part = "resistor_feed"
[driver.fast]
part = "push_pull_speedup"
[limits]
LIMITS
"""
MET = 'insertion_loss = { max = "6 dB" }\nisolation = { min = "3 dB" }'
MISSED = 'insertion_loss = { max = "6 dB" }\nisolation = { min = "200 dB" }'
#: The shunt junction does not reach 10 %.
UNDEFINED = 'insertion_loss = { max = "6 dB" }\noff_time = { max = "1 s" }'


@pytest.fixture
def design(tmp_path):
    def write(limits=MET, name="reed.toml", **changes):
        text = DESIGN.replace("LIMITS", limits)
        for old, new in changes.items():
            text = text.replace(old, new)
        file = tmp_path / name
        file.write_text(text)
        return file

    return write


@pytest.fixture
def call(capsys):
    def run(*words):
        status = main([str(word) for word in words])
        out, err = capsys.readouterr()
        return status, out, err

    return run


def run_as_the_head_says(deck):
    """Give a deck to plain ngspice and read the raw file."""
    (line,) = [line for line in deck.read_text().splitlines() if line.startswith("* Run: ")]
    words = line.removeprefix("* Run: ").split()
    assert words[0] == "ngspice"
    (deck.parent / f"{deck.stem}.raw").unlink(missing_ok=True)
    # without -n it looks for its start-up file at home, and ngspice 39 crashes where there is none
    environment = {"PATH": os.defpath, "HOME": str(deck.parent)}
    done = subprocess.run(
        [NGSPICE, *words[1:]], cwd=deck.parent, env=environment, capture_output=True, text=True, timeout=60, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return read_raw(deck.with_suffix(".raw"))


@pytest.mark.parametrize(
    ("limits", "status", "verdict"),
    [(MET, 0, "pass"), (MISSED, 1, "fail"), (UNDEFINED, 4, "undefined"), ("", 0, "pass")],
)
def test_exit_status_and_last_line_are_the_verdict(call, design, limits, status, verdict):
    found, out, err = call("run", design(limits))
    assert (found, err) == (status, "")
    assert out.splitlines()[-1].startswith(f"Verdict: {verdict.upper()}")


def test_document_of_a_run(call, design, tmp_path):
    file = design(MISSED)
    status, out, err = call("run", file, "--json", "-", "--out", tmp_path / "out")
    document = json.loads(out)
    assert (status, err) == (1, "")
    assert out == (tmp_path / "out" / "result.json").read_text()
    assert {"format", "title", "design", "engine", "seconds", "definitions", "verdict", "results"} <= set(document)
    assert (document["format"], document["design"], document["verdict"]) == (1, "reed.toml", "fail")
    places = [(r["driver"], r["carrier"], r["temperature"], r["analysis"]) for r in document["results"]]
    assert places == [(d, f, 25.0, "envelope") for d in ("slow", "fast") for f in (50e6, 200e6)]
    for result in document["results"]:
        assert {name: entry["unit"] for name, entry in result["metrics"].items()} == {
            name: metric.unit for name, metric in METRICS.items()
        }
        for entry in result["metrics"].values():
            assert (entry["value"] is None) == (entry["note"] is not None)
        loss, isolation = result["limits"]
        assert loss["margin"] == pytest.approx(6.0 - result["metrics"]["insertion_loss"]["value"])
        assert isolation["margin"] == pytest.approx(result["metrics"]["isolation"]["value"] - 200.0)
        assert (loss["verdict"], isolation["verdict"], result["verdict"]) == ("pass", "fail", "fail")


def test_decks_of_a_run_give_its_figures_in_plain_ngspice(call, design, tmp_path):
    assert call("run", design(), "--out", tmp_path / "out")[0] == 0
    document = json.loads((tmp_path / "out" / "result.json").read_text())
    for driver in ("slow", "fast"):
        folder = tmp_path / "out" / driver
        losses = [r["metrics"]["insertion_loss"]["value"] for r in document["results"] if r["driver"] == driver]
        plots = [plot for plot in run_as_the_head_says(folder / "static.cir") if plot.name.startswith("AC")]
        # command low, 1 V behind the first port: S21 is twice the voltage at the other
        found = [-20.0 * math.log10(2.0 * abs(plot["v(p2)"][0])) for plot in plots[:2]]
        assert losses == pytest.approx(found, rel=1e-9)
        (video,) = run_as_the_head_says(folder / "video.cir")
        with np.load(folder / "waveforms.npz", allow_pickle=False) as arrays:
            assert np.array_equal(arrays["time"], video["time"])
            assert np.array_equal(arrays["port_p1"], video["v(p1)"])
            assert np.array_equal(arrays["driver_current"], video["i(vdrive)"])
            assert np.array_equal(arrays["control"], video["v(ctl)"])
        for deck in folder.glob("check_*.cir"):
            assert len(run_as_the_head_says(deck)) == 4


def test_waveforms_as_text_are_those_of_the_arrays(call, design, tmp_path):
    call("run", design(), "--out", tmp_path / "out", "--driver", "fast")
    folder = tmp_path / "out" / "fast"
    with np.load(folder / "waveforms.npz", allow_pickle=False) as arrays:
        units = dict(arrays["units"].tolist())
        assert set(units) == set(arrays.files) - {"units"}
        header, table = read_csv(folder / "waveforms.csv")
        names = [name for name in arrays.files if not name.startswith(("envelope", "units"))]
        assert header == [f"{name} [{units[name]}]" for name in names]
        for name, column in zip(names, table.T, strict=True):
            assert column == pytest.approx(arrays[name], rel=1e-8, abs=1e-300)
        for carrier in ("50MHz", "200MHz"):
            header, (instants, magnitude, phase) = transposed(read_csv(folder / f"envelope_{carrier}.csv"))
            assert header == ["time [s]", "magnitude [dB]", "phase [deg]"]
            envelope = arrays[f"envelope_{carrier}"]
            assert instants == pytest.approx(arrays[f"envelope_{carrier}_time"], rel=1e-8)
            assert 10.0 ** (magnitude / 20.0) * np.exp(1j * np.radians(phase)) == pytest.approx(envelope, rel=1e-6)
            assert np.iscomplexobj(envelope)
        explained = (folder.parent / "README.txt").read_text()
        for name in names:
            assert name.split("_x")[0].split("_p")[0].split("_v")[0] in explained


def read_csv(file):
    header = file.read_text().split("\n", 1)[0].split(",")
    return header, np.loadtxt(file, delimiter=",", skiprows=1)


def transposed(pair):
    return pair[0], pair[1].T


def test_both_analyses_stand_side_by_side(call, design, tmp_path):
    file = design(MET, **{'["50 MHz", "200 MHz"]': '"50 MHz"'})
    status, out, _ = call("run", file, "--analysis", "both", "--driver", "slow", "--out", tmp_path / "out")
    assert status == 0
    assert [line for line in out.splitlines() if line.startswith("At ")] == [
        f"At 50 MHz, -30 dBm and 25 degC, {analysis} analysis" for analysis in ("envelope", "carrier")
    ]
    document = json.loads((tmp_path / "out" / "result.json").read_text())
    envelope, carrier = document["results"]
    assert envelope["metrics"]["on_time"]["value"] == pytest.approx(carrier["metrics"]["on_time"]["value"], rel=0.1)
    assert (carrier["check_db"], carrier["faults"]) == (None, [])
    folder = tmp_path / "out" / "slow"
    assert {file.name for file in folder.glob("envelope_*")} == {"envelope_50MHz.csv", "envelope_50MHz_resolved.csv"}
    run_as_the_head_says(folder / "carrier_50MHz" / "carrier_quiet.cir")


def test_written_decks_are_those_that_are_run(call, design, tmp_path):
    file = design(MET)
    call("run", file, "--analysis", "carrier", "--out", tmp_path / "run")
    call("deck", file, "--out", tmp_path / "deck")
    decks = {str(path.relative_to(tmp_path / "deck")): path.read_text() for path in (tmp_path / "deck").rglob("*.cir")}
    run = {str(path.relative_to(tmp_path / "run")): path.read_text() for path in (tmp_path / "run").rglob("*.cir")}
    assert decks == run


def test_several_temperatures_have_tables_and_folders_of_their_own(call, design, tmp_path):
    file = design(MET + '\n[environment]\ntemperature = ["-40 degC", "85 degC"]')
    status, out, _ = call("run", file, "--out", tmp_path / "out", "--driver", "slow")
    assert status == 0
    assert {path.name for path in (tmp_path / "out").iterdir() if path.is_dir()} == {"slow_-40degC", "slow_85degC"}
    assert out.count("At 50 MHz, -30 dBm and -40 degC") == out.count("At 200 MHz, -30 dBm and 85 degC") == 1
    assert "envelope at 200 MHz and 85 degC:" in out


def test_a_failing_deck_is_exit_3_with_its_log_and_leaves_no_folder(call, design, tmp_path):
    status, out, err = call("run", design(MET + '\n[numerics]\ntimeout = "1 ms"'), "--out", tmp_path / "out")
    assert (status, out) == (3, "")
    assert err.startswith("error: ")
    assert "0.001 s" in err or "1 ms" in err
    assert not (tmp_path / "out").exists()


def test_engine_says_which_and_tests_it(call, monkeypatch):
    status, out, err = call("engine", "--ngspice", NGSPICE)
    assert (status, err) == (0, "")
    assert NGSPICE in out
    assert "--ngspice" in out
    assert "PASS" in out
    monkeypatch.setenv("TRANSIM_NGSPICE", NGSPICE)
    document = json.loads(call("engine", "--json", "-")[1])
    assert "TRANSIM_NGSPICE" in document["found"]
    assert document["self_test"]["passed"] is True
    assert document["self_test"]["deviation"] < document["self_test"]["limit"]
    said = subprocess.run([NGSPICE, "--version"], capture_output=True, text=True, timeout=20, check=True).stdout
    assert f"ngspice-{document['version']}" in said


def test_an_envelope_run_loads_neither_scipy_nor_matplotlib_nor_rich(design):
    code = (
        "import sys; from transim.cli import main\n"
        f"main(['run', {str(design())!r}])\n"
        "print('loaded', *(name for name in ('scipy', 'matplotlib', 'rich') if name in sys.modules))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=60, check=True)
    assert (done.stdout.splitlines()[-1], done.stderr) == ("loaded", "")


def test_a_design_is_run_alike_twice(call, design):
    first, second = (json.loads(call("run", design(), "--json", "-")[1]) for _ in range(2))
    first.pop("seconds"), second.pop("seconds")
    assert first == second


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("analysis", ["envelope", "carrier"])
def test_a_signal_leaves_no_ngspice_and_no_half_folder(design, tmp_path, number, analysis):
    """The run is stopped in the middle of a deck; what an earlier run wrote is untouched."""
    out, started = tmp_path / "results" / "out", tmp_path / "started"
    out.mkdir(parents=True)
    (out / "files.txt").write_text("files.txt\nresult.json\n")
    (out / "result.json").write_text("earlier")
    engine = tmp_path / "ngspice"
    # writes down its number, which it keeps when it becomes ngspice; the pause makes sure that it is met alive
    engine.write_text(f'#!/bin/sh\necho $$ >> {started}\nsleep 0.2\nexec {NGSPICE} "$@"\n')
    engine.chmod(0o755)
    words = ["run", design(), "--analysis", analysis, "--ngspice", engine, "--out", out, "--force", "--json", "-"]
    process = subprocess.Popen(
        [sys.executable, "-m", "transim", *map(str, words)], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True
    )
    decks = 2 if analysis == "envelope" else 4
    deadline = time.monotonic() + 30
    while not started.exists() or len(started.read_text().split()) < decks:
        assert time.monotonic() < deadline
        time.sleep(0.01)
    time.sleep(0.05)
    process.send_signal(number)
    text, errors = process.communicate(timeout=60)
    assert process.returncode == 128 + number
    assert json.loads(text)["exit"] == 128 + number
    assert len(errors.splitlines()) == 1
    assert [pid for pid in started.read_text().split() if Path(f"/proc/{pid}").exists()] == []
    assert [entry.name for entry in out.parent.iterdir()] == ["out"]
    assert {path.name: path.read_text() for path in out.iterdir()} == {
        "files.txt": "files.txt\nresult.json\n", "result.json": "earlier",
    }  # fmt: skip
