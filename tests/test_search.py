"""The search on grids of preferred values against brute force on the same grids.

The limits' margins come from an analytic model of a stage with two speed-up capacitors and a resistor: times that fall
as more charge is delivered, leakage and peak current that rise. It is made up for this test; only the shape matters.
"""

import itertools

import numpy as np
import pytest

from transim.design.axes import Axis
from transim.design.preferred import preferred_values
from transim.study.search import Assessment, Search, nearest_index
from transim.study.windows import find_windows

CAPACITORS = preferred_values("E24", 1e-10, 1e-8)
RESISTORS = preferred_values("E24", 47.0, 1000.0)


def margins(first, second, resistor=220.0, tight=1.0):
    c1, c2, r = np.log10(first / 1e-9), np.log10(second / 1e-9), np.log10(resistor / 220.0)
    on = 250e-9 + 300e-9 * np.exp(-2.2 * (c1 + 1.0)) * 10 ** (0.6 * r) + 40e-9 * max(0.0, c1 - 0.2) ** 2
    off = 300e-9 + 350e-9 * np.exp(-1.8 * (c2 + 1.0)) * 10 ** (0.8 * r)
    video = 0.6 + 0.9 * 10 ** (0.8 * c1) + 0.7 * 10 ** (0.7 * c2) - 0.3 * r
    current = 0.06 * 10 ** (0.3 * c1) + 0.05 * 10 ** (0.4 * c2) + 0.02 / 10**r
    limit = 2.0 * tight
    return 1.0 - on / 480e-9, 1.0 - off / 600e-9, 1.0 - video / limit, 1.0 - current / 0.15


class Counted:
    def __init__(self, axes, model):
        self.axes, self.model, self.count = axes, model, 0

    def __call__(self, indices):
        self.count += len(indices)
        return [self.model(*(axis[k] for axis, k in zip(self.axes, index, strict=True))) for index in indices]


def plain(*values):
    return Assessment(margins(*values))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_two_capacitors_in_a_tenth_of_the_grid(seed):
    best = max(min(margins(a, b)) for a, b in itertools.product(CAPACITORS, CAPACITORS))
    evaluate = Counted((CAPACITORS, CAPACITORS), plain)
    search = Search((49, 49), evaluate, runs=49 * 49 // 10, seed=seed)
    search.run(reserve=24)
    assert evaluate.count == len(search.known) <= 49 * 49 // 10
    assert search.known[search.best].smallest >= best - 0.01 * abs(best)


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_three_parameters_against_random_points(seed):
    rng = np.random.default_rng(seed)
    picks = (rng.choice(axis, 3000) for axis in (CAPACITORS, CAPACITORS, RESISTORS))
    best = max(min(margins(*values)) for values in zip(*picks, strict=True))
    evaluate = Counted((CAPACITORS, CAPACITORS, RESISTORS), plain)
    search = Search((49, 49, len(RESISTORS)), evaluate, runs=150, seed=seed)
    search.run(reserve=36)
    assert evaluate.count <= 150
    assert search.known[search.best].smallest >= best - 0.02 * abs(best)


def test_undefined_and_failed_points_are_no_obstacle():
    def model(first, second):
        if first > 5e-9:
            return None
        found = margins(first, second)
        return Assessment((np.nan if found[0] < -0.1 else found[0], *found[1:]))

    best = max(min(margins(a, b)) for a, b in itertools.product(CAPACITORS, CAPACITORS) if a <= 5e-9)
    search = Search((49, 49), Counted((CAPACITORS, CAPACITORS), model), runs=240, seed=2)
    search.run()
    assert search.known[search.best].smallest >= best - 0.01 * best


def test_goal_is_made_best_within_the_limits():
    def model(first, second):
        return Assessment(margins(first, second), goal=-first)

    feasible = [a for a, b in itertools.product(CAPACITORS, CAPACITORS) if min(margins(a, b)) >= 0.0]
    search = Search((49, 49), Counted((CAPACITORS, CAPACITORS), model), runs=240, seed=1)
    search.run()
    assert search.known[search.best].goal == -min(feasible)


def test_without_a_feasible_point_the_nearest_one_is_found():
    best = max(min(margins(a, b, tight=0.4)) for a, b in itertools.product(CAPACITORS, CAPACITORS))
    assert best < 0.0
    evaluate = Counted((CAPACITORS, CAPACITORS), lambda a, b: Assessment(margins(a, b, tight=0.4)))
    search = Search((49, 49), evaluate, runs=240, seed=1)
    search.run()
    assert not search.known[search.best].feasible
    assert search.known[search.best].smallest == pytest.approx(best, abs=0.01)


def test_one_parameter_is_enumerated():
    evaluate = Counted((CAPACITORS,), lambda c: Assessment(margins(c, 4e-10)))
    search = Search((49,), evaluate, runs=90, seed=1)
    search.run()
    assert set(search.known) == {(k,) for k in range(49)}


def test_six_parameters():
    def model(*values):
        # the best of a paraboloid off the middle is where all of them are at place 13
        place = np.array([nearest_index(CAPACITORS, value) for value in values])
        return Assessment((float(0.3 - ((place - 13) ** 2).sum() / 2000.0),))

    search = Search((49,) * 6, Counted((CAPACITORS,) * 6, model), runs=240, seed=1)
    search.run()
    assert search.known[search.best].smallest > 0.29


def test_the_same_seed_takes_the_same_path():
    paths = []
    for _ in range(2):
        search = Search((49, 49), Counted((CAPACITORS, CAPACITORS), plain), runs=100, seed=5)
        search.run()
        paths.append(list(search.known))
    assert paths[0] == paths[1]


def test_windows_are_those_of_the_whole_line():
    evaluate = Counted((CAPACITORS, CAPACITORS), plain)
    search = Search((49, 49), evaluate, runs=240, seed=1)
    search.run(reserve=24)
    best = search.best
    axes = [Axis(name, "F", CAPACITORS, "E24") for name in ("first", "second")]
    first, second = find_windows(search, best, axes)
    line = [a for a in CAPACITORS if min(margins(a, CAPACITORS[best[1]])) >= 0.0]
    other = [b for b in CAPACITORS if min(margins(CAPACITORS[best[0]], b)) >= 0.0]
    assert (first.low, first.high, first.closed) == (line[0], line[-1], True)
    assert (second.low, second.high, second.closed) == (other[0], other[-1], True)
    # every end was simulated, and so was what lies beyond it
    assert (CAPACITORS.index(first.low), best[1]) in search.known
    assert (CAPACITORS.index(first.high) + 1, best[1]) in search.known
