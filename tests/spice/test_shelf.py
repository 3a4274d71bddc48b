"""Every driver and every junction of the shelf, by envelope and by carrier-resolved analysis.

The carrier analysis shares nothing with the envelope solver but the circuit; the carrier is chosen so that each transition
lasts ten periods or more. Pulses are short: nothing happens in their middle.
"""

from __future__ import annotations

import math

import pytest

from transim.circuit.timeline import timeline_of
from transim.design.toml import read_design
from transim.parts.catalogue import load_catalogue
from transim.study.simulate import simulate

DESIGN = """
title = "Heron commutator: one part of the shelf"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "{on_for}"
period = "{period}"
[carrier]
frequency = ["{carrier}"]
level = "-40 dBm"
impedance = "50 ohm"
[switch]
path = "{path}"
junction = "hp7"
{feed}
[junction.hp7]
{junction}
[driver.one]
{driver}
[environment]
temperature = ["{temperature} degC"]
"""
CHOKES = 'feed_resistance = "47 ohm"\nfeed_inductance = "1 uH"\nreturn_resistance = "22 ohm"\nreturn_inductance = "2.2 uH"\nbypass = "22 pF"'
RESISTORS = 'feed_resistance = "330 ohm"\nreturn_resistance = "470 ohm"'
PIN = 'part = "pin_lumped"\nlifetime = "300 ns"\ntransit_time = "4 ns"\ncapacitance = "0.15 pF"'
THICK = 'part = "pin_distributed"\nlifetime = "300 ns"\nwidth = "40 um"\ncapacitance = "0.15 pF"'
STEP = 'part = "junction_diode"\ntransit_time = "150 ns"\njunction_capacitance = "0.3 pF"\nseries_resistance = "1 ohm"'
RAILS = 'part = "push_pull_speedup"'
#: Settings beyond the defaults, and a carrier that leaves ten periods in each transition.
DRIVERS = {"ideal_current": "", "ideal_voltage": 'output_resistance = "220 ohm"', "resistor_feed": 'vn = "-5 V"'}
GATE = 'part = "resistor_feed"\nvn = "-1 V"'
#: Drivers whose fast edge needs a higher carrier for ten periods.
CARRIERS = {"common_emitter": "500 MHz", "spike_and_hold": "400 MHz"}
TRANSISTOR = (
    'part = "bjt_pair"\nemitter_capacitance = "1 pF"\ncollector_capacitance = "0.6 pF"\nreverse_transit_time = "200 ns"'
)


def design_of(tmp_path, **values):
    """Write and read a design."""
    filled = {
        "on_for": "0.9 us", "period": "1.7 us", "carrier": "300 MHz", "path": "series_pair", "feed": CHOKES, "junction": PIN,
        "driver": RAILS, "temperature": "25",
    } | values  # fmt: skip
    file = tmp_path / "shelf.toml"
    file.write_text(DESIGN.format(**filled))
    return read_design(file)


def compare(design, engine):
    """Hold the envelope against the carrier analysis: 1 % in time, 0.05 dB settled on, 0.3 dB settled off."""
    run = simulate(design, design.drivers[0], design.environment.temperature[0], engine, ["envelope", "carrier"])
    envelope, carrier = run.results
    assert not envelope.faults
    assert envelope.check < 0.05
    (frequency,) = design.carrier.frequency
    for name in ("rise_time", "fall_time"):
        assert envelope.figures[name].value > 10.0 / frequency
    for name in ("on_time", "off_time"):
        assert envelope.figures[name].value == pytest.approx(carrier.figures[name].value, rel=0.01)
    timeline = timeline_of(design)
    waves = [run.envelopes[name, frequency] for name in ("envelope", "carrier")]
    for instant, tolerance in ((timeline.falling, 0.05), (timeline.rising, 0.3)):
        settled = instant - timeline.edge - 2.0 / frequency
        levels = [20.0 * math.log10(abs(wave.at(settled))) for wave in waves]
        assert levels[1] == pytest.approx(levels[0], abs=tolerance)
    return run


@pytest.mark.parametrize("name", load_catalogue().names("driver"))
def test_driver(tmp_path, engine, name):
    compare(design_of(tmp_path, driver=f'part = "{name}"\n{DRIVERS.get(name, "")}', carrier=CARRIERS.get(name, "300 MHz")), engine)


@pytest.mark.parametrize(
    ("junction", "values"),
    [
        ("pin_lumped", {"junction": PIN, "driver": GATE}),
        ("pin_distributed", {"junction": THICK, "driver": GATE, "carrier": "500 MHz"}),
        ("junction_diode", {"junction": STEP, "driver": GATE, "carrier": "500 MHz"}),
        ("bjt_pair", {"junction": TRANSISTOR, "driver": GATE, "path": "series_bjt", "feed": RESISTORS}),
    ],
)
def test_junction(tmp_path, engine, junction, values):
    assert junction in values["junction"]
    compare(design_of(tmp_path, **{"path": "series_single", **values}), engine)
