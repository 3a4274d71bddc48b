"""Video leakage of a ramp through a DC block: the high-pass response of R and C.

Source: textbook response of a single-pole high-pass to a ramp: peak V (RC/tr) (1 - exp(-tr/RC)), area R C V whatever
the edge. Read: RC 100 ns, tr 10 ns, 5 V: 4.75813 V; 5 ns, 5 ns, 5 V: 3.16060 V. End to end: the shipped ideal_voltage
drives the junction's node of the shipped shunt_single, whose DC blocks lead to 50 ohm each; the junction stays
reverse biased and has no capacitance. 0.1 %: 2 mohm in the feed and the source, and steps of a fiftieth of the ramp
or less (ngspice errs by 0.5 % at a fifth).
"""

import math

import pytest

from transim.design.toml import read_design
from transim.study.run import run_design

DESIGN = """
title = "feedthrough"
[control]
low = "0 V"
high = "1 V"
edge = "{edge}"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "shunt_single"
junction = "idle"
dc_block = "{block}"
feed_resistance = "1 mohm"
feed_inductance = "0 H"
feed_capacitance = "0 F"
bypass = "0 F"
[junction.idle]
part = "junction_diode"
junction_capacitance = "0 F"
transit_time = "0 s"
[driver.source]
part = "ideal_voltage"
on_voltage = "-1 V"
off_voltage = "-6 V"
output_resistance = "1 mohm"
[numerics]
steps = 20000
"""


@pytest.mark.parametrize(
    ("block", "edge", "constant", "ramp", "peak"),
    [("2 nF", "10 ns", 100e-9, 10e-9, 4.75813), ("100 pF", "5 ns", 5e-9, 5e-9, 3.16060)],
)
def test_ramp(engine, tmp_path, block, edge, constant, ramp, peak):
    file = tmp_path / "feedthrough.toml"
    file.write_text(DESIGN.format(block=block, edge=edge))
    (result,) = run_design(read_design(file), engine).results
    found = {name: result.figures[name].value for name in ("video_peak_on", "video_peak_off", "video_area")}
    assert peak == pytest.approx(5.0 * (constant / ramp) * -math.expm1(-ramp / constant), rel=2e-6)
    assert found["video_peak_on"] == pytest.approx(peak, rel=1e-3)
    assert found["video_peak_off"] == pytest.approx(peak, rel=1e-3)
    assert found["video_area"] == pytest.approx(5.0 * constant, rel=1e-3)
