"""What studies cost: workers against one, overhead against the bare simulations, memory, and tuning against brute force.

Run by hand on a quiet machine of two processors: ``python tests/bench_studies.py [sweep] [spread] [tune]``; without a
word all three. Ratios are of one run: what is compared is measured in turns, so that a busy machine slows both.
"""

from __future__ import annotations

import itertools
import os
import random
import resource
import shutil
import sys
import tempfile
import time
from dataclasses import replace
from multiprocessing import forkserver
from pathlib import Path

import numpy as np

from transim.design.model import Design
from transim.design.studies import Spread, Sweep, Tune
from transim.design.toml import read_design
from transim.design.vary import study_of
from transim.engine.ngspice import Engine, find_engine
from transim.study.plan import Plan
from transim.study.point import Setup, simulate_point
from transim.study.score import smallest_margin
from transim.study.spread import run_spread
from transim.study.study import Advance, Place, Study, Workers
from transim.study.tune import run_tune

EXAMPLE = Path(__file__).parents[1] / "examples" / "commutator_pin.toml"
CAP, RESISTOR = "driver.fast.speedup_cap", "driver.fast.series_resistor"


def one_carrier() -> Design:
    design = read_design(EXAMPLE)
    carrier = design.carrier.model_copy(update={"frequency": design.carrier.frequency[-1:]})
    return design.model_copy(update={"carrier": carrier, "static": None})


def processor_seconds() -> float:
    """Return the processor time of this process, of all children that have ended, and of workers that have [s]."""
    found = [resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN)]
    total = sum(usage.ru_utime + usage.ru_stime for usage in found)
    server = forkserver._forkserver._forkserver_pid
    if server is not None:
        # workers are children of the process that starts them: user, system, and those of what it has waited for
        fields = Path(f"/proc/{server}/stat").read_text().rpartition(")")[2].split()[11:15]
        total += sum(map(int, fields)) / os.sysconf("SC_CLK_TCK")
    return total


def resident() -> float:
    """Return the memory of this process [MB]."""
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return pages * os.sysconf("SC_PAGE_SIZE") / 1e6


def points_of(design: Design, words: list[str]) -> tuple[tuple[str, ...], list[tuple[str, tuple[float, ...]]]]:
    axes = study_of(design, Sweep, words).axes
    grid = itertools.product(*(axis.values for axis in axes))
    return tuple(axis.parameter for axis in axes), [(str(n), values) for n, values in enumerate(grid)]


def run_points(setup: Setup, points: list, engine: Engine, workers: int) -> tuple[float, float]:
    """Return wall and processor time of a study, workers and ngspice included [s]."""
    folder = Path(tempfile.mkdtemp(prefix="bench-"))
    wall, processor = time.perf_counter(), processor_seconds()
    with Study("sweep", setup, {}, engine, Place(folder / "study"), Workers(workers)) as study:
        study.complete(points)
        assert study.advance.failed == 0
        assert study.advance.done == len(points)
    # the workers have ended here; their starter collects them, and knows their processor time, a moment later
    time.sleep(0.3)
    found = time.perf_counter() - wall, processor_seconds() - processor
    shutil.rmtree(folder)
    return found


def bench_sweep(design: Design, engine: Engine) -> None:
    names, points = points_of(
        design, [f"{CAP} = 100 pF .. 10 nF, logarithmic 20", f"{RESISTOR} = 150 ohm .. 300 ohm, linear 20"]
    )
    setup = Setup(design, names, ("fast",), version=engine.version)
    parts = [points[k::4] for k in range(4)]
    wall = {1: 0.0, 2: 0.0}
    processor = {1: 0.0, 2: 0.0}
    bare = 0.0
    # in turns: a quarter by one worker, by two, and bare in this process
    for part in parts:
        for workers in (1, 2):
            seconds = run_points(setup, part, engine, workers)
            wall[workers] += seconds[0]
            processor[workers] += seconds[1]
        start = processor_seconds()
        for _, values in part:
            simulate_point(setup, values)
        bare += processor_seconds() - start
    count = len(points)
    print(
        f"{count}-point sweep: one worker {wall[1]:.1f} s, two workers {wall[2]:.1f} s, {wall[1] / wall[2]:.2f} times (1.7 wanted)"
    )
    print(
        f"processor time a point: bare {1e3 * bare / count:.0f} ms, study {1e3 * processor[2] / count:.0f} ms,"
        f" {processor[2] / bare:.2f} times (1.25 allowed)"
    )


def bench_spread(design: Design, engine: Engine) -> None:
    words = [f"{CAP} = 5 %", f"{RESISTOR} = 1 %, normal", "junction.hp7.lifetime = 30 %", "driver.fast.vp = 5 %"]
    spread = study_of(design, Spread, words, {"trials": 1000, "driver": ["fast"]})
    memory: dict[int, float] = {}

    def told(advance: Advance) -> None:
        if advance.done in (200, 1000):
            memory[advance.done] = resident()

    folder = Path(tempfile.mkdtemp(prefix="bench-"))
    wall, processor = time.perf_counter(), processor_seconds()
    plan = Plan(engine, Place(folder / "study"), Workers(2), advanced=told)
    outcome = run_spread(design, spread, plan)
    wall, processor = time.perf_counter() - wall, processor_seconds() - processor
    shutil.rmtree(folder)
    print(
        f"1,000-trial spread: {wall:.1f} s on two workers (60 allowed); {processor:.1f} s of processor time, all in;"
        f" yield {outcome.total.value:.3f}"
    )
    largest = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1e3
    print(
        f"memory of the parent: {memory[200]:.0f} MB at trial 200, {memory[1000]:.0f} MB at 1000, {largest:.0f} MB at most"
        " (300 allowed)"
    )


def tuned(design: Design, engine: Engine, words: list[str], known: float, allowed: tuple[int, float], folder: Path) -> None:
    """Tune with three seeds, and print what was found against the best that is known, in how many runs."""
    runs, share = allowed
    for seed in (1, 2, 3):
        tune = study_of(design, Tune, words, {"driver": ["fast"], "seed": seed})
        wall = time.perf_counter()
        outcome = run_tune(design, tune, Plan(engine, Place(folder / f"tune{len(words)}{seed}"), Workers(2)))
        margin = smallest_margin(outcome.best)
        good = outcome.runs <= runs and margin >= known - share * abs(known)
        print(
            f"  seed {seed}: {100 * margin:.3f} % at {outcome.best.values} in {outcome.runs} runs ({runs} allowed),"
            f" {100 * (margin / known - 1):+.2f} % of the best margin ({-100 * share:.0f} % allowed),"
            f" {time.perf_counter() - wall:.1f} s: {'good' if good else 'MISSED'}"
        )


def bench_tune(design: Design, engine: Engine) -> None:
    """Tune against the limits of the example, and against those alone of which each asks for other values."""
    against_each_other = tuple(one for one in design.limits if one.metric in ("on_time", "off_time", "video_peak"))
    for limits in (design.limits, against_each_other):
        print(f"limits on {', '.join(limit.metric for limit in limits)}")
        tune_against_all(design.model_copy(update={"limits": limits}), engine)


def tune_against_all(design: Design, engine: Engine) -> None:
    words = ["driver.fast.speedup_cap = 100 pF .. 10 nF, E24", "switch.bypass = 10 pF .. 1 nF, E24"]
    names, points = points_of(design, words)
    setup = Setup(design, names, ("fast",), version=engine.version)
    folder = Path(tempfile.mkdtemp(prefix="bench-"))
    wall = time.perf_counter()
    with Study("sweep", setup, {}, engine, Place(folder / "grid"), Workers(2)) as study:
        study.complete(points)
        margins = {point.values: smallest_margin(point) for _, point in study.points()}
    known = {values: margin for values, margin in margins.items() if margin is not None}
    best = max(known, key=known.__getitem__)
    near = sum(margin >= known[best] - 0.01 * abs(known[best]) for margin in known.values())
    print(
        f"two capacitors, grid of {len(points)} in {time.perf_counter() - wall:.0f} s, {len(points) - len(known)} of them"
        f" without a margin: best margin {100 * known[best]:.3f} % at {best}; {near} points within 1 % of it"
    )
    tuned(design, engine, words, known[best], (len(points) // 10, 0.01), folder)
    more = [*words, f"{RESISTOR} = 100 ohm .. 470 ohm, E24"]
    axes = study_of(design, Tune, more).axes
    names = tuple(axis.parameter for axis in axes)
    chance = random.Random(1)
    picks = [(str(n), tuple(chance.choice(axis.values) for axis in axes)) for n in range(3000)]
    setup = replace(setup, parameters=names)
    wall = time.perf_counter()
    with Study("sweep", setup, {}, engine, Place(folder / "random"), Workers(2)) as study:
        study.complete(picks)
        found = [(margin, point.values) for _, point in study.points() if (margin := smallest_margin(point)) is not None]
    top, values = max(found)
    print(
        f"three parameters: best of 3,000 random points of {np.prod([len(axis.values) for axis in axes]):,} in"
        f" {time.perf_counter() - wall:.0f} s {100 * top:.3f} % at {values}"
    )
    tuned(design, engine, more, top, (150, 0.02), folder)
    shutil.rmtree(folder)


def main() -> None:
    design, engine = one_carrier(), find_engine()
    wanted = sys.argv[1:] or ["sweep", "spread", "tune"]
    for name, bench in (("sweep", bench_sweep), ("spread", bench_spread), ("tune", bench_tune)):
        if name in wanted:
            bench(design, engine)


if __name__ == "__main__":
    main()
