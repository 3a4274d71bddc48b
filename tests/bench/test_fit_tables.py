"""Junction parameters from tables of single measurements.

Outside reference: published or derived values, each named at its case. Lauritzen & Ma, IEEE Trans. Power Electron.
6(2), 1991, step of current (derived): lifetime 100 ns, transit time 25 ns, equal currents: 47.000 ns. Moll, Proc. IRE
42, 1954 (formula from memory): the transistor of M. Thompson, Intuitive Analog Circuit Design, chapter 10, stores
112.61 ns. White, Microwave Semiconductor Engineering, 1982: 50 um, 0.18 m^2/Vs, 10 mA, 1 us: 1.38889 ohm. Garver,
Microwave Diode Control Devices, 1976: 0.3 pF in series with 50 ohm isolates 34.496 / 14.646 / 1.077 dB at 0.1 / 1 / 10
GHz; 3 ohm in series lose 0.25674 dB. A straight line for the intervals: the textbook formulas of linear least squares.
"""

import json
import math

import numpy as np
import pytest

from transim.bench.estimation import Unknown, estimate
from transim.bench.fit_tables import TABLES
from transim.cli import main
from transim.errors import MeasurementError

DESIGN = """
title = "Bench fixture"
[control]
low = "0 V"
high = "3.3 V"
edge = "4 ns"
on_for = "1 us"
period = "3 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "{path}"
junction = "dut"
[junction.dut]
part = "{part}"
{values}
[driver.bench]
part = "resistor_feed"
"""
PIN = {"lifetime": "300 ns", "transit_time": "25 ns", "width": "70 um", "intrinsic_resistance": "1 Gohm"}


@pytest.fixture
def fit(tmp_path, capsys):
    def run(part, values, tables, *words):
        path = "series_bjt" if part == "bjt_pair" else "series_single"
        entries = (f"{name} = {json.dumps(value)}" for name, value in values.items())
        text = DESIGN.format(path=path, part=part, values="\n".join(entries))
        (tmp_path / "bench.toml").write_text(text)
        options = []
        for kind, rows in tables.items():
            file = tmp_path / f"{kind}.csv"
            file.write_text("\n".join(rows) + "\n")
            options += [f"--{kind}", str(file)]
        status = main(["fit", str(tmp_path / "bench.toml"), *options, *words, "--json", str(tmp_path / "fit.json")])
        out = capsys.readouterr()
        document = json.loads((tmp_path / "fit.json").read_text()) if status == 0 else None
        return status, out.out, out.err, document

    return run


def test_laws_have_their_published_values():
    storage = TABLES["pin_lumped"]["storage"].function
    assert storage(np.array([[10e-3], [10e-3]]), {"lifetime": 100e-9, "transit_time": 25e-9}, 50.0) == pytest.approx(
        47.000e-9, rel=1e-4
    )
    # without transit time: lifetime ln 2
    assert storage(np.array([[1.0], [1.0]]), {"lifetime": 100e-9, "transit_time": 1e-18}, 50.0) == pytest.approx(
        69.315e-9, rel=1e-4
    )
    transistor = {"forward_gain": 416.0, "reverse_gain": 0.7, "forward_transit_time": 0.3e-9}
    moll = TABLES["bjt_pair"]["storage"].function
    given = np.array([[1e-3], [1e-3], [10e-3]])
    assert moll(given, {**transistor, "reverse_transit_time": 240e-9}, 50.0) == pytest.approx(112.61e-9, rel=1e-4)
    pin = {"lifetime": 1e-6, "width": 50e-6, "mobility": 0.18, "series_resistance": 3.0 - 1.38889}
    assert TABLES["pin_lumped"]["loss"].function(np.array([[10e-3]]), pin, 50.0) == pytest.approx(0.25674, abs=2e-5)
    off = {"intrinsic_resistance": 1e15, "capacitance": 0.3e-12, "series_resistance": 0.0}
    isolation = TABLES["pin_lumped"]["isolation"].function(np.array([[1e8, 1e9, 1e10]]), off, 50.0)
    assert isolation == pytest.approx([34.496, 14.646, 1.077], abs=1e-3)


def test_three_tables_give_four_parameters(fit):
    """A diode of 100 ns, 50 um, 0.3 pF and 0.5 ohm; errors of 1 % and 0.01 dB drawn once."""
    noise = np.random.default_rng(8)
    currents = [(i, r) for i in (5e-3, 10e-3, 20e-3) for r in (2e-3, 10e-3)]
    stored = [100e-9 * math.log((1 + i / r) / 1.25) * (1 + 0.01 * noise.standard_normal()) for i, r in currents]
    levels = np.geomspace(1e-3, 50e-3, 8)
    loss = 20 * np.log10(1 + (0.5 + 50e-6**2 / (0.18 * 100e-9 * levels)) / 100.0) + 0.01 * noise.standard_normal(8)
    frequencies = np.array([1e8, 3e8, 1e9, 3e9])
    reactance = 1.0 / (2j * np.pi * frequencies * 0.3e-12)
    isolation = 20 * np.log10(np.abs(1 + (0.5 + reactance) / 100.0)) + 0.01 * noise.standard_normal(4)
    tables = {
        "storage": ["IF;IR;ts;u", "mA;mA;ns;ns"]
        + [f"{1e3 * i};{1e3 * r};{1e9 * t};{1e7 * t}" for (i, r), t in zip(currents, stored, strict=True)],
        "loss": ["I [mA],loss [dB],u [dB]", *(f"{1e3 * i},{a},0.01" for i, a in zip(levels, loss, strict=True))],
        "isolation": ["f,a,u", *(f"{f},{a},0.01" for f, a in zip(frequencies, isolation, strict=True))],
    }
    status, text, error, document = fit("pin_lumped", PIN, tables)
    assert status == 0, error
    found = {one["name"]: one for one in document["parameters"]}
    true = {"lifetime": 100e-9, "width": 50e-6, "series_resistance": 0.5, "capacitance": 0.3e-12}
    assert set(found) == set(true)
    for name, value in true.items():
        one = found[name]
        assert one["low"] < one["value"] < one["high"]
        # 95 % intervals widened by half: four of them are drawn here
        half = 1.5 * (one["high"] - one["low"]) / 2.0
        assert abs(one["value"] - value) < half, name
    assert abs(found["lifetime"]["value"] / 100e-9 - 1.0) < 0.03
    assert abs(found["width"]["value"] / 50e-6 - 1.0) < 0.05
    assert "[junction.dut]" in text
    assert document["table"].startswith("[junction.dut]\npart = ")


def test_reverse_transit_time_of_a_transistor(fit):
    """Moll's closed form with Thompson's transistor, at three base currents."""
    sigma = (416 * 1.7 * 0.3e-9 + 0.7 * 417 * 240e-9) / 417.7
    rows = [(b, b, 10e-3, sigma * math.log(2 * b / (10e-3 / 416 + b))) for b in (0.5e-3, 1e-3, 2e-3)]
    values = {"forward_transit_time": "0.3 ns", "reverse_transit_time": "80 ns"}
    values |= {"forward_gain": 416, "reverse_gain": 0.7}
    tables = {"storage": ["IB1,IB2,IC,ts", *(",".join(map(repr, row)) for row in rows)]}
    status, _, error, document = fit("bjt_pair", values, tables)
    assert status == 0, error
    assert document["parameters"][0]["value"] == pytest.approx(240e-9, rel=1e-3)
    both = ("--parameter", "reverse_transit_time", "--parameter", "forward_transit_time")
    status, _, error, _ = fit("bjt_pair", values, tables, *both)
    assert status == 4
    assert "not determined" in error


@pytest.mark.parametrize(
    ("words", "status", "said"),
    [
        (["--parameter", "width", "--parameter", "mobility"], 4, "width and mobility: not determined"),
        (["--parameter", "breakdown_voltage"], 4, "breakdown_voltage: not determined"),
        (["--parameter", "widht"], 2, "did you mean width?"),
        (["--junction", "other"], 2, "there is no junction other"),
    ],
)
def test_what_the_data_do_not_tell_is_named(fit, words, status, said):
    rows = [f"{i},{20 * math.log10(1 + (0.2 + 2e-3 / i) / 100)}" for i in (1e-3, 3e-3, 10e-3, 30e-3, 0.1)]
    found, _, error, _ = fit("pin_lumped", PIN, {"loss": rows}, *words)
    assert found == status
    assert said in error
    assert "Traceback" not in error


def test_bad_tables_are_one_message(fit):
    for rows, said in (
        (["I,a", "1e-3,0.5", "2e-3,-0.1", "3e-3,0.2"], "loss.csv:3: column a"),
        (["1e-3,0.5,1,2", "2e-3,0.4,1,2"], "4 columns"),
        (["I [V],a [dB]", "1e-3,0.5", "2e-3,0.4"], "is in V"),
    ):
        status, _, error, _ = fit("pin_lumped", PIN, {"loss": rows})
        assert status == 2
        assert said in error


def test_intervals_are_those_of_a_straight_line():
    """One parameter p in y = p x, known noise: the standard error of ln p is sigma/(p sqrt(sum x^2))."""
    x = np.linspace(1.0, 2.0, 50)
    y = 3.0 * x + 0.01 * np.random.default_rng(1).standard_normal(50)
    found = estimate([Unknown("p", "1", 1.0, 0.1, 10.0)], lambda values: (y - values["p"] * x) / 0.01)
    error = 0.01 / (3.0 * math.sqrt(float(x @ x)))
    fitted = found.parameters[0]
    # Student's t of 49 degrees of freedom: 2.0096 (printed tables); a misfit above 1 widens the interval
    wide = math.log(fitted.high / fitted.low) / 2.0
    assert wide == pytest.approx(2.0096 * error * math.sqrt(max(1.0, found.misfit)), rel=1e-3)
    with pytest.raises(MeasurementError, match="1 data cannot determine p"):
        estimate([Unknown("p", "1", 1.0, 0.1, 10.0)], lambda values: np.array([values["p"]]))
