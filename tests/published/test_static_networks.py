"""Settled states of the paths against networks that scikit-rf solves, and against published closed forms.

Sources: J. F. White, "Microwave Semiconductor Engineering", 1982, and R. V. Garver, "Microwave Diode Control
Devices", 1976: a series resistance R between matched loads loses 20 log10(1 + R/2Z0), a shunt one isolates by
20 log10(1 + Z0/2R), a series capacitance by 10 log10(1 + (Xc/2Z0)^2) (numbers worked out from these forms).
The junction: P. O. Lauritzen, C. L. Ma, IEEE Trans. Power Electron. 6(2), 1991, i = (qE - qM)/TM,
dqM/dt = i - qM/tau, linearised by hand (derived) at a forward current I:

- junction: v/i = (1 + (tau/TM)/(1 + jw tau)) TM N Vt/qE, qE = I (tau + TM);
- I-region: R = 1/(G0 + mu Q/W^2), of which the charge follows i as tau/(1 + jw tau):
  v/i = R - I mu/W^2 R^2 tau/(1 + jw tau).

scikit-rf's nodal solver puts the networks together; it shares nothing with ngspice or this program. Every
S-parameter of both states agrees within 0.01 dB, 1 MHz to 10 GHz.
"""

import math

import numpy as np
import pytest
import scipy.constants
import skrf
from skrf.circuit import Circuit

from transim.design.toml import read_design
from transim.parts.catalogue import load_catalogue
from transim.study.case import Case
from transim.study.settled import run_static_sweeps

Z0 = 50.0
TEMPERATURE = 25.0
VT = scipy.constants.k * (TEMPERATURE + 273.15) / scipy.constants.e
CURRENT = 0.01
JUNCTION = {
    "lifetime": 1e-6, "transit_time": 4e-9, "width": 50e-6, "mobility": 0.18, "capacitance": 0.25e-12,
    "series_resistance": 0.3, "intrinsic_resistance": 8e3,
}  # fmt: skip
FEED = {"resistance": 2.5, "inductance": 3.3e-6, "capacitance": 0.2e-12, "loss": 15e3}
BLOCK = 1.2e-9

DESIGN = """
title = "Heron"
[control]
low = "0 V"
high = "3 V"
edge = "10 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "{path}"
junction = "hp"
{settings}
[junction.hp]
part = "pin_lumped"
{junction}
[driver.bench]
part = "ideal_current"
on_current = "{current} A"
off_current = "10 uA"
compliance = "12 V"
[static]
from = "1 MHz"
to = "10 GHz"
"""


def sweep_of(engine, tmp_path, path, settings, junction, current=CURRENT):
    """Return the static sweep of one path under an ideal current."""
    parts = load_catalogue()
    lines = {
        key: "\n".join(f'{name} = "{value!r} {part.settings[name].unit}"' for name, value in values.items())
        for key, values, part in (
            ("settings", settings, parts.find("path", path)),
            ("junction", junction, parts.find("junction", "pin_lumped")),
        )
    }
    file = tmp_path / "some.toml"
    file.write_text(DESIGN.format(path=path, current=current, **lines))
    design = read_design(file)
    return run_static_sweeps(Case(design, design.drivers[0], TEMPERATURE, engine))[0]


def full_settings(path):
    """Return settings of a path with every parasitic of its feeds."""
    names = ("feed",) if path == "shunt_single" else ("feed", "return")
    feeds = {f"{name}_{key}": value for name in names for key, value in FEED.items()}
    # a bypass that no driver can be seen through
    return {"dc_block": BLOCK, "bypass": 1e-5, **feeds}


def on_impedance(omega, current):
    """Return the impedance of a junction that is on, between its terminals."""
    p = JUNCTION
    tau, transit = p["lifetime"], p["transit_time"]
    lag = tau / (1.0 + 1j * omega * tau)
    junction = (1.0 + lag / transit) * transit * VT / (current * (tau + transit))
    slope = p["mobility"] / p["width"] ** 2
    resistance = 1.0 / (1.0 / p["intrinsic_resistance"] + slope * current * tau)
    region = resistance - current * slope * resistance**2 * lag
    return p["series_resistance"] + 1.0 / (1j * omega * p["capacitance"] + 1.0 / (junction + region))


def off_impedance(omega):
    """Return the impedance of a junction that is reverse biased: its capacitance and leads."""
    return JUNCTION["series_resistance"] + 1.0 / (1j * omega * JUNCTION["capacitance"])


def solved(frequency, path, junction):
    """Return S of a path, shape (n, 2, 2), by scikit-rf's nodal solver."""
    omega = 2.0 * math.pi * frequency
    media = skrf.media.DefinedGammaZ0(skrf.Frequency.from_f(frequency, unit="Hz"), z0=Z0)
    names = iter(range(100))

    def element(impedance):
        return media.resistor(impedance, name=f"z{next(names)}")

    block = 1.0 / (1j * omega * BLOCK)
    choke = 1.0 / (1.0 / (1j * omega * FEED["inductance"]) + 1j * omega * FEED["capacitance"] + 1.0 / FEED["loss"])
    dc_return = FEED["resistance"] + choke
    feed = dc_return + 1.0 / (1j * omega * 1e-5)
    ends = [Circuit.Port(media.frequency, f"p{k}", z0=Z0) for k in (1, 2)]
    blocks = [element(block), element(block)]
    grounds = []

    def to_ground(impedance):
        found, ground = element(impedance), Circuit.Ground(media.frequency, f"g{next(names)}", z0=Z0)
        grounds.append([(found, 1), (ground, 0)])
        return found, 0

    outer = [[(ends[0], 0), (blocks[0], 0)], [(blocks[1], 1), (ends[1], 0)]]
    if path == "shunt_single":
        inner = [[(blocks[0], 1), to_ground(junction), to_ground(feed), (blocks[1], 0)]]
    elif path == "series_single":
        diode = element(junction)
        inner = [
            [(blocks[0], 1), to_ground(feed), (diode, 0)],
            [(diode, 1), to_ground(dc_return), (blocks[1], 0)],
        ]
    else:
        diodes = element(junction), element(junction)
        inner = [
            [(blocks[0], 1), to_ground(dc_return), (diodes[0], 0)],
            [(diodes[0], 1), to_ground(feed), (diodes[1], 0)],
            [(diodes[1], 1), to_ground(dc_return), (blocks[1], 0)],
        ]
    return Circuit([*outer, *inner, *grounds]).network.s


@pytest.mark.parametrize("path", ["series_single", "shunt_single", "series_pair"])
def test_paths_against_scikit_rf(engine, tmp_path, path):
    sweep = sweep_of(engine, tmp_path, path, full_settings(path), JUNCTION)
    assert (sweep.frequency[0], sweep.frequency[-1]) == (pytest.approx(1e6), pytest.approx(1e10))
    assert sweep.frequency.size == 81
    omega = 2.0 * math.pi * sweep.frequency
    each = CURRENT / 2.0 if path == "series_pair" else CURRENT
    biased, unbiased = (sweep.off, sweep.on) if path == "shunt_single" else (sweep.on, sweep.off)
    for found, impedance in ((biased, on_impedance(omega, each)), (unbiased, off_impedance(omega))):
        expected = solved(sweep.frequency, path, impedance)
        difference = 20.0 * np.abs(np.log10(np.abs(found / expected)))
        assert difference.max() < 0.01
        assert np.abs(found - expected).max() < 1e-3


#: A path that is nothing but its junction, and a junction of resistance or capacitance alone.
BARE = {"shunt_single": {"dc_block": 1e-4, "feed_inductance": 1.0, "feed_capacitance": 0.0, "feed_loss": 1e12}}
BARE["series_single"] = BARE["shunt_single"] | {
    "return_inductance": 1.0,
    "return_capacitance": 0.0,
    "return_loss": 1e12,
}


def resistive(resistance):
    """Return a junction whose I-region alone counts; over a long lifetime nothing else of it has an impedance."""
    lifetime = 1e-4
    return {
        "lifetime": lifetime, "transit_time": 1e-12, "width": math.sqrt(0.18 * CURRENT * lifetime * resistance),
        "mobility": 0.18, "capacitance": 0.0, "series_resistance": 0.0, "intrinsic_resistance": 1e9,
    }  # fmt: skip


def at(sweep, values, frequency):
    place = int(np.argmin(np.abs(sweep.frequency - frequency)))
    assert sweep.frequency[place] == pytest.approx(frequency, rel=1e-6)
    return values[place]


@pytest.mark.parametrize(("resistance", "loss"), [(1.0, 0.08643), (3.0, 0.25674), (10.0, 0.82785)])
def test_series_resistance(engine, tmp_path, resistance, loss):
    sweep = sweep_of(engine, tmp_path, "series_single", BARE["series_single"], resistive(resistance))
    for frequency in (1e6, 1e8, 1e10):
        assert at(sweep, sweep.insertion_loss, frequency) == pytest.approx(loss, abs=0.01)


@pytest.mark.parametrize(("resistance", "isolation"), [(1.0, 28.299), (2.0, 22.607)])
def test_shunt_resistance(engine, tmp_path, resistance, isolation):
    sweep = sweep_of(engine, tmp_path, "shunt_single", BARE["shunt_single"], resistive(resistance))
    for frequency in (1e6, 1e8, 1e10):
        assert at(sweep, sweep.isolation, frequency) == pytest.approx(isolation, abs=0.01)


def test_series_capacitance(engine, tmp_path):
    junction = JUNCTION | {"capacitance": 0.3e-12, "series_resistance": 0.0}
    sweep = sweep_of(engine, tmp_path, "series_single", BARE["series_single"], junction)
    for frequency, isolation in ((1e8, 34.496), (1e9, 14.646), (1e10, 1.077)):
        assert at(sweep, sweep.isolation, frequency) == pytest.approx(isolation, abs=0.01)
    slope = at(sweep, sweep.isolation, 1e7) - at(sweep, sweep.isolation, 1e8)
    assert slope == pytest.approx(20.0, abs=0.01)
