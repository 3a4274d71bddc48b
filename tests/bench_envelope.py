"""Envelope analysis against one carrier-resolved run of the same switch and pulse, measured side by side.

Run by hand: ``python tests/bench_envelope.py [DESIGN]``. The envelope's time is that of the whole analysis of one
driver: static deck, video run, solution and self-check at four biases. The carrier's time is that of one of the
three runs that a clean extraction needs. Both run alone, one after the other, several times; the medians count.
Where a carrier-resolved run of the whole cycle would take minutes, a shorter stretch of it is run, and the time a
carrier period is multiplied: the output says so.
"""

from __future__ import annotations

import statistics
import sys
import time
from pathlib import Path

from transim.circuit.assemble import assemble
from transim.circuit.decks import Origin, Tone, carrier_deck
from transim.circuit.timeline import Timeline, timeline_of
from transim.design.model import Design
from transim.design.toml import read_design
from transim.engine.ngspice import Engine, find_engine
from transim.study.simulate import simulate

REPEATS = 5
LONGEST_PERIODS = 10_000.0


def at(design: Design, frequency: float) -> Design:
    carrier = design.carrier.model_copy(update={"frequency": (frequency,)})
    return design.model_copy(update={"carrier": carrier})


def envelope_seconds(design: Design, engine: Engine) -> float:
    times = []
    for _ in range(REPEATS):
        start = time.perf_counter()
        simulate(design, design.drivers[-1], 25.0, engine, ["envelope"])
        times.append(time.perf_counter() - start)
    return statistics.median(times)


def carrier_seconds(design: Design, engine: Engine, frequency: float) -> tuple[float, float]:
    """Return the time of one run [s] and the share of the cycle that was really run."""
    timeline = timeline_of(design)
    share = min(1.0, LONGEST_PERIODS / (frequency * timeline.stop))
    # the stretch holds both edges: on and off times shrink alike
    short = Timeline(
        timeline.lead * share,
        min(timeline.edge, timeline.on_for * share / 4.0),
        timeline.on_for * share,
        timeline.period * share,
        1,
        timeline.stop * share,
    )
    netlist = assemble(design, design.drivers[-1])
    origin = Origin(design.title, "bench", design.drivers[-1].name, 25.0)
    deck = carrier_deck(netlist, design.control, short, design.numerics, origin, Tone(frequency, 0.06, 0.0, 0))
    done = engine.run(deck.text, name=deck.name, timeout=600.0, stop_time=deck.stop)
    return done.seconds / share, share


def main() -> None:
    file = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parents[1] / "examples" / "commutator_pin.toml"
    design, engine = read_design(file), find_engine()
    print(f"{design.title}; driver {design.drivers[-1].name}; {design.numerics.carrier_points} points a period")
    simulate(at(design, 1e8), design.drivers[-1], 25.0, engine, ["envelope"])
    seconds = {f: envelope_seconds(at(design, f), engine) for f in (1e7, 1e8, 1e9, 1e10)}
    for f, value in seconds.items():
        print(f"envelope at {f / 1e6:6.0f} MHz: {value * 1e3:8.1f} ms")
    for f in (1e9, 1e10):
        whole, share = carrier_seconds(at(design, f), engine, f)
        how = "whole cycle" if share == 1.0 else f"extrapolated from {100 * share:.1f} % of the cycle"
        print(f"one carrier run at {f / 1e9:.0f} GHz: {whole:8.2f} s ({how}); {whole / seconds[f]:6.1f} times the envelope")
    print(f"envelope, 10 GHz against 10 MHz: {seconds[1e10] / seconds[1e7]:.2f}")


if __name__ == "__main__":
    main()
