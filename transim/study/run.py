"""A whole design: every driver at every temperature, with one verdict."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace

from transim.design.model import Design, Driver
from transim.engine.ngspice import Engine
from transim.errors import DesignError
from transim.measure.limits import Verdict
from transim.measure.sweep import BiasSweep
from transim.parts.nearest import nearest_name
from transim.study.certify import certified, finer_designs, settings_text
from transim.study.result import CaseRun, Result
from transim.study.settled import run_bias_sweeps
from transim.study.simulate import simulate

__all__ = ["ANALYSES", "Outcome", "Progress", "choose_drivers", "run_design"]

#: Analyses by the name under which they are asked for.
ANALYSES = {"envelope": ("envelope",), "carrier": ("carrier",), "both": ("envelope", "carrier")}

#: Called before each case with the number done, their total, and what comes next.
Progress = Callable[[int, int, str], None]


@dataclass(frozen=True)
class Outcome:
    """What the run of a design gave.

    Attributes
    ----------
    design : Design
        What was run.
    engine : str
        For example ``ngspice 39``.
    cases : tuple of CaseRun
        One for each driver and temperature.
    bias_sweeps : tuple of BiasSweep
        One for each temperature, where the design asks for them.
    bias_seconds : float
        Time that ngspice took for these [s].
    certified : str or None
        What the uncertainties of the figures come from; None where they were not asked for.
    """

    design: Design
    engine: str
    cases: tuple[CaseRun, ...]
    bias_sweeps: tuple[BiasSweep, ...] = ()
    bias_seconds: float = 0.0
    certified: str | None = None

    @property
    def results(self) -> tuple[Result, ...]:
        """Every result: by driver, then temperature, carrier and analysis."""
        return tuple(result for case in self.cases for result in case.results)

    @property
    def verdict(self) -> Verdict:
        """Fail if any limit of any result is missed, else undefined if any cannot be judged, else pass."""
        found = {result.verdict for result in self.results}
        if "fail" in found:
            return "fail"
        return "undefined" if "undefined" in found else "pass"

    @property
    def engine_seconds(self) -> float:
        """Time spent in ngspice [s]."""
        return sum(case.engine_seconds for case in self.cases) + self.bias_seconds


def run_design(
    design: Design,
    engine: Engine,
    *,
    drivers: Sequence[str] = (),
    analysis: str = "envelope",
    progress: Progress | None = None,
    certify: bool = False,
) -> Outcome:
    """Simulate and judge a design.

    Parameters
    ----------
    design : Design
        Read and checked.
    engine : Engine
        ngspice.
    drivers : sequence of str
        Names of the drivers to run; none means all.
    analysis : {"envelope", "carrier", "both"}
        How the RF envelope is found.
    progress : callable or None
        Told before each case.
    certify : bool
        Whether each case is repeated at finer settings, to give every figure its numerical uncertainty.

    Returns
    -------
    Outcome

    Raises
    ------
    DesignError
        If a driver's name is not in the design.
    EngineError
        If a deck fails, or ngspice is older than what is run.
    """
    # an engine that will not do is refused before it is used
    version = engine.version
    chosen = choose_drivers(design, drivers)
    todo = [(driver, temperature) for driver in chosen for temperature in design.environment.temperature]
    cases = []
    for done, (driver, temperature) in enumerate(todo):
        if progress is not None:
            progress(done, len(todo), f"{driver.name} at {temperature:g} degC")
        case = simulate(design, driver, temperature, engine, ANALYSES[analysis])
        if certify:
            finer = [
                simulate(other, driver, temperature, engine, ANALYSES[analysis], checks="start")
                for other in finer_designs(design)
            ]
            several = zip(case.results, *(other.results for other in finer), strict=True)
            case = replace(case, results=tuple(certified(first, rest, design) for first, *rest in several))
            seconds = sum(other.engine_seconds for other in finer)
            case = replace(case, engine_seconds=case.engine_seconds + seconds)
        cases.append(case)
    sweeps, seconds = run_bias_sweeps(design, engine)
    if progress is not None:
        progress(len(todo), len(todo), "")
    said = settings_text(design.numerics) if certify else None
    return Outcome(design, f"ngspice {version}", tuple(cases), sweeps, seconds, said)


def choose_drivers(design: Design, names: Sequence[str]) -> list[Driver]:
    """Return drivers of a design by name.

    Parameters
    ----------
    design : Design
        The design.
    names : sequence of str
        Their names; none means all.

    Returns
    -------
    list of Driver
        In the order of the names, each once.

    Raises
    ------
    DesignError
        If there is no driver of a name.
    """
    if not names:
        return list(design.drivers)
    known = {driver.name: driver for driver in design.drivers}
    for name in names:
        if name not in known:
            raise DesignError(
                f"there is no driver {name}",
                file=design.source.path,
                expected=f"one of {', '.join(known)}",
                nearest=nearest_name(name, known),
            )
    return [known[name] for name in dict.fromkeys(names)]
