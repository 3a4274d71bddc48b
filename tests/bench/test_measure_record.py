"""Times of records against the instants that they were made with.

Outside reference: `synthesise.py`, numpy alone, whose instants are closed forms: IEEE Std 181-2011's 10 and 90 %
instants (from memory) on one pole (ln 9 T), two equal poles (3.357909 T) and a ramp (0.8 T), computed apart from the
program. State levels: the same standard's histogram (from memory); its bias of half a bin is arithmetic.
"""

import json
import math

import numpy as np
import pytest

from transim.bench.cycle import Cycle
from transim.bench.detectors import Detector
from transim.bench.noise import estimate_noise
from transim.bench.setup import Channels, Setup
from transim.bench.states import state_levels
from transim.bench.uncertainty import measure_cycle
from transim.cli import main
from transim.errors import MeasurementError

TIMES = ("on_time", "off_time", "rise_time", "fall_time")
#: Signal to noise in dB and bits: None for no noise, no converter.
NOISES = ((40.0, None), (20.0, None), (40.0, 8), (None, 8))


def measure(record, detector, replicates=40, **setup):
    law = Detector(detector, slope=25e-3)
    carrier = 100e6 if detector == "carrier" else None
    cycle = Cycle(Channels(record.time, record.command, record.rf), Setup(law, carrier=carrier, **setup))
    return measure_cycle(cycle, replicates=replicates)


@pytest.mark.parametrize("shape", ["pole", "two poles", "ramp"])
@pytest.mark.parametrize("detector", ["linear", "square", "log"])
def test_exact_records_give_exact_times(synthetic, detector, shape):
    made = synthetic.record(detector, shape, on_length=100e-9, off_length=80e-9, snr=None, step=0.5e-9, count=12000)
    found = measure(made, detector, replicates=5)
    factor = {"pole": 2.1972246, "two poles": 3.357909, "ramp": 0.8}[shape]
    assert found["rise_time"].figure.value == pytest.approx(factor * synthetic.STRETCH[shape] * 100e-9, rel=1e-3)
    for name, true in made.true.items():
        assert found[name].figure.value == pytest.approx(true, rel=2e-3), name


@pytest.mark.parametrize("detector", ["carrier", "linear", "square", "log"])
def test_noisy_times_lie_within_one_percent_or_two_sigma(synthetic, detector):
    lengths = np.random.default_rng(11)
    good = cases = 0
    for shape in ("pole", "two poles", "ramp"):
        for snr, bits in NOISES:
            on, off = 10.0 ** lengths.uniform(-7.2, -6.6, 2)
            made = synthetic.record(detector, shape, on_length=on, off_length=off, snr=snr, bits=bits, seed=cases)
            found = measure(made, detector)
            for name in TIMES:
                cases += 1
                value, spread = found[name].figure.value, found[name].uncertainty
                if value is not None:
                    good += abs(value - made.true[name]) <= max(0.01 * made.true[name], 2.0 * spread)
    assert cases == 48
    # an undefined time counts as a miss
    assert good >= 0.95 * cases


def test_the_uncertainty_is_the_scatter(synthetic):
    """Monte Carlo: the errors of many records have the size that each record states, neither less nor much more."""
    errors = {name: [] for name in TIMES}
    for seed in range(16):
        made = synthetic.record("linear", "pole", on_length=150e-9, off_length=120e-9, snr=34.0, seed=seed)
        found = measure(made, "linear", replicates=30)
        for name in TIMES:
            errors[name].append((found[name].figure.value - made.true[name]) / found[name].uncertainty)
    for name, ratios in errors.items():
        assert 0.3 < np.sqrt(np.mean(np.square(ratios))) < 1.2, name


def test_histogram_levels_are_refined():
    """One pole: the mode of 100 bins is up to half a bin low, an exact edge of 109.86 then measures 107.7."""
    tau, time = 50.0, np.arange(0.0, 1000.0, 0.1)
    value = -np.expm1(-time / tau)
    counts, edges = np.histogram(value, 100)
    crude = float(edges[counts.argmax()] + edges[counts.argmax() + 1]) / 2.0
    low = 0.0

    def rise(high):
        return float(np.interp(0.9 * high, value, time) - np.interp(low + 0.1 * high, value, time))

    assert rise(crude) < 108.0
    padded = np.concatenate([np.zeros(2000), value])
    states = state_levels(padded, np.ones(padded.size), np.full(padded.size, 1e-6))
    assert states.low == pytest.approx(0.0, abs=1e-4)
    assert rise(states.high) == pytest.approx(50.0 * math.log(9.0), rel=1e-3)


@pytest.mark.parametrize("kind", ["linear", "square", "log"])
def test_detector_laws(kind):
    law = Detector(kind, zero=0.0 if kind == "log" else -0.1, slope=-20e-3)
    output = law.output(np.array([1.0, 0.1]), 0.7)
    expected = {"linear": -0.1 + 0.08, "square": -0.1 + 0.008, "log": 0.7 + 20.0 * 20e-3}[kind]
    assert output[1] == pytest.approx(expected)
    assert law.ratio(output, 0.7) == pytest.approx([1.0, 0.1])


def test_found_carrier_and_absolute_level(synthetic):
    made = synthetic.record("carrier", "pole", on_length=100e-9, off_length=100e-9, snr=40.0, carrier=87.3e6)
    cycle = Cycle(Channels(made.time, made.command, made.rf), Setup(Detector("carrier"), through=1.0))
    assert cycle.carrier == pytest.approx(87.3e6, rel=1e-5)
    found = measure_cycle(cycle, replicates=20)
    loss = found["insertion_loss"]
    assert loss.figure.value == pytest.approx(-20.0 * math.log10(0.8), abs=0.01)
    assert found["phase_settling"].figure.value is not None


def test_a_path_that_passes_while_the_command_is_low(synthetic):
    made = synthetic.record("linear", "pole", on_length=100e-9, off_length=100e-9, snr=40.0)
    cycle = Cycle(Channels(made.time, 3.3 - made.command, made.rf), Setup(Detector("linear"), passes_high=None))
    assert not cycle.passes_high


def test_leakage_has_its_closed_form(synthetic):
    """RC high-pass: 5 ns behind an edge of 20 ns, 3.3 V: peak V RC/tr (1 - exp(-tr/RC)), area V RC (derived)."""
    made = synthetic.record("linear", "pole", on_length=100e-9, off_length=100e-9, snr=None)
    constant, edge = 5e-9, synthetic.EDGE
    start = made.time[np.flatnonzero(made.command > 0.0)[0]]

    def spike(time):
        late = np.maximum(time - edge, 0.0)
        return 3.3 * constant / edge * (np.exp(-late / constant) - np.exp(-np.maximum(time, 0.0) / constant))

    leakage = 0.5 + spike(made.time - start)  # an offset of the oscilloscope
    leakage += 2e-3 * np.random.default_rng(4).standard_normal(leakage.size)
    cycle = Cycle(Channels(made.time, made.command, None, {"p2": leakage}), Setup(Detector("linear")))
    found = measure_cycle(cycle, replicates=30)
    peak = 3.3 * constant / edge * -math.expm1(-edge / constant)
    for name, true in (("video_peak", peak), ("video_area", 3.3 * constant)):
        figure = found[name]
        assert abs(figure.figure.value - true) < max(0.02 * true, 3.0 * figure.uncertainty), name


def test_correlated_noise_is_seen():
    noise = np.random.default_rng(2).standard_normal(20_000)
    assert estimate_noise(noise[None]).correlation == 1
    slow = np.convolve(noise, np.ones(8) / 8.0, mode="same")
    assert 5 <= estimate_noise(slow[None]).correlation <= 10


def test_a_command_that_rests_is_refused(synthetic):
    made = synthetic.record("linear", "pole", on_length=100e-9, off_length=100e-9, snr=40.0)
    with pytest.raises(MeasurementError, match="does not switch"):
        Cycle(Channels(made.time, 0.0 * made.command, made.rf), Setup(Detector("linear")))
    with pytest.raises(MeasurementError, match="no pulse 3"):
        Cycle(Channels(made.time, made.command, made.rf), Setup(Detector("linear"), pulse=3))


def test_command_line(synthetic, save, tmp_path, capsys):
    made = synthetic.record("linear", "pole", on_length=150e-9, off_length=120e-9, snr=40.0, bits=8)
    file = save(made, separator=";", decimal=",")
    out = tmp_path / "record.json"
    words = ["measure", str(file), "--command", "CH1", "--rf", "ch2", "--detector", "linear"]
    assert main([*words, "--json", str(out)]) == 0
    assert "on_time" in capsys.readouterr().out
    document = json.loads(out.read_text())
    metrics = document["results"][0]["metrics"]
    assert document["format"] == 1
    assert metrics["on_time"]["value"] == pytest.approx(made.true["on_time"], rel=0.03)
    assert metrics["on_time"]["uncertainty"] > 0.0
    assert metrics["insertion_loss"]["value"] is None
    assert "--through" in metrics["insertion_loss"]["note"]


@pytest.mark.parametrize(
    ("words", "said"),
    [
        (["--rf", "CH9"], "there is no column CH9"),
        (["--rf", "CH2", "--detector", "log"], "needs its slope"),
        (["--rf", "CH2", "--slope", "25 mV"], "only --detector log"),
        (["--rf", "CH2", "--carrier", "100"], "--carrier"),
        ([], "nothing to measure"),
        (["--rf", "CH2", "--time", "CH1"], "in V, not in s"),
    ],
)
def test_wrong_options_are_one_message(synthetic, save, capsys, words, said):
    made = synthetic.record("linear", "pole", on_length=150e-9, off_length=120e-9, snr=40.0, count=4500)
    assert main(["measure", str(save(made)), "--command", "CH1", *words]) == 2
    error = capsys.readouterr().err
    assert said in error
    assert "Traceback" not in error
