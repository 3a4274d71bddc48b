"""When a run carries cautions, and that they stay short.

Outside references: 30 dBm is 1 W by the definition of the dBm; 50 V is the bound that the design asks for.
"""

import json
from dataclasses import dataclass, field

import pytest

from transim.design.toml import read_design
from transim.measure import Figure
from transim.report.cautions import caution_lines, cautions, highest_bias, highest_level
from transim.report.document import json_text, run_document
from transim.report.layout import WIDTH
from transim.study.run import Outcome

DESIGN = """\
title = "Reed, arm 2"
[control]
low = "0 V"
high = "5 V"
edge = "2 ns"
on_for = "1 us"
period = "4 us"
[carrier]
frequency = "30 MHz"
level = "{level}"
[switch]
path = "series_pair"
junction = "reed"
[junction.reed]
part = "pin_lumped"
[driver.one]
part = "{part}"
{lines}
"""


@pytest.fixture
def outcome(tmp_path):
    """Return a function that gives an outcome without results."""

    def outcome_of(part="push_pull_speedup", lines="", level="-10 dBm"):
        file = tmp_path / "reed.toml"
        file.write_text(DESIGN.format(part=part, lines=lines, level=level), encoding="utf-8")
        return Outcome(read_design(file), "ngspice 39", ())

    return outcome_of


@dataclass(frozen=True)
class Reverse:
    """A result as far as cautions look at it."""

    volts: float | None
    figures: dict = field(init=False)

    def __post_init__(self):
        object.__setattr__(self, "figures", {"junction_reverse": Figure(self.volts, "V")})


@pytest.mark.parametrize(
    ("part", "lines", "bias"),
    [
        ("push_pull_speedup", "", 10.0),
        ("push_pull_speedup", 'vp = "5 V"\nvn = "-100 V"', 105.0),
        ("push_pull_speedup", 'vp = "60 V"\nvn = "55 V"', 60.0),
        ("ideal_voltage", 'off_voltage = "-51 V"', 51.0),
        ("ideal_current", 'compliance = "300 V"', 300.0),
    ],
)
def test_bias_is_that_of_supplies_and_driver_voltages(outcome, part, lines, bias):
    assert highest_bias(outcome(part, lines).design) == pytest.approx(bias)


def test_a_simulated_reverse_voltage_counts(outcome):
    design = outcome().design
    assert highest_bias(design, [Reverse(None), Reverse(70.0), Reverse(3.0)]) == 70.0


def test_no_caution_at_fifty_volts_and_one_watt(outcome):
    quiet = outcome("ideal_voltage", 'off_voltage = "-50 V"', "30 dBm")
    assert cautions(quiet) == ()
    assert caution_lines(quiet) == []
    assert run_document(quiet, 1.0)["cautions"] == []


def test_bias_above_fifty_volts(outcome):
    bias, codes = cautions(outcome("ideal_voltage", 'off_voltage = "-51 V"'))
    assert bias.startswith("Bias up to 51 V")
    for words in ("stored energy", "discharge path", "interlock"):
        assert words in bias
    assert "Local electrical codes and licensed practice decide" in codes


def test_rf_above_one_watt(outcome):
    rf, codes = cautions(outcome(level="40 dBm"))
    assert rf.startswith("RF of 10 W")
    for words in ("burns", "exposure", "Terminate", "do not radiate outside a licence"):
        assert words in rf
    assert codes.startswith("Local")


def test_the_highest_of_several_levels_counts(outcome):
    design = outcome(level="40 dBm").design
    for level in (40.0, (40.0,), (-20.0, 40.0, 10.0)):
        carrier = design.carrier.model_copy(update={"level": level})
        assert highest_level(design.model_copy(update={"carrier": carrier})) == 40.0


def test_both_together_stand_once_and_are_short(outcome):
    both = outcome("ideal_voltage", 'off_voltage = "-200 V"', "43 dBm")
    lines = caution_lines(both)
    assert lines[0] == "Caution"
    assert len(lines) <= 8
    assert max(map(len, lines)) <= WIDTH
    text = json_text(run_document(both, 1.0))
    assert json.loads(text)["cautions"] == list(cautions(both))
    assert text.count("discharge path") == text.count("burns") == text.count("Local electrical codes") == 1
