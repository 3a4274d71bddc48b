"""The feasible window of each parameter around a point, the others held."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from transim.design.axes import Axis
from transim.study.search import Index, Search

__all__ = ["Window", "find_windows"]


@dataclass(frozen=True)
class Window:
    """How far one parameter may move with all limits met, the others at their best values.

    Attributes
    ----------
    parameter, unit : str
        Which, and its unit.
    low, high : float
        Lowest and highest simulated value that meets all limits [`unit`].
    low_open, high_open : bool
        Whether the range ends there before any limit is missed.
    closed : bool
        Whether the values next to both ends were simulated; where the runs did not suffice the window may be wider.
    """

    parameter: str
    unit: str
    low: float
    high: float
    low_open: bool
    high_open: bool
    closed: bool


@dataclass
class _Side:
    """One side of a window: between a place that is feasible and one that is not, both known."""

    axis: int
    step: int
    inside: int
    outside: int

    @property
    def settled(self) -> bool:
        return abs(self.outside - self.inside) <= 1

    @property
    def middle(self) -> int:
        return (self.inside + self.outside) // 2


def find_windows(search: Search, best: Index, axes: Sequence[Axis]) -> tuple[Window, ...]:
    """Find the windows by halving, all sides at a time.

    Parameters
    ----------
    search : Search
        With its runs not all used.
    best : index
        A feasible point.
    axes : sequence of Axis
        In the order of the index.

    Returns
    -------
    tuple of Window
        One for each axis. A window is the stretch around the best value; what lies beyond the first value that
        misses a limit is not looked at.
    """
    sides = [_side(search, best, axis, step) for axis in range(len(axes)) for step in (-1, 1)]
    while True:
        # what is not settled yet, at the end of the range first
        open_sides = [side for side in sides if not side.settled]
        wanted = {id(side): _at(best, side.axis, side.middle) for side in open_sides}
        search.look(list(wanted.values()))
        moved = False
        for side in open_sides:
            index = wanted[id(side)]
            if index in search.known:
                moved = True
                if _feasible(search, index):
                    side.inside = side.middle
                else:
                    side.outside = side.middle
        if not moved:
            break
    windows = []
    for number, axis in enumerate(axes):
        lower, upper = sides[2 * number], sides[2 * number + 1]
        windows.append(
            Window(
                axis.parameter,
                axis.unit,
                axis.values[lower.inside],
                axis.values[upper.inside],
                lower.outside < 0,
                upper.outside >= len(axis.values),
                lower.settled and upper.settled,
            )
        )
    return tuple(windows)


def _side(search: Search, best: Index, axis: int, step: int) -> _Side:
    """Start from what is known of the line; the end of the range is simulated first."""
    length = search.lengths[axis]
    end = 0 if step < 0 else length - 1
    inside, outside = best[axis], end + step
    known = [place for place in range(best[axis], outside, step) if _at(best, axis, place) in search.known]
    if end not in known:
        search.look([_at(best, axis, end)])
        if _at(best, axis, end) in search.known:
            known.append(end)
    for place in known:
        if not _feasible(search, _at(best, axis, place)):
            outside = place
            break
        inside = place
    return _Side(axis, step, inside, outside)


def _at(best: Index, axis: int, place: int) -> Index:
    return (*best[:axis], place, *best[axis + 1 :])


def _feasible(search: Search, index: Index) -> bool:
    found = search.known[index]
    return found is not None and found.feasible
