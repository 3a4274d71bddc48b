"""Where the real level departs from small signal, and what the envelope analysis says of it, on the p-i-n example.

Run by hand: ``python tests/bench_levels.py [DESIGN] [--driver NAME] [--carrier HZ]``; some ten minutes for all of the
example. For each driver and carrier it steps the level from -20 to 30 dBm, prints the carrier analysis beside the
envelope's figures with the envelope's warnings, then the levels from which on_time is 5 % or the loss 0.1 dB off and
from which there is a warning, between steps of 2.5 dB on a straight line.
"""

from __future__ import annotations

import argparse
import math
from pathlib import Path

from transim.circuit.timeline import timeline_of
from transim.design.model import Design, Driver
from transim.design.toml import read_design
from transim.engine.ngspice import Engine, find_engine
from transim.quantities import format_quantity
from transim.study.result import CaseRun, Result
from transim.study.simulate import simulate

LEVELS = (-20.0, -10.0, *(2.5 * step for step in range(13)))
TIME, LOSS = 0.05, 0.1


def at(design: Design, frequency: float) -> Design:
    carrier = design.carrier.model_copy(update={"frequency": (frequency,), "level": LEVELS})
    return design.model_copy(update={"carrier": carrier})


def value(result: Result, metric: str) -> float:
    found = result.figures[metric].value
    return math.nan if found is None else found


def end_loss(design: Design, run: CaseRun, frequency: float) -> float:
    """Return the loss at the end of the on interval by the envelope analysis [dB], settled or not."""
    passes = design.switch.path.throws[0].passes_high
    timeline = timeline_of(design)
    end = timeline.falling - timeline.edge / 2.0 if passes else timeline.rising - timeline.edge / 2.0
    return -20.0 * math.log10(abs(complex(run.throws[0].envelopes["envelope", frequency].at(end))))


def first_level(departures: list[float], bound: float) -> str:
    """Return the level at which a departure first passes its bound; one without a figure lies at the next step."""
    for k, departure in enumerate(departures):
        if abs(departure) <= bound:
            continue
        before = abs(departures[k - 1]) if k else math.nan
        share = (bound - before) / (abs(departure) - before) if math.isfinite(departure) else 1.0
        level = LEVELS[k] if k == 0 else LEVELS[k - 1] + share * (LEVELS[k] - LEVELS[k - 1])
        return format_quantity(level, "dBm", 3)
    return f"above {LEVELS[-1]:g} dBm"


def sweep(design: Design, driver: Driver, engine: Engine) -> None:
    (frequency,) = design.carrier.frequency
    run = simulate(design, driver, 25.0, engine, ["envelope", "carrier"])
    small = {result.level: result for result in run.results if result.analysis == "envelope"}
    large = {result.level: result for result in run.results if result.analysis == "carrier"}
    times, losses, warned = [], [], []
    reference = end_loss(design, run, frequency)
    print(f"\ndriver {driver.name}, {format_quantity(frequency, 'Hz')}")
    print("   dBm    on_time off_time     loss isolation  shift on shift off   energy modulation  warnings")
    for level in LEVELS:
        result, figures = large[level], small[level]
        times.append(value(result, "on_time") / value(figures, "on_time") - 1.0)
        losses.append(value(result, "level_loss") - reference)
        warned.append([w.split(" the RF ")[1][:34] for w in figures.warnings])
        off = value(result, "off_time") / value(figures, "off_time") - 1.0
        shifts = [format_quantity(value(result, name), "V", 3) for name in ("bias_shift_on", "bias_shift_off")]
        print(
            f"{level:6.1f} {times[-1]:+10.2%} {off:+8.2%} {losses[-1]:+8.3f} {value(result, 'level_isolation'):9.2f}"
            f" {shifts[0]:>9} {shifts[1]:>9} {format_quantity(value(result, 'hot_switching_energy'), 'J', 3):>8}"
            f" {value(figures, 'rf_modulation'):10.3g}  {'; '.join(warned[-1])}"
        )
    turn_on = next((level for level, found in zip(LEVELS, warned, strict=True) if "itself" in str(found)), None)
    any_warning = next((level for level, found in zip(LEVELS, warned, strict=True) if found), None)
    print(f"on_time departs by 5 % from {first_level(times, TIME)}, loss by 0.1 dB from {first_level(losses, LOSS)}")
    print(f"first warning of the turn-on: {turn_on} dBm; first of any kind: {any_warning} dBm")


def main() -> None:
    command = argparse.ArgumentParser()
    example = Path(__file__).parents[1] / "examples" / "commutator_pin.toml"
    command.add_argument("design", nargs="?", type=Path, default=example)
    command.add_argument("--driver")
    command.add_argument("--carrier", type=float)
    given = command.parse_args()
    design, engine = read_design(given.design), find_engine()
    carriers = [given.carrier] if given.carrier else [30e6, 100e6, 150e6]
    for driver in design.drivers:
        if given.driver in (None, driver.name):
            for frequency in carriers:
                sweep(at(design, frequency), driver, engine)


if __name__ == "__main__":
    main()
