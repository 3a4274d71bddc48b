"""RF envelope of a charge-controlled p-i-n diode between matched ports, under ideal current drive.

Source: charge control dQ/dt = i - Q/tau and the resistance of the I-region R = W^2/((mun + mup) Q), as in
J. F. White, "Microwave Semiconductor Engineering", 1982; the envelope that follows has no published
numbers (derived, worked out apart from this program). No junction and no capacitance:

- series: |S21| = 2 Z0/(2 Z0 + R), shunt: |S21| = 2 R/(2 R + Z0), R = k/Q, k = W^2/(mun + mup);
- on: Q = IF tau (1 - exp(-t/tau)); off: Q = (IF + IR) tau exp(-t/tau) - IR tau, until Q = 0.

Read: W 50 um, 0.18 m^2/Vs, tau 1 us, IF = IR = 10 mA, Z0 50 ohm; each instant in ns to the digits printed
here, half a unit of the last one allowed. Samples are 0.1 % apart in time from each end of the change, so
that chords add less than a tenth of that. The metrics see samples of the closed form, no simulation.
"""

import math

import numpy as np
import pytest

from transim.measure import METRICS, Definitions, Record, Timing, Waveform

NS = 1e-9
TAU, CURRENT, Z0 = 1e-6, 0.01, 50.0
K = (50e-6) ** 2 / 0.18
EMPTY = TAU * math.log(2.0)  # Q = 0 after the current turns round
LONG = 25e-6  # forward current flows so long: 25 lifetimes
STOP = LONG + 2e-6


def sampled_charge():
    """Return instants and charge: forward from 0, reverse from LONG until the charge is gone."""
    grid = np.geomspace(1e-13, LONG, 40001)
    near = np.geomspace(1e-13, EMPTY / 2.0, 20001)
    off = LONG + np.concatenate(([0.0], near, (EMPTY - near)[::-1][1:], [EMPTY, 2e-6]))
    time = np.concatenate(([0.0], grid[:-1], off))
    forward = -CURRENT * TAU * np.expm1(-time / TAU)
    reverse = CURRENT * TAU * (2.0 * np.exp(-(time - LONG) / TAU) - 1.0)
    return time, np.where(time <= LONG, forward, np.maximum(reverse, 0.0))


def record(kind, **settings):
    """Return the cycle of a series or a shunt diode; the command's edges are steps."""
    time, charge = sampled_charge()
    if kind == "series":
        s21 = 2.0 * Z0 * charge / (2.0 * Z0 * charge + K)
        edges = {"on_edge": 0.0, "off_edge": LONG}
        static = (2.0 * Z0 / (2.0 * Z0 + K / (CURRENT * TAU)), 0.0)
    else:
        s21 = 2.0 * K / (2.0 * K + Z0 * charge)
        edges = {"on_edge": LONG, "off_edge": 0.0}
        static = (1.0, 2.0 * K / (2.0 * K + Z0 * CURRENT * TAU))
    current = np.where(time <= LONG, CURRENT, np.where(time <= LONG + EMPTY, -CURRENT, 0.0))
    return Record(
        timing=Timing(**edges, edge=0.0, start=0.0, stop=STOP, period=1e-4),
        definitions=Definitions(**settings),
        carrier=150e6,
        impedance=Z0,
        biased_passes=kind == "series",
        envelope=Waveform(time, s21 + 0j, "1"),
        static_on=complex(static[0]),
        static_off=complex(static[1]),
        drive_current=Waveform(time, current, "A"),
        junction_charge={"j1": Waveform(time, charge, "C")},
    )


@pytest.mark.parametrize(
    ("name", "expected", "half_digit"),
    [
        ("on_delay", 1.5209, 5e-5),
        ("on_time", 116.26, 5e-3),
        ("off_delay", 589.01, 5e-3),
        ("off_time", 691.63, 5e-3),
    ],
)
def test_series_diode(name, expected, half_digit):
    assert METRICS[name].function(record("series")) == pytest.approx(expected * NS, abs=half_digit * NS)


def test_series_diode_settles():
    found = METRICS["on_settling"].function(record("series", settle_band=0.1))
    assert found == pytest.approx(780.71 * NS, abs=5e-3 * NS)


def test_series_diode_is_empty():
    # 100 dB down the charge is 0.1 pC, 7 ps before it is gone.
    found = METRICS["off_settling"].function(record("series", isolation_level=100.0))
    assert found == pytest.approx(693.15 * NS, abs=5e-3 * NS)


@pytest.mark.parametrize(
    ("name", "expected", "half_digit"), [("off_delay", 6.1920, 5e-5), ("on_time", 686.99, 5e-3)]
)
def test_shunt_diode(name, expected, half_digit):
    assert METRICS[name].function(record("shunt")) == pytest.approx(expected * NS, abs=half_digit * NS)


def test_shunt_diode_at_half_and_at_its_floor():
    wave = record("shunt").envelope.magnitude()
    assert wave.crossings(0.5, "falling") == pytest.approx([57.158 * NS], abs=5e-4 * NS)
    assert wave.crossings(0.5, "rising") - LONG == pytest.approx([639.08 * NS], abs=5e-3 * NS)
    floor = 10.0 ** (-METRICS["isolation"].function(record("shunt")) / 20.0)
    assert floor == pytest.approx(0.052632, abs=5e-7)


@pytest.mark.parametrize("kind", ["series", "shunt"])
def test_charge_of_driver_and_junction(kind):
    # Under a constant current the driver moves I t until the instant; the junction holds IF tau.
    found = record(kind)
    values = {name: METRICS[name].function(found) for name in METRICS if name in ("on_time", "off_time")}
    for edge in ("on", "off"):
        charge = METRICS[f"driver_charge_{edge}"].function(found)
        assert charge == pytest.approx(CURRENT * values[f"{edge}_time"], rel=1e-3)
        assert charge > 0.0
    assert METRICS["junction_charge"].function(found) == pytest.approx(CURRENT * TAU, rel=1e-9)
