"""The paths of the shelf by envelope, carrier-resolved and static analysis; lines between junctions in the video run.

The carrier analysis shares nothing with the envelope solver but the circuit, the static one is ngspice's own AC
analysis. Each on_time and off_time spans some thirty periods of the carrier or more, so that 1 % is a third of one.
series_pair, series_single and series_bjt stand in test_shelf.py, with every driver and every junction.
"""

from __future__ import annotations

import math
import re

import numpy as np
import pytest

from transim.circuit.timeline import timeline_of
from transim.design.toml import read_design
from transim.envelope.bias import Bias
from transim.envelope.linearise import linearise, saved_vectors
from transim.envelope.memoryless import without_memoryless
from transim.envelope.scatter import excitation
from transim.measure.pulse import off_time, on_time
from transim.measure.record import Record
from transim.parts.catalogue import load_catalogue
from transim.study.averaging import averaged_envelope
from transim.study.case import Case
from transim.study.simulate import simulate

DESIGN = """
title = "Heron commutator: one path of the shelf"
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "0.5 us"
period = "0.9 us"
[carrier]
frequency = "{carrier}"
level = "-40 dBm"
[switch]
path = "{path}"
junction = "hp7"
dc_block = "100 pF"
bypass = "22 pF"
feed_resistance = "47 ohm"
feed_inductance = "1 uH"
{settings}
[junction.hp7]
{junction}
[driver.one]
{driver}
"""
RETURN = 'return_resistance = "10 ohm"\nreturn_inductance = "1 uH"'
JUNCTIONS = {
    "pin_lumped": 'lifetime = "80 ns"\ntransit_time = "4 ns"\nwidth = "20 um"\ncapacitance = "0.15 pF"',
    "pin_distributed": 'lifetime = "80 ns"\ntransit_time = "2 ns"\nwidth = "20 um"\ncapacitance = "0.15 pF"\ncells = 3',
    "junction_diode": 'transit_time = "60 ns"\njunction_capacitance = "0.2 pF"\nseries_resistance = "1 ohm"',
}
DRIVERS = {
    "push_pull_speedup": 'speedup_cap = "22 pF"',
    "resistor_feed": 'vn = "-1 V"',
    "common_emitter": "",
    "half_bridge": 'speedup_cap = "15 pF"',
}
LINED = ("shunt_quarter_wave_pair", "spdt_quarter_wave", "spdt_shunt")
RETURNED = ("series_shunt", "spdt_series", "spdt_quarter_wave")
CASES = [
    ("shunt_single", "junction_diode", "resistor_feed", "1 GHz"),
    ("series_shunt", "pin_lumped", "resistor_feed", "1 GHz"),
    ("series_shunt", "junction_diode", "push_pull_speedup", "1 GHz"),
    ("spdt_series", "pin_lumped", "resistor_feed", "1 GHz"),
    ("shunt_quarter_wave_pair", "pin_lumped", "common_emitter", "1 GHz"),
    ("shunt_quarter_wave_pair", "junction_diode", "resistor_feed", "1 GHz"),
    ("shunt_quarter_wave_pair", "pin_distributed", "push_pull_speedup", "500 MHz"),
    ("spdt_quarter_wave", "pin_lumped", "push_pull_speedup", "1 GHz"),
    ("spdt_quarter_wave", "junction_diode", "half_bridge", "1 GHz"),
    ("spdt_shunt", "pin_lumped", "resistor_feed", "1 GHz"),
]


#: Fast edges, of which 1 % is less than half a carrier period: there the same quantity has to be compared.
AVERAGED = [
    ("series_shunt", "pin_lumped", "push_pull_speedup", "500 MHz"),
    ("spdt_series", "pin_lumped", "push_pull_speedup", "1 GHz"),
    ("spdt_quarter_wave", "pin_lumped", "resistor_feed", "500 MHz"),
]


def design_of(tmp_path, path, junction, driver, carrier="1 GHz", settings=""):
    """Write and read a design; lines are a quarter wave at the carrier."""
    lines = [settings, f'line_frequency = "{carrier}"' if path in LINED else "", RETURN if path in RETURNED else ""]
    file = tmp_path / "shelf.toml"
    file.write_text(
        DESIGN.format(
            path=path,
            carrier=carrier,
            settings="\n".join(lines),
            junction=f'part = "{junction}"\n{JUNCTIONS[junction]}',
            driver=f'part = "{driver}"\n{DRIVERS[driver]}',
        )
    )
    return read_design(file)


def test_every_path_is_compared():
    elsewhere = {"series_pair", "series_single", "series_bjt"}
    assert {case[0] for case in CASES} | elsewhere == set(load_catalogue().names("path"))


def with_solution(design, solution):
    return design.model_copy(update={"numerics": design.numerics.model_copy(update={"solution": solution})})


@pytest.mark.parametrize(("path", "junction", "driver", "carrier"), CASES)
def test_analyses_agree(tmp_path, engine, path, junction, driver, carrier):
    """1 % in time, 0.05 dB of loss, 0.3 dB of isolation; both solutions of the envelope where there are lines."""
    design = design_of(tmp_path, path, junction, driver, carrier)
    run = simulate(design, design.drivers[0], 25.0, engine, ["envelope", "carrier"])
    runs = [run]
    if path in LINED:
        runs.append(simulate(with_solution(design, "ringing"), design.drivers[0], 25.0, engine, ["envelope"], checks="start"))
    (frequency,) = design.carrier.frequency
    timeline = timeline_of(design)
    for throw in design.switch.path.throws:
        name = throw.name if len(design.switch.path.throws) > 1 else ""
        (carrier_result,) = (r for r in run.results if (r.throw, r.analysis) == (name, "carrier"))
        waves = {"carrier": run.throw(name).envelopes["carrier", frequency]}
        for k, each in enumerate(runs):
            (envelope,) = (r for r in each.results if (r.throw, r.analysis) == (name, "envelope"))
            assert not envelope.faults
            assert not envelope.retries
            assert envelope.check < 0.05
            assert k == 0 or envelope.method.startswith("ringing")
            waves[f"envelope {k}"] = each.throw(name).envelopes["envelope", frequency]
            for figure in ("on_time", "off_time"):
                assert envelope.figures[figure].value == pytest.approx(carrier_result.figures[figure].value, rel=0.01)
        edges = timeline.falling, timeline.rising
        on, off = edges if throw.passes_high else edges[::-1]
        for edge, figure, tolerance in ((on, "insertion_loss", 0.05), (off, "isolation", 0.3)):
            settled = edge - timeline.edge - 2.0 / frequency
            static = envelope.figures[figure].value
            for wave in waves.values():
                assert -20.0 * math.log10(abs(wave.at(settled))) == pytest.approx(static, abs=tolerance)


@pytest.mark.parametrize(("path", "junction", "driver", "carrier"), AVERAGED)
def test_analyses_agree_on_the_mean_over_the_carrier_period(tmp_path, engine, path, junction, driver, carrier):
    design = design_of(tmp_path, path, junction, driver, carrier)
    run = simulate(design, design.drivers[0], 25.0, engine, ["envelope", "carrier"], checks="start")
    (frequency,) = design.carrier.frequency
    for throw, place in zip(run.throws, design.switch.path.throws, strict=True):
        envelope, resolved = (r for r in run.results if r.throw == throw.name)
        times = 1 if envelope.method.startswith("ringing") else 2
        record = Record(
            timing=timeline_of(design).timing(place.passes_high),
            definitions=design.definitions,
            carrier=frequency,
            impedance=50.0,
            biased_passes=True,
            envelope=averaged_envelope(throw.envelopes["envelope", frequency], frequency, times),
            static_on=10.0 ** (-envelope.figures["insertion_loss"].value / 20.0),
        )
        for name, measure in (("on_time", on_time), ("off_time", off_time)):
            assert measure(record) == pytest.approx(resolved.figures[name].value, rel=0.005)


#: Lengths of the line between the junctions: well below a step of the run without RF, about one, and many.
DELAYS = ("0.25 ns", "2.5 ns", "25 ns")


@pytest.mark.parametrize("driver", DRIVERS)
@pytest.mark.parametrize("junction", JUNCTIONS)
def test_a_line_between_two_junctions_converges(tmp_path, engine, junction, driver):
    for delay in DELAYS:
        design = design_of(tmp_path, "shunt_quarter_wave_pair", junction, driver, settings=f'line_delay = "{delay}"')
        case = Case(design, design.drivers[0], 25.0, engine)
        case.video(())
        assert not case.retries


def ladder(text, delay, sections):
    """Return a deck with the line replaced by inductors and capacitors."""
    match = re.search(r"(?m)^Tline (\S+) 0 (\S+) 0 .*$", text)
    first, last = match[1], match[2]
    inductance, capacitance = 50.0 * delay / sections, delay / 50.0 / sections
    nodes = [first, *(f"l{k}" for k in range(1, sections)), last]
    cards = [f"Cl0 {first} 0 {capacitance / 2!r}", f"Cl{sections} {last} 0 {capacitance / 2!r}"]
    cards += [f"Cl{k} {nodes[k]} 0 {capacitance!r}" for k in range(1, sections)]
    cards += [f"Ll{k} {nodes[k]} {nodes[k + 1]} {inductance!r}" for k in range(sections)]
    return text[: match.start()] + "\n".join(cards) + text[match.end() :]


@pytest.mark.parametrize("delay", [0.25e-9, 2.5e-9, 20e-9])
def test_a_line_is_the_limit_of_a_ladder(tmp_path, engine, delay):
    """A line between two junctions against sixty sections of inductors and capacitors, at fine steps (derived)."""
    settings = f'line_delay = "{delay!r} s"'
    design = design_of(tmp_path, "shunt_quarter_wave_pair", "pin_lumped", "push_pull_speedup", settings=settings)
    design = design.model_copy(update={"numerics": design.numerics.model_copy(update={"steps": 5000, "reltol": 1e-5})})
    case = Case(design, design.drivers[0], 25.0, engine)
    case.video(())
    (deck,) = case.decks
    plot = engine.run(ladder(deck.text, delay, 60), name="ladder", stop_time=deck.stop).plots[0]
    time = np.real(plot["time"])
    for name in ("v(xpath.xj1.x1.q)", "v(xpath.xj2.x1.q)", "v(p1)", "v(p2)"):
        found, line = np.real(plot[name]), np.interp(time, case.vectors["time"], case.vectors[name])
        difference = np.abs(line - found)
        # where a junction lets go, a port sees a step of which the ladder rounds the corners
        assert (difference.max() if name.endswith("q)") else np.sqrt(np.mean(difference**2))) < 5e-4 * np.abs(found).max()


def test_a_region_of_cells_leaves_few_unknowns_to_integrate(tmp_path, engine):
    """Ten cells in use of forty: the ringing solution once spent 45 s on 285 unknowns, most of them without memory."""
    design = design_of(tmp_path, "shunt_single", "pin_distributed", "push_pull_speedup")
    case = Case(design, design.drivers[0], 25.0, engine)
    circuit, _ = case.static()
    case.video(saved_vectors(circuit))
    ports = case.netlist.ports
    bias = Bias(case.vectors, case.vectors["time"])
    whole = linearise(circuit, bias, 25.0, [port.source for port in ports])
    small, _ = without_memoryless(whole, excitation(whole, ports), [f"v:{port.node}" for port in ports])
    assert whole.size > 100
    assert small.size < 0.4 * whole.size
