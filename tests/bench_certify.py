"""Whether the stated numerical uncertainty covers the difference to a run at ten times finer settings, in every metric.

Run by hand: ``python tests/bench_certify.py [DESIGN ...]``. Without designs both examples are run as they stand, and
then changed (other edges, temperatures and carriers), since the settings of ``--certify`` were chosen on the examples
themselves. Ten times finer is a tenth of the tolerance and of the longest step.
"""

from __future__ import annotations

import math
import sys
import time
from collections.abc import Iterator
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from transim.design.model import Design
from transim.design.toml import read_design
from transim.engine.ngspice import find_engine
from transim.study.run import run_design

EXAMPLES = sorted((Path(__file__).parents[1] / "examples").glob("*.toml"))


def finer(design: Design) -> Design:
    """Return a design at ten times finer settings."""
    numerics = design.numerics.model_copy(
        update={"reltol": design.numerics.reltol / 10.0, "steps": design.numerics.steps * 10}
    )
    return design.model_copy(update={"numerics": numerics})


def uncovered(design: Design) -> tuple[int, list[str], float]:
    """Return how many figures were compared, those that differ by more than stated, and the median relative width."""
    engine = find_engine()
    design = design.model_copy(update={"static": None})
    certified = run_design(design, engine, certify=True)
    reference = run_design(finer(design), engine)
    count, found, widths = 0, [], []
    for result, exact in zip(certified.results, reference.results, strict=True):
        for name, figure in result.figures.items():
            other = exact.figures[name]
            if figure.value is None and other.value is None:
                continue
            count += 1
            where = f"{result.driver} at {result.carrier:g} Hz, {result.temperature:g} degC: {name}"
            if figure.value is None or other.value is None:
                if figure.uncertainty != math.inf:
                    found.append(f"{where} exists in one run only")
                continue
            assert figure.uncertainty is not None
            widths.append(figure.uncertainty / abs(figure.value) if figure.value else 0.0)
            if abs(other.value - figure.value) > figure.uncertainty:
                found.append(f"{where} {figure.value:.6g} +- {figure.uncertainty:.2g}, finer {other.value:.6g} {figure.unit}")
    return count, found, sorted(widths)[len(widths) // 2]


def changed(file: Path) -> Iterator[tuple[str, Design]]:
    """Give a design as it stands, and with other edges, temperatures and carriers."""
    design = read_design(file)
    yield file.stem, design
    for edge in (0.5e-9, 10e-9):
        yield f"{file.stem}, edge {edge:g} s", design.model_copy(
            update={"control": design.control.model_copy(update={"edge": edge})}
        )
    yield f"{file.stem}, 85 degC, 70 MHz", design.model_copy(
        update={
            "environment": design.environment.model_copy(update={"temperature": (85.0,)}),
            "carrier": design.carrier.model_copy(update={"frequency": (70e6,)}),
        }
    )


if __name__ == "__main__":
    total = missed = 0
    for file in [Path(name) for name in sys.argv[1:]] or EXAMPLES:
        for name, design in changed(file):
            started = time.perf_counter()
            count, found, width = uncovered(design)
            total, missed = total + count, missed + len(found)
            seconds = time.perf_counter() - started
            print(f"{name}: {count} figures, {len(found)} not covered, median width {width:.1e}; {seconds:.0f} s", flush=True)
            for line in found:
                print(f"    {line}")
    print(f"{total} figures, {missed} not covered")
    sys.exit(1 if missed else 0)
