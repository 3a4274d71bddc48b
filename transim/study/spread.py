"""Spread: trials within tolerances, the yield, the worst case, and the tolerance that costs most."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass, replace
from typing import Literal

import numpy as np
import numpy.typing as npt

from transim.design.model import Design
from transim.design.studies import Spread
from transim.design.tolerances import Tolerance
from transim.errors import EngineError
from transim.study.interval import wilson_interval
from transim.study.plan import Plan, chosen_drivers, full_run
from transim.study.run import Outcome
from transim.study.sampling import draw_corners, draw_trials
from transim.study.study import Advance, Study
from transim.study.table import Table, collect

__all__ = ["Cause", "SpreadOutcome", "Yield", "loss_causes", "run_spread", "yield_of"]

#: Classes of one tolerance's values, of equal counts, between which the loss is compared.
_CLASSES = 8
#: Trials that a class needs.
_FEWEST = 5
#: With fewer lost or good trials than this the loss itself tells nothing, and the smallest margin is looked at.
_TELLING = 10


@dataclass(frozen=True)
class Yield:
    """Share of trials that meet all limits.

    Attributes
    ----------
    good, judged, failed : int
        Trials that meet all limits, that were simulated, and that could not be simulated. A trial with an undefined
        limit is judged and not good.
    low, high : float
        Confidence interval of the yield.
    confidence : float
        Its confidence.
    """

    good: int
    judged: int
    failed: int
    low: float
    high: float
    confidence: float

    @property
    def value(self) -> float:
        """The yield, 0 .. 1; NaN without trials."""
        return self.good / self.judged if self.judged else float("nan")


@dataclass(frozen=True)
class Cause:
    """What one tolerance, or a lot of them, has to do with the loss.

    Attributes
    ----------
    name : str
        Parameter, or the lot and its parameters.
    share : float
        Share of the variance that goes with it, 0 .. 1: of the loss, or of the smallest margin (`of`).
    low, high : float
        Loss among the lowest and among the highest quarter of its values, 0 .. 1.
    of : {"loss", "margin"}
        What is explained; the margin where ten trials are not lost, or ten not good.
    """

    name: str
    share: float
    low: float
    high: float
    of: Literal["loss", "margin"] = "loss"


@dataclass(frozen=True)
class SpreadOutcome:
    """What a spread gave.

    Attributes
    ----------
    design : Design
        At its nominal values.
    spread : Spread
        Tolerances and trials.
    drivers : tuple of str
        What was run.
    table : Table
        All trials.
    nominal : Outcome
        The design at its nominal values, with every check.
    worst : Outcome or None
        The trial of the smallest margin, with every check and its decks.
    worst_place : int or None
        Which one it is in the table.
    total : Yield
        Over all drivers together.
    by_driver : tuple of Yield
        Of each driver.
    causes : tuple of Cause
        Tolerances, the costliest first.
    advance : Advance
        How many trials, how fast, how many failed.
    """

    design: Design
    spread: Spread
    drivers: tuple[str, ...]
    table: Table
    nominal: Outcome
    worst: Outcome | None
    worst_place: int | None
    total: Yield
    by_driver: tuple[Yield, ...]
    causes: tuple[Cause, ...]
    advance: Advance


def run_spread(design: Design, spread: Spread, plan: Plan) -> SpreadOutcome:
    """Run the trials of a spread, or go on with them.

    Parameters
    ----------
    design : Design
        Read and checked.
    spread : Spread
        Tolerances and trials.
    plan : Plan
        Where and how.

    Returns
    -------
    SpreadOutcome
        The study's folder also holds the trials as `arrays.npz` and `table.csv`.

    Raises
    ------
    DesignError
        If parameters and drivers do not fit together.
    EngineError
        If the nominal design cannot be simulated.
    StudyError, OutputError
        If the study cannot be kept or gone on with, or has too many corners.
    """
    parameters = tuple(tolerance.parameter for tolerance in spread.tolerances)
    drivers = chosen_drivers(design, spread.drivers, parameters)
    setup = plan.setup(design, parameters, drivers)
    corners = spread.points == "corners"
    values = (
        draw_corners(spread.tolerances)
        if corners
        else draw_trials(spread.tolerances, spread.trials, spread.seed, spread.points)
    )
    # a longer spread with the same seed begins with the trials of the shorter one, and finds them
    definition = {
        "tolerances": [asdict(tolerance) for tolerance in spread.tolerances],
        "points": spread.points,
        "seed": None if corners else spread.seed,
    }
    if spread.points == "sobol":
        definition["length"] = (spread.trials - 1).bit_length()
    with Study("spread", setup, definition, plan.engine, plan.place, plan.workers, plan.advanced) as study:
        nominal = full_run(plan, setup, None, "the nominal design")
        points = {str(number): tuple(row) for number, row in enumerate(values.tolist())}
        study.complete(points.items())
        table = collect(study.points(), list(points), parameters, [tolerance.unit for tolerance in spread.tolerances])
        table.write_arrays(plan.place.folder / "arrays.npz")
        table.write_csv(plan.place.folder / "table.csv")
        place = _worst(table)
        worst = None
        if place is not None:
            worst = _run_again(plan, setup.at(tuple(table.values[place].tolist())), drivers)
        columns = [[c for c, case in enumerate(table.cases) if case.driver == driver] for driver in drivers]
        good = [np.asarray(table.case_good[:, some].all(axis=1)) for some in columns] if table.cases else []
        return SpreadOutcome(
            design,
            spread,
            drivers,
            table,
            nominal,
            worst,
            place,
            yield_of(table.good, table.failed, spread.confidence),
            tuple(yield_of(some, table.failed, spread.confidence) for some in good),
            loss_causes(table, spread.tolerances),
            study.advance,
        )


def _run_again(plan: Plan, design: Design, drivers: Sequence[str]) -> Outcome | None:
    from transim.study.run import run_design

    plan.say("the worst trial, with every check")
    try:
        return run_design(design, plan.engine, drivers=drivers, analysis=plan.analysis)
    except EngineError:
        # the trial itself is in the table; its extra checks alone have failed
        return None


def yield_of(good: npt.NDArray[np.bool_], failed: npt.NDArray[np.bool_], confidence: float) -> Yield:
    """Return the yield of trials.

    Parameters
    ----------
    good, failed : ndarray of bool, shape (n,)
        Trials that meet all limits, and those that could not be simulated.
    confidence : float
        Of the interval, 0 .. 1.

    Returns
    -------
    Yield
    """
    judged = int((~failed).sum())
    count = int((good & ~failed).sum())
    low, high = wilson_interval(count, judged, confidence)
    return Yield(count, judged, int(failed.sum()), low, high, confidence)


def _worst(table: Table) -> int | None:
    """Return the trial of the smallest margin; one with an undefined limit is worse than any other."""
    sound = np.flatnonzero(~table.failed)
    if not sound.size:
        return None
    undefined = sound[np.isnan(table.margin[sound]) & ~table.good[sound]]
    if undefined.size:
        return int(undefined[0])
    known = sound[np.isfinite(table.margin[sound])]
    return int(known[np.argmin(table.margin[known])]) if known.size else None


def loss_causes(table: Table, tolerances: Sequence[Tolerance]) -> tuple[Cause, ...]:
    """Return what each tolerance has to do with the loss, the costliest first.

    Parameters
    ----------
    table : Table
        Trials.
    tolerances : sequence of Tolerance
        In the order of its parameters.

    Returns
    -------
    tuple of Cause
        Parameters of one lot together, represented by the one that explains most.

    Notes
    -----
    The share is the correlation ratio of the loss (0 or 1) with classes of the tolerance's values, variance of the
    class means over total variance, less what as many classes explain by chance: no linearity is assumed. The shares
    need not add up to one: a limit that two tolerances miss only together is explained by neither alone.
    """
    sound = ~table.failed
    loss = (~table.good[sound]).astype(float)
    of: Literal["loss", "margin"] = "loss" if _TELLING <= loss.sum() <= loss.size - _TELLING else "margin"
    wanted = loss if of == "loss" else table.margin[sound]
    found: dict[object, list[tuple[Tolerance, Cause]]] = {}
    for place, tolerance in enumerate(tolerances):
        values = table.values[sound, place]
        low, high = _quarters(values, loss)
        cause = Cause(tolerance.parameter, _explained(values, wanted), low, high, of)
        found.setdefault(tolerance.lot or (place,), []).append((tolerance, cause))
    causes = []
    for key, group in found.items():
        best = max((cause for _, cause in group), key=lambda cause: cause.share)
        if len(group) > 1:
            names = ", ".join(tolerance.parameter for tolerance, _ in group)
            best = replace(best, name=f"lot {key} ({names})")
        causes.append(best)
    return tuple(sorted(causes, key=lambda cause: -cause.share))


def _explained(values: npt.NDArray[np.float64], wanted: npt.NDArray[np.float64]) -> float:
    keep = np.isfinite(wanted)
    values, wanted = values[keep], wanted[keep]
    classes = min(_CLASSES, wanted.size // _FEWEST)
    total = float(((wanted - wanted.mean()) ** 2).sum()) if wanted.size else 0.0
    if classes < 2 or total == 0.0:
        return 0.0
    distinct = np.unique(values)
    if distinct.size <= classes:
        groups = [wanted[values == value] for value in distinct]
    else:
        groups = [wanted[part] for part in np.array_split(np.argsort(values, kind="stable"), classes)]
    between = sum(group.size * (group.mean() - wanted.mean()) ** 2 for group in groups)
    spare = wanted.size - len(groups)
    if spare <= 0:
        return 0.0
    # epsilon squared: the within-class variance is what the class means scatter by without any cause
    chance = (len(groups) - 1) * (total - between) / spare
    return float(min(1.0, max(0.0, (between - chance) / total)))


def _quarters(values: npt.NDArray[np.float64], loss: npt.NDArray[np.float64]) -> tuple[float, float]:
    count = max(1, loss.size // 4)
    if not loss.size:
        return float("nan"), float("nan")
    order = np.argsort(values, kind="stable")
    return float(loss[order[:count]].mean()), float(loss[order[-count:]].mean())
