"""The tool against itself: envelope and carrier-resolved analysis of the examples, from 30 MHz to 1 GHz.

The carrier analysis resolves 40 points a period at reltol 1e-4 and takes the envelope from two runs in quadrature less
one without RF; it shares nothing with the envelope solver but the circuit. The pause between the pulses is shortened:
nothing happens in it.
"""

from __future__ import annotations

import math
from pathlib import Path

import pytest

from transim.circuit.timeline import timeline_of
from transim.design.toml import read_design
from transim.engine.ngspice import find_engine
from transim.measure.pulse import off_time, on_time
from transim.measure.record import Record
from transim.study.averaging import averaged_envelope
from transim.study.simulate import simulate

EXAMPLES = Path(__file__).parents[2] / "examples"


CASES = [
    *(("pin", "fast", 4.2e-6, frequency) for frequency in (30e6, 100e6, 1e9)),
    *(("bjt", "gate", 3e-6, frequency) for frequency in (30e6, 100e6, 1e9)),
    ("two", "bridge", 5e-6, 100e6),
]


@pytest.mark.parametrize(("example", "driver", "period", "frequency"), CASES)
def test_envelope_and_carrier_analysis_agree(example, driver, period, frequency):
    design = read_design(EXAMPLES / f"commutator_{example}.toml")
    design = design.model_copy(
        update={
            "control": design.control.model_copy(update={"period": period}),
            "carrier": design.carrier.model_copy(update={"frequency": (frequency,)}),
            "numerics": design.numerics.model_copy(update={"timeout": 280.0}),
        }
    )
    assert design.numerics.carrier_points == 40
    assert design.numerics.reltol == 1e-4
    chosen = next(d for d in design.drivers if d.name == driver)
    run = simulate(design, chosen, 25.0, find_engine(), ["envelope", "carrier"])
    timeline = timeline_of(design)
    for throw, place in zip(run.throws, design.switch.path.throws, strict=True):
        results = [result for result in run.results if result.throw == throw.name]
        agree(results, throw.envelopes, timeline.timing(place.passes_high), frequency)
        agree_averaged(results, throw.envelopes, timeline.timing(place.passes_high), design.definitions)


def agree(results, envelopes, timing, frequency):
    """Compare both analyses of one throw."""
    envelope, carrier = results
    assert not envelope.faults
    for name in ("on_time", "off_time"):
        mine, other = envelope.figures[name], carrier.figures[name]
        # a transistor at 1 GHz never isolates by 20 dB: then neither analysis may know an off time
        assert (mine.value is None) == (other.value is None), (mine, other)
        if mine.value is not None:
            # at 30 MHz a transition of the transistor lasts two periods, and an envelope is a mean over one
            assert mine.value == pytest.approx(other.value, rel=0.01 if frequency >= 100e6 else 0.03)
    # settled off before the on edge, on before the off edge: two carrier periods clear of them
    waves = [envelopes[name, frequency] for name in ("envelope", "carrier")]
    off, on = (edge - timing.edge - 2.0 / frequency for edge in (timing.on_edge, timing.off_edge))
    isolation = -20.0 * math.log10(abs(waves[1].at(off)))
    assert isolation == pytest.approx(envelope.figures["isolation"].value, abs=0.3)
    losses = [-20.0 * math.log10(abs(wave.at(on))) for wave in waves]
    assert losses[1] == pytest.approx(losses[0], abs=0.05)


def agree_averaged(results, envelopes, timing, definitions):
    """Compare times of the same quantity: the envelope averaged over the carrier period as the carrier analysis does."""
    envelope, carrier = results
    frequency = envelope.carrier
    times = 1 if envelope.method.startswith("ringing") else 2
    record = Record(
        timing=timing,
        definitions=definitions,
        carrier=frequency,
        impedance=50.0,
        biased_passes=True,
        envelope=averaged_envelope(envelopes["envelope", frequency], frequency, times),
        static_on=10.0 ** (-envelope.figures["insertion_loss"].value / 20.0),
    )
    for name, measure in (("on_time", on_time), ("off_time", off_time)):
        other = carrier.figures[name].value
        if other is not None:
            assert measure(record) == pytest.approx(other, rel=0.01)
