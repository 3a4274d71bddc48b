"""A run that no engine made: drivers whose RF is a single pole, so that every instant is known in closed form."""

import functools
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from transim.circuit.assemble import assemble
from transim.circuit.decks import Deck
from transim.circuit.timeline import timeline_of
from transim.design.toml import read_design
from transim.engine.rawfile import Plot
from transim.measure import Record, Waveform, extract, judge
from transim.report.page import page_text
from transim.study.result import CaseRun, Result, ThrowRun
from transim.study.run import Outcome

DESIGN = """\
title = TITLE
[control]
low = "0 V"
high = "3.3 V"
edge = "2 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "series_pair"
junction = "reed"
[junction.reed]
part = "pin_lumped"
[driver.slow]
part = "resistor_feed"
[driver.quick]
part = "resistor_feed"
[limits]
on_time = { max = "300 ns" }
insertion_loss = { max = "1 dB" }
isolation = { min = "35 dB" }
"""
#: Time constant of each driver's RF [s], the loss when on [dB] and the share that still passes when off.
TAUS, LOSS, FLOOR = {"slow": 200e-9, "quick": 50e-9}, 0.5, 1e-3
SPIKE, SPIKE_TAU = 0.1, 10e-9


@dataclass(frozen=True)
class Invented:
    """The run, and what it was made from."""

    outcome: Outcome
    loss: float = LOSS
    spike: float = SPIKE


@pytest.fixture(scope="session")
def invent(tmp_path_factory):
    """Return a function that makes a run; the same one for the same arguments."""

    @functools.cache
    def make(title='"Reed, arm 2"', points=1500, comment="") -> Invented:
        file = Path(tmp_path_factory.mktemp("invented") / "reed.toml")
        file.write_text(f"{comment}\n{DESIGN.replace('TITLE', title)}", encoding="utf-8")
        design = read_design(file)
        cases = tuple(_case(design, driver, TAUS[driver.name], points) for driver in design.drivers)
        return Invented(Outcome(design, "ngspice 39", cases))

    return make


@pytest.fixture(scope="session")
def page_of(invent):
    """Return a function that gives the page of a run."""

    @functools.cache
    def make(*arguments) -> str:
        return page_text(invent(*arguments).outcome)

    return make


def _case(design, driver, tau, points):
    timeline, netlist = timeline_of(design), assemble(design, driver)
    time = np.linspace(0.0, timeline.stop, points)
    rise, fall = timeline.rising, timeline.falling
    on = (time > rise) & (time <= fall)
    envelope = np.where(on, 1.0 - np.exp(-(time - rise) / tau), 0.0)
    held = 1.0 - np.exp(-(fall - rise) / tau)
    envelope = np.where(time > fall, held * np.exp(-(np.maximum(time, fall) - fall) / tau), envelope)
    level = 10.0 ** (-LOSS / 20.0)
    wave = Waveform(time, (level * np.maximum(envelope, FLOOR)).astype(complex), "1")
    spike = SPIKE * np.where(time >= rise, np.exp(-np.maximum(time - rise, 0.0) / SPIKE_TAU), 0.0)
    vectors = {"time": time, "v(ctl)": 3.3 * on, "v(drive)": 1.0 * on, "i(vdrive)": 0.01 * on}
    vectors |= {f"v({port.node})": spike for port in netlist.ports}
    vectors |= {f"i({supply})": -0.01 * on for supply in netlist.supplies}
    vectors |= {name: 0.01 * on for probe in netlist.probes for _, name in probe.terms if name not in vectors}
    names = tuple(vectors)
    plot = Plot("t", "Transient Analysis", "real", names, ("notype",) * len(names), np.column_stack([*vectors.values()]))
    record = Record(
        timing=timeline.timing(True),
        definitions=design.definitions,
        carrier=100e6,
        impedance=50.0,
        biased_passes=True,
        envelope=wave,
        static_on=complex(level),
        static_off=complex(level * FLOOR),
        match_on=0.05 + 0j,
        match_off=0.9 + 0j,
        video={port.node: Waveform(time, spike, "V") for port in netlist.ports},
        drive_current=Waveform(time, vectors["i(vdrive)"], "A"),
    )
    figures = extract(record)
    result = Result(driver.name, 100e6, 25.0, "envelope", figures, judge(figures, design.limits), "frozen: invented")
    deck = Deck("video", f"* deck of {driver.name}\n.end\n", writes_raw=False)
    return CaseRun(driver.name, 25.0, (result,), (deck,), plot, (ThrowRun("", {("envelope", 100e6): wave}),), 0.1)
