"""A small general-purpose transistor as a series junction pair: what the trade expects of it.

Common practice, no published table: 5 V control gives about 20 dB of isolation at 100 MHz, 50 to 60 dB at 10 MHz,
almost none at 1 GHz, and under 5 dB of loss in the on state up to 1 GHz. Read with the slack of such statements: 20
+- 5 dB, at least 50 dB, less than 6 dB, less than 5 dB. On the shipped path series_bjt and part bjt_pair with their
defaults.
"""

import pytest

from transim.design.toml import read_design
from transim.study.run import run_design

DESIGN = """
title = "junction pair"
[control]
low = "0 V"
high = "5 V"
edge = "5 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = ["10 MHz", "100 MHz", "1 GHz"]
[switch]
path = "series_bjt"
junction = "small"
[junction.small]
part = "bjt_pair"
[driver.gate]
part = "ideal_voltage"
on_voltage = "5 V"
off_voltage = "0 V"
output_resistance = "50 ohm"
"""


@pytest.fixture(scope="module")
def figures(engine, tmp_path_factory):
    file = tmp_path_factory.mktemp("pair") / "pair.toml"
    file.write_text(DESIGN)
    outcome = run_design(read_design(file), engine)
    return {
        result.carrier: {name: figure.value for name, figure in result.figures.items()} for result in outcome.results
    }


def test_isolation(figures):
    assert figures[10e6]["isolation"] >= 50.0
    assert figures[100e6]["isolation"] == pytest.approx(20.0, abs=5.0)
    assert figures[1e9]["isolation"] < 6.0


@pytest.mark.parametrize("carrier", [10e6, 100e6, 1e9])
def test_loss(figures, carrier):
    assert 0.0 < figures[carrier]["insertion_loss"] < 5.0
