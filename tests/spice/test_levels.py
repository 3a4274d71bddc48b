"""The warning of the envelope analysis at the real level, against the carrier analysis that it stands in for.

Outside reference: carrier-resolved transients of the whole pulse, which share nothing with the probe's judgement but
the circuit. On the p-i-n example, the driver with speed-up, 100 MHz: from some level on the RF itself moves on_time by
5 %, or the loss by 0.1 dB. The warning must come within 3 dB of that level, and not before it by more than that.
The pause between the pulses is shortened: nothing happens in it. ``tests/bench_levels.py`` has the whole table.
"""

from pathlib import Path

import numpy as np
import pytest

from transim.design.toml import read_design
from transim.study.simulate import simulate

LEVELS = (-20.0, 6.0, 9.0, 12.0, 15.0)
TIME, LOSS, NEAR = 0.05, 0.1, 3.0


@pytest.fixture(scope="module")
def swept(engine):
    """Return the envelope's and the carrier's results by level."""
    design = read_design(Path(__file__).parents[2] / "examples" / "commutator_pin.toml")
    design = design.model_copy(
        update={
            "control": design.control.model_copy(update={"period": 4.2e-6}),
            "carrier": design.carrier.model_copy(update={"frequency": (100e6,), "level": LEVELS}),
        }
    )
    driver = next(d for d in design.drivers if d.name == "fast")
    run = simulate(design, driver, 25.0, engine, ["envelope", "carrier"])
    return tuple(
        {result.level: result for result in run.results if result.analysis == analysis}
        for analysis in ("envelope", "carrier")
    )


def departures(swept):
    """Return, by level, the largest departure of the carrier analysis in units of what counts."""
    envelope, carrier = swept
    small = carrier[LEVELS[0]].figures["level_loss"].value
    found = []
    for level in LEVELS:
        time = carrier[level].figures["on_time"].value / envelope[level].figures["on_time"].value - 1.0
        loss = carrier[level].figures["level_loss"].value - small
        found.append(max(abs(time) / TIME, abs(loss) / LOSS))
    return found


def test_small_signal_holds_at_low_level(swept):
    assert departures(swept)[0] < 0.1
    assert swept[0][LEVELS[0]].warnings == ()


def test_warning_comes_where_the_carrier_analysis_departs(swept):
    found = departures(swept)
    assert found[-1] > 1.0, "the sweep does not reach the departure"
    assert np.all(np.diff(found) > 0.0)
    departs = float(np.interp(1.0, found, LEVELS))
    warned = [level for level in LEVELS if swept[0][level].warnings]
    assert warned == [level for level in LEVELS if level >= warned[0]]
    assert abs(warned[0] - departs) < NEAR
    # and it says what it is about, by how much
    for level in warned:
        (text,) = swept[0][level].warnings
        share = float(text.split(", ")[1].split("%")[0])
        measured = swept[1][level].figures["on_time"].value / swept[0][level].figures["on_time"].value - 1.0
        assert share / 100.0 == pytest.approx(measured, abs=0.01)


def test_what_does_not_depend_on_the_level_stays(swept):
    envelope, _ = swept
    for name in ("on_time", "insertion_loss", "video_peak"):
        assert len({result.figures[name].value for result in envelope.values()}) == 1
    margins = [envelope[level].figures["charge_margin"].value for level in LEVELS]
    # 20 dB is a tenth of the charge margin
    assert margins[0] / margins[1] == pytest.approx(10.0 ** (26.0 / 20.0), rel=1e-6)
