"""Oscilloscope records with known instants, written with numpy alone: nothing here is taken from the program.

Each record has a logic command with two straight edges and an RF envelope that starts `DELAY` after each 50 % point.
The instants of the envelopes are closed forms (derived; those of one and of two poles and of a ramp are the ones of
IEEE Std 181-2011's definitions worked out, see tests/published/test_ieee_std_181.py): one pole 1 - exp(-t/T) passes a
share x at -T ln(1 - x); two equal poles 1 - (1 + t/T) exp(-t/T) pass 10 and 90 % at 0.5318116 T and 3.8897202 T; a
ramp of length T at x T.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

DELAY = 60e-9
EDGE = 20e-9
#: Share of its length at which each shape passes 10 and 90 %.
INSTANTS = {
    "pole": (-math.log(0.9), -math.log(0.1)),
    "two poles": (0.5318116071652818, 3.889720169867429),
    "ramp": (0.1, 0.9),
}
#: A ramp is given a length of its own, so that all shapes take about as long.
STRETCH = {"pole": 1.0, "two poles": 0.65, "ramp": 2.7}


@dataclass(frozen=True)
class Synthetic:
    """A record and what is true about it; times in s, voltages in V."""

    time: np.ndarray
    command: np.ndarray
    rf: np.ndarray
    true: dict[str, float]


def rise(shape: str, x: np.ndarray) -> np.ndarray:
    x = np.maximum(x, 0.0)
    if shape == "pole":
        return -np.expm1(-x)
    if shape == "two poles":
        return 1.0 - (1.0 + x) * np.exp(-x)
    return np.minimum(x, 1.0)


def record(
    detector: str,
    shape: str,
    *,
    on_length: float,
    off_length: float,
    snr: float | None,
    bits: int | None = None,
    seed: int = 0,
    step: float = 1e-9,
    count: int = 6000,
    carrier: float = 100e6,
    slope: float = 25e-3,
) -> Synthetic:
    """Make a record; `snr` in dB is that of the detector's output in the on state, of a carrier its power."""
    noise = np.random.default_rng(seed)
    time = step * np.arange(count)
    on = 1e-6 + noise.uniform(0.0, step)
    off = 3.5e-6 + noise.uniform(0.0, step)
    up, down = np.clip((time - on) / EDGE + 0.5, 0.0, 1.0), np.clip((time - off) / EDGE + 0.5, 0.0, 1.0)
    command = 3.3 * (up - down)
    on_length, off_length = STRETCH[shape] * on_length, STRETCH[shape] * off_length
    envelope = rise(shape, (time - on - DELAY) / on_length) * (1.0 - rise(shape, (time - off - DELAY) / off_length))
    if detector == "carrier":
        rf, full = 0.8 * envelope * np.cos(2.0 * np.pi * carrier * time + 0.3), 0.8 / math.sqrt(2.0)
    elif detector == "linear":
        rf, full = 0.8 * envelope, 0.8
    elif detector == "square":
        rf, full = 0.8 * envelope**2, 0.8
    else:  # a logarithmic detector of 60 dB
        rf, full = 1.5 + slope * 20.0 * np.log10(np.maximum(envelope, 1e-3)), 1.5
    if snr is not None:
        rf = rf + full * 10.0 ** (-snr / 20.0) * noise.standard_normal(count)
        command = command + 0.02 * noise.standard_normal(count)
    if bits is not None:
        quantum = 2.0 * 1.2 * np.abs(rf).max() / 2**bits
        rf = quantum * np.round(rf / quantum)
    low, high = INSTANTS[shape]
    true = {
        "on_delay": DELAY + low * on_length,
        "on_time": DELAY + high * on_length,
        "rise_time": (high - low) * on_length,
        # the fall passes 90 % where its rising counterpart passes 10 %
        "off_delay": DELAY + low * off_length,
        "off_time": DELAY + high * off_length,
        "fall_time": (high - low) * off_length,
    }
    return Synthetic(time, command, rf, true)
