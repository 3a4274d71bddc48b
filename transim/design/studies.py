"""The tables `[sweep]`, `[tune]` and `[spread]`: which parameters are varied, and how."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Literal

from transim.design.axes import Axis, parameter_entries, read_axis
from transim.design.faults import Faults
from transim.design.fields import Choice, Count, Line, Quantity, shown
from transim.design.locate import KeyPath
from transim.design.model import Design
from transim.design.parameters import parameter_value, parameters_of
from transim.design.tolerances import Tolerance, read_tolerance
from transim.errors import DesignError
from transim.measure.metrics import METRICS
from transim.parts.nearest import nearest_name

__all__ = ["POINTS", "Goal", "Spread", "Sweep", "Tune", "read_spread", "read_sweep", "read_tune"]

#: How the trials of a spread are chosen.
POINTS = ("random", "sobol", "corners")
_GOAL = re.compile(r"(smallest|largest) +([a-z_0-9]+)")


@dataclass(frozen=True)
class Sweep:
    """One or two parameters stepped through.

    Attributes
    ----------
    axes : tuple of Axis
        The first is the slower one.
    drivers : tuple of str
        Drivers that are run; none means all.
    """

    axes: tuple[Axis, ...]
    drivers: tuple[str, ...] = ()


@dataclass(frozen=True)
class Goal:
    """What a tuning makes best once all limits hold.

    Attributes
    ----------
    direction : {"largest", "smallest"}
        Of the metric.
    metric : str
        A metric, or ``margin``: the smallest normalised margin of all limits.
    """

    direction: Literal["largest", "smallest"] = "largest"
    metric: str = "margin"


@dataclass(frozen=True)
class Tune:
    """One to six parameters to be chosen.

    Attributes
    ----------
    axes : tuple of Axis
        Values that each may take, increasing.
    driver : str or None
        Driver that is run; None: the only one, or the one whose parameters are varied.
    goal : Goal
        What is made best.
    runs : int or None
        Most points that are simulated; None: as many as their number of parameters needs.
    seed : int
        Of the starting points.
    """

    axes: tuple[Axis, ...]
    driver: str | None = None
    goal: Goal = Goal()
    runs: int | None = None
    seed: int = 1


@dataclass(frozen=True)
class Spread:
    """Tolerances and trials.

    Attributes
    ----------
    tolerances : tuple of Tolerance
        What spreads.
    drivers : tuple of str
        Drivers that are run; none means all.
    trials : int
        Number of trials; without effect on corners.
    points : {"random", "sobol", "corners"}
        How trials are chosen.
    seed : int
        Of the trials.
    confidence : float
        Of the interval of the yield, 0 .. 1.
    """

    tolerances: tuple[Tolerance, ...]
    drivers: tuple[str, ...] = ()
    trials: int = 200
    points: str = "random"
    seed: int = 1
    confidence: float = 0.95


def read_sweep(faults: Faults, raw: object, design: Design) -> Sweep | None:
    """Read the table `[sweep]`.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    raw : object
        The table.
    design : Design
        The rest of the design.

    Returns
    -------
    Sweep or None
        None, with errors added, if something is wrong.
    """
    table = _table(faults, ("sweep",), raw, ("vary", "driver"))
    if table is None:
        return None
    before = len(faults.errors)
    axes = _axes(faults, "sweep", table, design, (1, 2), None)
    drivers = _drivers(faults, ("sweep", "driver"), table, design)
    return None if len(faults.errors) > before else Sweep(axes, drivers)


def read_tune(faults: Faults, raw: object, design: Design) -> Tune | None:
    """Read the table `[tune]`.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    raw : object
        The table.
    design : Design
        The rest of the design.

    Returns
    -------
    Tune or None
        None, with errors added, if something is wrong.
    """
    table = _table(faults, ("tune",), raw, ("vary", "driver", "goal", "runs", "seed"))
    if table is None:
        return None
    before = len(faults.errors)
    axes = _axes(faults, "tune", table, design, (1, 6), "E24")
    drivers = _drivers(faults, ("tune", "driver"), table, design)
    if len(drivers) > 1:
        faults.adopt(
            ("tune", "driver"), DesignError("one driver is tuned at a time", expected="the name of one driver")
        )
    goal = _goal(faults, table.get("goal", "largest margin"))
    runs = faults.value(("tune", "runs"), table["runs"], Count(1, 100_000)) if "runs" in table else None
    seed = faults.value(("tune", "seed"), table.get("seed", 1), Count(0, 2**31 - 1))
    if not design.limits and goal is not None and goal.metric == "margin":
        faults.adopt(
            ("tune",), DesignError("there are no limits, so that there is no margin", expected="[limits], or a goal")
        )
    if len(faults.errors) > before or goal is None:
        return None
    return Tune(axes, drivers[0] if drivers else None, goal, runs, 0 if seed is None else seed)


def read_spread(faults: Faults, raw: object, design: Design) -> Spread | None:
    """Read the table `[spread]`.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    raw : object
        The table.
    design : Design
        The rest of the design.

    Returns
    -------
    Spread or None
        None, with errors added, if something is wrong.
    """
    keys = ("vary", "driver", "trials", "points", "seed", "confidence")
    table = _table(faults, ("spread",), raw, keys)
    if table is None:
        return None
    before = len(faults.errors)
    known = parameters_of(design)
    tolerances = [
        read_tolerance(faults, path, name, entry, known[name], parameter_value(design, name))
        for path, name, entry in _entries(faults, "spread", table, known)
    ]
    if not tolerances and len(faults.errors) == before:
        faults.missing(("spread", "vary"), 'tolerances, for example driver.fast.speedup_cap = { tolerance = "5 %" }')
    drivers = _drivers(faults, ("spread", "driver"), table, design)
    trials = faults.value(("spread", "trials"), table.get("trials", 200), Count(1, 1_000_000))
    points = faults.value(("spread", "points"), table.get("points", "random"), Choice(POINTS))
    seed = faults.value(("spread", "seed"), table.get("seed", 1), Count(0, 2**31 - 1))
    confidence = faults.value(("spread", "confidence"), table.get("confidence", 0.95), Quantity("1", 0.5, 0.9999))
    if points == "corners" and "trials" in table:
        faults.adopt(("spread", "trials"), DesignError("the corners give the number of trials; remove this"))
    if len(faults.errors) > before:
        return None
    found = tuple(tolerance for tolerance in tolerances if tolerance is not None)
    return Spread(found, drivers, trials or 1, points or "random", seed or 0, confidence or 0.95)


def _table(faults: Faults, path: KeyPath, raw: object, keys: Sequence[str]) -> dict[str, object] | None:
    table = faults.table(path, raw)
    for key in table or ():
        if key not in keys:
            faults.unknown((*path, key), keys)
    return table


def _entries(
    faults: Faults, kind: str, table: Mapping[str, object], known: Mapping[str, Quantity]
) -> list[tuple[KeyPath, str, object]]:
    if "vary" not in table:
        return []
    vary = faults.table((kind, "vary"), table["vary"])
    return [] if vary is None else list(parameter_entries(faults, (kind, "vary"), vary, known))


def _axes(
    faults: Faults,
    kind: str,
    table: Mapping[str, object],
    design: Design,
    count: tuple[int, int],
    default: str | None,
) -> tuple[Axis, ...]:
    known = parameters_of(design)
    before = len(faults.errors)
    entries = _entries(faults, kind, table, known)
    found = [read_axis(faults, path, name, entry, known[name], default) for path, name, entry in entries]
    if len(faults.errors) == before and not count[0] <= len(entries) <= count[1]:
        faults.adopt(
            (kind, "vary"),
            DesignError(
                "this is no number of parameters that can be varied",
                expected=f"{count[0]} to {count[1]} parameters in [{kind}.vary], for example"
                ' driver.fast.speedup_cap = { from = "100 pF", to = "10 nF", steps = "E24" }',
                found=f"{len(entries)}",
            ),
        )
    return tuple(axis for axis in found if axis is not None)


def _drivers(faults: Faults, path: KeyPath, table: Mapping[str, object], design: Design) -> tuple[str, ...]:
    """Return names of drivers, from one name or an array of them."""
    raw = table.get("driver", [])
    names = raw if isinstance(raw, list) else [raw]
    known = [driver.name for driver in design.drivers]
    found = []
    for index, entry in enumerate(names):
        place = (*path, index) if isinstance(raw, list) else path
        name = faults.value(place, entry, Line(40))
        if name is not None and name not in known:
            faults.adopt(
                place,
                DesignError(
                    "there is no such driver",
                    expected=f"one of {', '.join(known)}",
                    found=shown(name),
                    nearest=nearest_name(name, known),
                ),
            )
        elif name is not None:
            found.append(name)
    return tuple(dict.fromkeys(found))


def _goal(faults: Faults, raw: object) -> Goal | None:
    expected = '"largest margin", or smallest or largest and a metric, for example "smallest on_time"'
    match = _GOAL.fullmatch(raw.strip()) if isinstance(raw, str) else None
    if match is None or match[0] == "smallest margin":
        faults.adopt(("tune", "goal"), DesignError("this is no goal", expected=expected, found=shown(raw)))
        return None
    if match[2] != "margin" and match[2] not in METRICS:
        nearest = nearest_name(match[2], METRICS)
        faults.adopt(
            ("tune", "goal"),
            DesignError("there is no such metric", expected=expected, found=shown(match[2]), nearest=nearest),
        )
        return None
    return Goal("smallest" if match[1] == "smallest" else "largest", match[2])
