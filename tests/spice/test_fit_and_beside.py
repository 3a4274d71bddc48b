"""Junction parameters from records that the carrier analysis made, and a run beside such a record.

Outside reference: the values in the design that the records were simulated from. The fit itself uses the envelope
analysis, another solution of the circuit than the carrier-resolved one behind the records.
"""

import json

import numpy as np
import pytest

from transim.cli import main
from transim.design.toml import read_design
from transim.engine import find_engine
from transim.study.simulate import simulate

LIFETIME, WIDTH = 400e-9, 60e-6
DESIGN = """
title = "Heron commutator, arm 1, on the bench"
[control]
low = "0 V"
high = "3.3 V"
edge = "4 ns"
on_for = "1.2 us"
period = "2.6 us"
[carrier]
frequency = "100 MHz"
level = "-20 dBm"
[switch]
path = "series_pair"
junction = "hp7"
dc_block = "2.2 nF"
feed_resistance = "47 ohm"
feed_inductance = "1 uH"
return_resistance = "22 ohm"
return_inductance = "1 uH"
bypass = "22 pF"
[junction.hp7]
part = "pin_lumped"
lifetime = "{lifetime}"
transit_time = "4 ns"
width = "{width}"
capacitance = "0.15 pF"
[driver.rails]
part = "push_pull_speedup"
speedup_cap = "0 F"
"""


@pytest.fixture(scope="module")
def bench(tmp_path_factory):
    """Return a folder with the true design, a wrong one, and the carrier-resolved S21 of the true one."""
    folder = tmp_path_factory.mktemp("bench")
    (folder / "true.toml").write_text(DESIGN.format(lifetime="400 ns", width="60 um"))
    (folder / "guess.toml").write_text(DESIGN.format(lifetime="800 ns", width="40 um"))
    design = read_design(folder / "true.toml")
    case = simulate(design, design.drivers[0], 25.0, find_engine(), ("carrier",))
    return folder, case.throws[0].envelopes["carrier", 100e6], case.video


def record(bench, name, detector, snr, *, stop=None, seed=3):
    """Write a record of the RF, or of a linear detector, with noise, and measure it."""
    folder, envelope, video = bench
    noise = np.random.default_rng(seed)
    time = np.arange(envelope.time[0], envelope.time[-1] if stop is None else stop, 1e-9)
    phasor = np.interp(time, envelope.time, envelope.value)
    rf = 0.1 * (np.real(phasor * np.exp(2j * np.pi * 100e6 * time)) if detector == "carrier" else np.abs(phasor))
    full = 0.1 * np.abs(phasor).max() / (np.sqrt(2.0) if detector == "carrier" else 1.0)
    rf = rf + full * 10.0 ** (-snr / 20.0) * noise.standard_normal(time.size)
    command = np.interp(time, np.real(video["time"]), np.real(video["v(ctl)"])) + 0.03 * noise.standard_normal(time.size)
    lines = [f"{a:.9e},{b:.6e},{c:.6e}" for a, b, c in zip(time, command, rf, strict=True)]
    (folder / f"{name}.csv").write_text("\n".join(["TIME,CH1,CH2", "s,V,V", *lines, ""]))
    words = ["--command", "CH1", "--rf", "CH2", "--detector", detector, "--carrier", "100 MHz"]
    assert main(["measure", str(folder / f"{name}.csv"), *words, "--json", str(folder / f"{name}.json")]) == 0
    return folder / f"{name}.json"


@pytest.mark.parametrize(("detector", "snr"), [("carrier", 40.0), ("linear", 30.0)])
def test_lifetime_and_width_are_recovered(bench, detector, snr):
    measured = record(bench, f"{detector}_fit", detector, snr)
    out = bench[0] / f"{detector}_result.json"
    assert main(["fit", str(bench[0] / "guess.toml"), "--record", str(measured), "--json", str(out)]) == 0
    found = {one["name"]: one for one in json.loads(out.read_text())["parameters"]}
    assert found["lifetime"]["value"] == pytest.approx(LIFETIME, rel=0.03)
    assert found["width"]["value"] == pytest.approx(WIDTH, rel=0.05)
    for one in found.values():
        assert one["low"] < one["value"] < one["high"] < 1.2 * one["low"]
    # the table can be pasted into the design
    table = json.loads(out.read_text())["table"]
    text = (bench[0] / "guess.toml").read_text()
    head, rest = text.split("[junction.hp7]")[0], text.split("[driver.rails]")[1]
    (bench[0] / "pasted.toml").write_text(f"{head}{table}[driver.rails]{rest}")
    pasted = read_design(bench[0] / "pasted.toml")
    assert pasted.switch.junctions["junction"].values["lifetime"] == pytest.approx(LIFETIME, rel=0.03)


@pytest.mark.parametrize(
    ("parameters", "named"),
    [(("width", "mobility"), "width and mobility"), (("breakdown_voltage",), "breakdown_voltage")],
)
def test_a_record_that_cannot_tell_is_declined(bench, capsys, parameters, named):
    measured = record(bench, "declined", "linear", 40.0)
    words = [word for name in parameters for word in ("--parameter", name)]
    assert main(["fit", str(bench[0] / "guess.toml"), "--record", str(measured), *words]) == 4
    error = capsys.readouterr().err
    assert f"{named}: not determined" in error
    assert "Traceback" not in error


def test_a_record_without_the_storage_cannot_tell_lifetime_at_20_db(bench, capsys):
    """It ends 250 ns after the on edge: the charge then is current times time, whatever the lifetime."""
    measured = record(bench, "early", "linear", 20.0, stop=0.28e-6)
    assert main(["fit", str(bench[0] / "true.toml"), "--record", str(measured)]) == 4
    assert "lifetime" in capsys.readouterr().err


def test_run_beside_a_record(bench, capsys):
    measured = record(bench, "beside", "linear", 40.0)
    out = bench[0] / "results"
    words = ["run", str(bench[0] / "true.toml"), "--beside", str(measured), "--out", str(out), "--force"]
    assert main([*words, "--json", str(bench[0] / "run.json")]) == 0
    assert "beside beside.json" in capsys.readouterr().out
    beside = json.loads((bench[0] / "run.json").read_text())["beside"]["results"][0]
    found = {one["metric"]: one for one in beside["differences"]}
    # the record is of this design: nothing may be far from it
    assert {"on_time", "off_time", "rise_time", "fall_time"} <= set(found)
    for name in ("on_time", "off_time", "rise_time", "fall_time"):
        one = found[name]
        assert one["ratio"] == pytest.approx((one["simulated"] - one["measured"]) / one["uncertainty"])
        assert abs(one["ratio"]) < 3.0
    rows = (out / "beside_rails_100MHz_envelope.csv").read_text().splitlines()[1:]
    pairs = np.array([[float(cell) for cell in row.split(",")[2:]] for row in rows])
    assert np.abs(pairs[:, 0] - pairs[:, 1]).max() < 0.05
    assert main(["run", str(bench[0] / "guess.toml"), "--beside", str(measured), "--json", str(bench[0] / "far.json")]) == 0
    far = json.loads((bench[0] / "far.json").read_text())["beside"]["results"][0]["differences"]
    assert max(abs(one["ratio"]) for one in far) > 10.0


def test_a_record_that_does_not_fit_the_design_is_refused(bench, capsys):
    measured = record(bench, "refused", "linear", 40.0)
    other = (bench[0] / "true.toml").read_text().replace("100 MHz", "150 MHz")
    (bench[0] / "other.toml").write_text(other)
    assert main(["run", str(bench[0] / "other.toml"), "--beside", str(measured)]) == 2
    assert "taken at 100 MHz" in capsys.readouterr().err
    (bench[0] / "power.toml").write_text(f'{(bench[0] / "true.toml").read_text()}[measure]\nbasis = "power"\n')
    assert main(["run", str(bench[0] / "power.toml"), "--beside", str(measured)]) == 2
    assert "measured with basis voltage" in capsys.readouterr().err
    assert main(["run", str(bench[0] / "true.toml"), "--beside", str(bench[0] / "true.toml")]) == 2
    assert "no JSON document" in capsys.readouterr().err
