"""Tune: the best preferred values, how far each may move, and what cannot be met."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import asdict, dataclass

from transim.design.axes import Axis
from transim.design.model import Design
from transim.design.parameters import parameter_value
from transim.design.studies import Goal, Tune
from transim.errors import DesignError
from transim.measure.limits import Judgement
from transim.study.plan import Plan, chosen_drivers, full_run
from transim.study.point import CaseFigures, Point
from transim.study.run import Outcome
from transim.study.score import point_margins
from transim.study.search import Assessment, Index, Search, nearest_index
from transim.study.study import Advance, Study
from transim.study.windows import Window, find_windows

__all__ = ["Obstacle", "Sensitivity", "TuneOutcome", "assess", "run_tune"]


@dataclass(frozen=True)
class Sensitivity:
    """How far one parameter moves one metric, at the best point.

    Attributes
    ----------
    metric, parameter : str
        Which.
    case : CaseFigures
        Where the metric is nearest to its limit.
    change : float
        Of the metric for 10 % more of the parameter (for a tenth of its range, where its steps are linear), from
        the simulated neighbours on its axis [unit of the metric].
    """

    metric: str
    parameter: str
    case: CaseFigures
    change: float


@dataclass(frozen=True)
class Obstacle:
    """A limit that no simulated point meets together with the others.

    Attributes
    ----------
    judgement : Judgement
        At the best point.
    case : CaseFigures
        Where.
    margin : float or None
        Its normalised margin there; None where it is undefined.
    nearest : float or None
        The largest that any simulated point has, whatever the other limits do.
    """

    judgement: Judgement
    case: CaseFigures
    margin: float | None
    nearest: float | None

    @property
    def alone(self) -> bool:
        """Whether it can be met when the other limits are left aside."""
        return self.nearest is not None and self.nearest >= 0.0


@dataclass(frozen=True)
class TuneOutcome:
    """What a tuning found.

    Attributes
    ----------
    design : Design
        At its nominal values.
    tune : Tune
        What was chosen, and from what.
    driver : str
        Which was run.
    feasible : bool
        Whether all limits hold at the best point.
    best : Point or None
        The best that was simulated; None where none could be.
    verified : Outcome or None
        The best point, run again with every check.
    windows : tuple of Window
        Of each parameter, the others at their best; empty where nothing is feasible.
    sensitivities : tuple of Sensitivity
        By metric with a limit, the strongest parameter first.
    obstacles : tuple of Obstacle
        Limits that are missed at the best point, the worst first.
    runs : int
        Points that were simulated.
    advance : Advance
        How fast, and how many failed.
    """

    design: Design
    tune: Tune
    driver: str
    feasible: bool
    best: Point | None
    verified: Outcome | None
    windows: tuple[Window, ...]
    sensitivities: tuple[Sensitivity, ...]
    obstacles: tuple[Obstacle, ...]
    runs: int
    advance: Advance


class _Points:
    """The study as a function of indices."""

    def __init__(self, study: Study, tune: Tune) -> None:
        self.study, self.tune = study, tune
        self.found: dict[Index, Point] = {}

    def values(self, index: Index) -> tuple[float, ...]:
        return tuple(axis.values[k] for axis, k in zip(self.tune.axes, index, strict=True))

    def simulate(self, indices: Sequence[Index]) -> list[Assessment | None]:
        places = {index: ",".join(map(str, index)) for index in indices}
        self.study.complete([(place, self.values(index)) for index, place in places.items()])
        for index, place in places.items():
            point = self.study.store.get(place)
            assert point is not None
            self.found[index] = point
        return [assess(self.found[index], self.tune.goal) for index in indices]


def assess(point: Point, goal: Goal) -> Assessment | None:
    """Return what a search wants to know of a point.

    Parameters
    ----------
    point : Point
        A finished point.
    goal : Goal
        What is made best.

    Returns
    -------
    Assessment or None
        None where it could not be simulated, or the goal's metric is undefined.
    """
    if point.reason is not None:
        return None
    margins = tuple(math.nan if margin is None else margin for _, _, margin in point_margins(point))
    if goal.metric == "margin":
        return Assessment(margins)
    figures = [case.figures.get(goal.metric) for case in point.cases]
    known = [figure for figure in figures if figure is not None]
    if len(known) < len(figures):
        return None
    # the worst case counts
    return Assessment(margins, min(known) if goal.direction == "largest" else -max(known))


def run_tune(design: Design, tune: Tune, plan: Plan) -> TuneOutcome:
    """Search for the best preferred values, or go on with it.

    Parameters
    ----------
    design : Design
        Read and checked.
    tune : Tune
        What to choose, and from what.
    plan : Plan
        Where and how.

    Returns
    -------
    TuneOutcome

    Raises
    ------
    DesignError
        If it is not clear which driver is tuned.
    EngineError
        If the best point cannot be simulated with every check.
    StudyError, OutputError
        If the study cannot be kept or gone on with.
    """
    parameters = tuple(axis.parameter for axis in tune.axes)
    drivers = chosen_drivers(design, () if tune.driver is None else (tune.driver,), parameters)
    if len(drivers) != 1:
        raise DesignError(
            "one driver is tuned at a time",
            file=design.source.path,
            key="tune.driver",
            expected=f"one of {', '.join(drivers)}, as the key driver of [tune] or by --driver",
        )
    setup = plan.setup(design, parameters, drivers)
    definition = {"axes": [asdict(axis) for axis in tune.axes], "goal": asdict(tune.goal), "seed": tune.seed}
    width = len(tune.axes)
    lengths = [len(axis.values) for axis in tune.axes]
    runs = tune.runs if tune.runs is not None else max(lengths[0] if width == 1 else 0, 60 + 30 * width)
    with Study("tune", setup, definition, plan.engine, plan.place, plan.workers, plan.advanced) as study:
        points = _Points(study, tune)
        search = Search(lengths, points.simulate, runs, tune.seed, _nominal_index(design, tune.axes))
        # windows are found by halving: two ends each
        search.run(reserve=min(runs // 3, sum(2 * max(1, length - 1).bit_length() for length in lengths)))
        best, windows, feasible = _around(search, tune.axes)
        if best is None:
            nothing = (False, None, None, (), (), ())
            return TuneOutcome(design, tune, drivers[0], *nothing, len(search.known), study.advance)
        point = points.found[best]
        return TuneOutcome(
            design=design,
            tune=tune,
            driver=drivers[0],
            feasible=feasible,
            best=point,
            verified=full_run(plan, setup, point.values, "the best point, with every check"),
            windows=windows,
            sensitivities=_sensitivities(points, best),
            obstacles=() if feasible else _obstacles(points.found, point),
            runs=len(search.known),
            advance=study.advance,
        )


def _around(search: Search, axes: Sequence[Axis]) -> tuple[Index | None, tuple[Window, ...], bool]:
    """Look at the neighbours and windows of the best point; what is found there may be better still."""
    while True:
        best = search.best
        if best is None:
            return None, (), False
        search.look(search.neighbours(best))
        if search.best != best:
            continue
        found = search.known[best]
        if found is None or not found.feasible:
            return best, (), False
        windows = find_windows(search, best, axes)
        if search.best == best:
            return best, windows, True


def _nominal_index(design: Design, axes: Sequence[Axis]) -> list[Index]:
    """Return the point of the grid nearest to the design as it stands."""
    index = []
    for axis in axes:
        value = parameter_value(design, axis.parameter)
        if value is None:
            return []
        index.append(nearest_index(axis.values, value))
    return [tuple(index)]


def _sensitivities(points: _Points, best: Index) -> tuple[Sensitivity, ...]:
    """Return the slope of each limited metric along each axis, from simulated neighbours."""
    worst: dict[str, tuple[float, int]] = {}
    centre = points.found[best]
    for place, case in enumerate(centre.cases):
        for judgement, margin in ((j, m) for c, j, m in point_margins(centre) if c is case):
            if margin is not None and judgement.metric in case.figures:
                known = worst.get(judgement.metric)
                if known is None or margin < known[0]:
                    worst[judgement.metric] = (margin, place)
    if points.tune.goal.metric != "margin":
        worst.setdefault(points.tune.goal.metric, (0.0, 0))
    found = []
    for metric, (_, place) in worst.items():
        slopes = []
        for axis_number, axis in enumerate(points.tune.axes):
            slope = _slope(points, best, axis_number, axis, (metric, place))
            if slope is not None:
                slopes.append(Sensitivity(metric, axis.parameter, centre.cases[place], slope))
        found += sorted(slopes, key=lambda sensitivity: -abs(sensitivity.change))
    return tuple(found)


def _slope(points: _Points, best: Index, number: int, axis: Axis, wanted: tuple[str, int]) -> float | None:
    metric, place = wanted
    ends = []
    for step in (-1, 0, 1):
        index = (*best[:number], best[number] + step, *best[number + 1 :])
        point = points.found.get(index)
        if point is None or point.reason is not None:
            continue
        value = point.cases[place].figures.get(metric)
        if value is not None:
            ends.append((axis.values[index[number]], value))
    if len(ends) < 2:
        return None
    (first, low), (last, high) = ends[0], ends[-1]
    if axis.logarithmic:
        return (high - low) / math.log(last / first) * math.log(1.1)
    return (high - low) / (last - first) * (max(axis.values) - min(axis.values)) / 10.0


def _obstacles(found: dict[Index, Point], best: Point) -> tuple[Obstacle, ...]:
    """Return the limits that the best point misses, the worst first."""
    largest: dict[tuple[str, int], float] = {}
    for point in found.values():
        for case, judgement, margin in point_margins(point):
            if margin is not None:
                key = (judgement.metric, point.cases.index(case))
                largest[key] = max(largest.get(key, -math.inf), margin)
    obstacles = [
        Obstacle(judgement, case, margin, largest.get((judgement.metric, best.cases.index(case))))
        for case, judgement, margin in point_margins(best)
        if margin is None or margin < 0.0
    ]
    return tuple(sorted(obstacles, key=lambda obstacle: -math.inf if obstacle.margin is None else obstacle.margin))
