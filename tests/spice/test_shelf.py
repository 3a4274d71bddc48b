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
CARRIERS = {"common_emitter": "500 MHz", "spike_and_hold": "1 GHz"}
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
    waves = [run.throws[0].envelopes[name, frequency] for name in ("envelope", "carrier")]
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
        ("bjt_pair", {"junction": TRANSISTOR, "driver": GATE, "path": "series_bjt", "feed": RESISTORS + '\nbypass = "470 pF"'}),
    ],
)
def test_junction(tmp_path, engine, junction, values):
    assert junction in values["junction"]
    compare(design_of(tmp_path, **{"path": "series_single", **values}), engine)


@pytest.mark.parametrize("temperature", ["-40", "125"])
@pytest.mark.parametrize("junction", ["pin_lumped", "pin_distributed"])
def test_bias_check_over_temperature(tmp_path, engine, junction, temperature):
    design = design_of(tmp_path, path="series_single", junction=f'part = "{junction}"', driver=GATE, temperature=temperature)
    (result,) = simulate(design, design.drivers[0], float(temperature), engine, ["envelope"]).results
    assert not result.faults
    assert result.check < 0.05


def test_ten_and_forty_cells(tmp_path, engine):
    found = {}
    for cells in (10, 40):
        design = design_of(tmp_path, path="series_single", junction=f'{THICK}\ncells = {cells}', driver=GATE)
        (result,) = simulate(design, design.drivers[0], 25.0, engine, ["envelope"]).results
        assert not result.faults
        found[cells] = result.figures["off_time"].value
    assert found[10] == pytest.approx(found[40], rel=0.01)


def test_thin_region_switches_like_the_lumped_part(tmp_path, engine):
    found = []
    for part in ("pin_lumped", "pin_distributed"):
        # diffusion adds W^2/(12 D), half a nanosecond here, to the transit time
        thin = f'part = "{part}"\nwidth = "4 um"\nlifetime = "300 ns"\ntransit_time = "4 ns"'
        design = design_of(tmp_path, path="series_single", junction=thin, driver=GATE)
        (result,) = simulate(design, design.drivers[0], 25.0, engine, ["envelope"]).results
        found.append(result.figures["off_time"].value)
    assert found[1] == pytest.approx(found[0], rel=0.01)


PUBLISHED = """\
* invented diode in a package
.model chip D(is=1e-14 n=1.05 rs=0.8 tt=150n cjo=0.3p vj=0.6 m=0.4 bv=70)
.SUBCKT WT7 1 2 PARAMS: L=0.6n
L1 2 3 {L}
D1 3 1 chip
C1 1 2 0.06p
.ENDS WT7
"""


def test_subcircuit_by_path_as_junction(tmp_path, engine):
    (tmp_path / "wt7.lib").write_text(PUBLISHED)
    foreign = 'part = "subcircuit"\nfile = "wt7.lib"\nname = "WT7"\nterminals = ["k", "a"]'
    design = design_of(tmp_path, path="series_single", junction=foreign, driver=GATE, carrier="500 MHz")
    compare(design, engine)


def test_published_cards_in_a_driver(tmp_path, engine):
    (tmp_path / "pair.lib").write_text(
        ".model N1 NPN(is=1e-14 bf=80 tf=1n cje=12p cjc=6p)\n.model P1 PNP(is=1e-14 bf=60 tf=1.5n cje=12p cjc=8p)\n"
    )
    driver = 'part = "complementary_follower"\nmodel = "pair.lib"'
    design = design_of(tmp_path, driver=driver)
    run = simulate(design, design.drivers[0], 25.0, engine, ["envelope"])
    assert not run.results[0].faults
    text = run.decks[0].text.lower()
    assert ".model upper npn(is=1e-14 bf=80" in text
    assert ".model lower pnp(is=1e-14 bf=60" in text
