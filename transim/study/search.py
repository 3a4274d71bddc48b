"""Search for the best point of a grid of preferred values with few simulations.

The grid is indexed by whole numbers along each axis. Every limit's margin is interpolated over the points that were
simulated (radial basis functions, cubic, with a linear part: H.-M. Gutmann, J. Glob. Optim. 19, 201-227, 2001), each
by itself because each is smooth, while their smallest is not. The grid's best predicted points are simulated next, and
so on until a point is better than all its neighbours and nothing better is predicted.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

__all__ = ["Assessment", "Index", "Search", "nearest_index"]

Array = npt.NDArray[np.float64]
Index = tuple[int, ...]

#: Points simulated at once: fixed, so that the path of the search does not depend on the number of workers.
_BATCH = 6
#: Of these, as many go where little is known.
_EXPLORING = 2
#: Rounds without a better point before a search with known neighbours ends.
_PATIENCE = 3
#: Grids up to this size are predicted as a whole.
_WHOLE = 10_000
#: Of larger ones, as many points, and a tenth of it around each of the best, in every round.
_SAMPLED = 10_000
_CHUNK = 8192
#: A margin that is undefined counts as this.
_UNDEFINED = -3.0


@dataclass(frozen=True)
class Assessment:
    """What is known of one point.

    Attributes
    ----------
    margins : tuple of float
        Normalised margins of all limits and cases, NaN where undefined; empty where the point failed.
    goal : float or None
        What is made as large as possible once all margins are positive; None: the smallest margin itself.
    """

    margins: tuple[float, ...]
    goal: float | None = None

    @property
    def smallest(self) -> float:
        """The smallest margin; minus infinity where the point failed."""
        return min(self._known(), default=0.0 if self.goal is not None else -np.inf)

    @property
    def feasible(self) -> bool:
        """Whether all limits hold."""
        return self.smallest >= 0.0

    @property
    def rank(self) -> tuple[bool, float]:
        """Greater for the better of two points."""
        if not self.feasible or self.goal is None:
            return self.feasible, self.smallest
        return True, self.goal

    def _known(self) -> list[float]:
        return [_UNDEFINED if np.isnan(margin) else margin for margin in self.margins]


Evaluate = Callable[[Sequence[Index]], Sequence[Assessment | None]]


class Search:
    """A search on a grid.

    Parameters
    ----------
    lengths : sequence of int
        Number of values along each axis.
    evaluate : callable
        Simulates points given by index; None stands for one that failed.
    runs : int
        Most points that may be simulated.
    seed : int
        Of the starting points.
    start : sequence of index
        Points to begin with, such as the nominal design.
    """

    def __init__(
        self, lengths: Sequence[int], evaluate: Evaluate, runs: int, seed: int, start: Sequence[Index] = ()
    ) -> None:
        self.lengths = tuple(lengths)
        self.known: dict[Index, Assessment | None] = {}
        self.runs = runs
        self._evaluate = evaluate
        self._rng = np.random.Generator(np.random.PCG64(seed))
        self._start = start

    @property
    def best(self) -> Index | None:
        """The best point so far; None where none could be simulated."""
        sound = {index: found for index, found in self.known.items() if found is not None}
        return max(sound, key=lambda index: (*sound[index].rank, tuple(-i for i in index)), default=None)

    def look(self, points: Sequence[Index]) -> None:
        """Simulate points that are not known yet, as many as the runs allow.

        Parameters
        ----------
        points : sequence of index
            Which.
        """
        new = [index for index in dict.fromkeys(points) if index not in self.known]
        new = new[: max(0, self.runs - len(self.known))]
        if new:
            self.known.update(zip(new, self._evaluate(new), strict=True))

    def run(self, reserve: int = 0) -> None:
        """Search.

        Parameters
        ----------
        reserve : int
            Runs that are left for later.
        """
        size = int(np.prod(self.lengths, dtype=float))
        runs, self.runs = self.runs, max(1, self.runs - reserve)
        if len(self.lengths) == 1 and size <= self.runs:
            self.look([(place,) for place in range(size)])
        else:
            self.look([*self._start, *self._spread()])
            self._refine(size)
        self.runs = runs

    def neighbours(self, index: Index) -> list[Index]:
        """Return the points one step away along one axis."""
        found = []
        for axis, step in itertools.product(range(len(index)), (-1, 1)):
            place = index[axis] + step
            if 0 <= place < self.lengths[axis]:
                found.append((*index[:axis], place, *index[axis + 1 :]))
        return found

    def _spread(self) -> list[Index]:
        from scipy.stats import qmc

        width = len(self.lengths)
        count = 4 * width + 4
        shares = qmc.Sobol(width, scramble=True, rng=self._rng).random_base2((count - 1).bit_length())[:count]
        return [tuple(int(share * length) for share, length in zip(row, self.lengths, strict=True)) for row in shares]

    def _refine(self, size: int) -> None:
        still = 0
        while len(self.known) < min(self.runs, size):
            before, count = self.best, len(self.known)
            if before is None:
                self.look(self._anywhere(_BATCH))
            else:
                open_sides = [index for index in self.neighbours(before) if index not in self.known]
                if still >= _PATIENCE and not open_sides:
                    return
                self.look(self._proposed(before, open_sides if still else []))
            if len(self.known) == count:
                return
            still = still + 1 if self.best == before else 0

    def _proposed(self, best: Index, sides: Sequence[Index]) -> list[Index]:
        """Return the next points: open neighbours of a best point that has lasted, then what is predicted best."""
        candidates = self._candidates(best)
        if not candidates:
            return list(sides)
        utility, distance = self._predict(candidates)
        chosen: list[Index] = list(sides)[:_BATCH]
        order = np.argsort(-utility, kind="stable")
        chosen += _apart([candidates[k] for k in order[:400].tolist()], _BATCH - _EXPLORING - len(chosen), chosen)
        # where little is known and the prediction is not hopeless
        span = float(np.ptp(utility)) or 1.0
        scale = float(distance.max()) or 1.0
        exploring = np.argsort(-(utility / span + distance / scale), kind="stable")
        pool = [candidates[k] for k in exploring[:400].tolist()]
        chosen += _apart(pool, _BATCH - len(chosen), chosen)
        return chosen

    def _candidates(self, best: Index) -> list[Index]:
        if int(np.prod(self.lengths, dtype=float)) <= _WHOLE:
            return [index for index in itertools.product(*map(range, self.lengths)) if index not in self.known]
        everywhere = self._anywhere(_SAMPLED)
        ranked = sorted(
            (index for index, found in self.known.items() if found is not None), key=self._rank, reverse=True
        )
        near = []
        for centre in dict.fromkeys([best, *ranked[:4]]):
            steps = self._rng.integers(-3, 4, size=(_SAMPLED // 10, len(centre)))
            moved = np.clip(np.array(centre) + steps, 0, np.array(self.lengths) - 1)
            near += [tuple(map(int, row)) for row in moved]
        return [index for index in dict.fromkeys([*near, *everywhere]) if index not in self.known]

    def _rank(self, index: Index) -> tuple[bool, float]:
        found = self.known[index]
        return (False, -np.inf) if found is None else found.rank

    def _anywhere(self, count: int) -> list[Index]:
        rows = self._rng.integers(0, self.lengths, size=(count, len(self.lengths)))
        return list(dict.fromkeys(index for row in rows if (index := tuple(map(int, row))) not in self.known))

    def _predict(self, candidates: Sequence[Index]) -> tuple[Array, Array]:
        """Return the predicted utility of points, and their distance from the nearest one that is known."""
        from scipy.interpolate import RBFInterpolator

        scale = np.maximum(1.0, np.array(self.lengths, dtype=float) - 1.0)
        sound = {index: found for index, found in self.known.items() if found is not None and found.margins}
        if not sound:
            sound = {index: found for index, found in self.known.items() if found is not None}
        places = np.array(list(sound), dtype=float) / scale
        columns = _columns(list(sound.values()))
        goals = [found.goal for found in sound.values()]
        utilities, distances = [], []
        fit = None
        if len(sound) > len(self.lengths) + 1 and np.linalg.matrix_rank(places - places.mean(axis=0)) == len(
            self.lengths
        ):
            fit = RBFInterpolator(places, columns, kernel="cubic", degree=1, smoothing=1e-9)
        for first in range(0, len(candidates), _CHUNK):
            chunk = np.array(candidates[first : first + _CHUNK], dtype=float) / scale
            away = np.sqrt(((chunk[:, None, :] - places[None, :, :]) ** 2).sum(axis=2)).min(axis=1)
            distances.append(away)
            utilities.append(away if fit is None else _utility(fit(chunk), goals[0] is not None))
        return np.concatenate(utilities), np.concatenate(distances)


def _columns(found: Sequence[Assessment]) -> Array:
    """Return compressed margins, then goals, one row a point: far from its bound a limit need not be fitted well."""
    margins = np.array([assessment.margins for assessment in found], dtype=float)
    margins = _compressed(np.where(np.isnan(margins), _UNDEFINED, margins))
    if found[0].goal is None:
        return margins
    goals = np.array([assessment.goal for assessment in found], dtype=float)
    middle = float(np.median(goals))
    spread = float(np.median(np.abs(goals - middle))) or 1.0
    return np.column_stack([margins, _compressed((goals - middle) / spread)])


def _compressed(margins: Array) -> Array:
    return np.asarray(0.5 * np.arcsinh(margins / 0.5))


def _utility(predicted: Array, with_goal: bool) -> Array:
    if not with_goal:
        return np.asarray(predicted.min(axis=1))
    smallest = predicted[:, :-1].min(axis=1, initial=np.inf)
    # a feasible point beats all others, whatever its goal
    return np.where(smallest >= 0.0, 20.0 + predicted[:, -1], np.minimum(smallest, 0.0))


def _apart(ranked: Sequence[Index], count: int, taken: Sequence[Index]) -> list[Index]:
    """Return the first points that are no close neighbours of each other."""
    chosen: list[Index] = []
    for index in ranked:
        if len(chosen) >= count:
            break
        if all(max(abs(a - b) for a, b in zip(index, other, strict=True)) > 1 for other in (*taken, *chosen)):
            chosen.append(index)
    return chosen


def nearest_index(values: Sequence[float], value: float) -> int:
    """Return the place of the value nearest to another.

    Parameters
    ----------
    values : sequence of float
        Values of an axis.
    value : float
        The other, in the same unit.

    Returns
    -------
    int
        Its place.
    """
    return min(range(len(values)), key=lambda place: abs(values[place] - value))
