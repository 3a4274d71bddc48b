"""Trials, yield and its causes, against SciPy's distributions and closed forms."""

import numpy as np
import pytest
from scipy import stats

from transim.design.tolerances import Tolerance
from transim.errors import StudyError
from transim.study.interval import wilson_interval
from transim.study.sampling import draw_corners, draw_trials
from transim.study.spread import loss_causes, yield_of
from transim.study.table import Table


def tolerance(name="r", low=90.0, high=110.0, **more):
    return Tolerance(name, "ohm", 0.5 * (low + high), low, high, **more)


@pytest.mark.parametrize(("good", "trials"), [(0, 10), (1, 10), (95, 100), (400, 400), (731, 1000)])
@pytest.mark.parametrize("confidence", [0.9, 0.95, 0.99])
def test_interval_is_scipys_wilson_interval(good, trials, confidence):
    reference = stats.binomtest(good, trials).proportion_ci(confidence, method="wilson")
    assert wilson_interval(good, trials, confidence) == pytest.approx((reference.low, reference.high), abs=1e-12)


def test_no_trials_tell_nothing():
    assert wilson_interval(0, 0) == (0.0, 1.0)


@pytest.mark.parametrize("points", ["random", "sobol"])
@pytest.mark.parametrize(
    ("more", "reference"),
    [
        ({}, stats.uniform(90.0, 20.0)),
        ({"distribution": "normal", "sigmas": 2.0}, stats.truncnorm(-2.0, 2.0, 100.0, 5.0)),
        ({"lot": "a", "correlation": 0.6}, stats.uniform(90.0, 20.0)),
    ],
)
def test_each_parameter_has_its_distribution(points, more, reference):
    values = draw_trials([tolerance(**more), tolerance("other")], 2048, 7, points)[:, 0]
    assert stats.kstest(values, reference.cdf).pvalue > 0.01
    assert 90.0 <= values.min() < values.max() <= 110.0


def test_a_lot_moves_its_parameters_together():
    # normal scores of two members of a lot correlate by the product of their correlations with its factor
    members = [tolerance("a", lot="w", correlation=0.9), tolerance("b", lot="w", correlation=-0.5), tolerance("c")]
    values = draw_trials(members, 20_000, 3)
    scores = stats.norm.ppf((values - 90.0) / 20.0)
    found = np.corrcoef(scores.T)
    assert found[0, 1] == pytest.approx(-0.45, abs=0.02)
    assert found[0, 2] == pytest.approx(0.0, abs=0.02)


def test_more_trials_begin_with_the_fewer_ones():
    some = [tolerance("a"), tolerance("b", distribution="normal")]
    assert np.array_equal(draw_trials(some, 300, 5)[:100], draw_trials(some, 100, 5))
    assert not np.array_equal(draw_trials(some, 100, 6), draw_trials(some, 100, 5))


def test_corners():
    found = draw_corners([tolerance("a", 1.0, 3.0), tolerance("b", 10.0, 30.0)])
    assert found.tolist() == [[2, 20], [1, 10], [1, 30], [3, 10], [3, 30]]
    tied = [tolerance("a", 1.0, 3.0, lot="w"), tolerance("b", 10.0, 30.0, lot="w", correlation=-1.0)]
    assert draw_corners(tied).tolist() == [[2, 20], [1, 30], [3, 10]]
    with pytest.raises(StudyError, match="8192 corners"):
        draw_corners([tolerance(str(k)) for k in range(13)])


def trials(values, good, margin):
    count = len(good)
    return Table(
        tuple(map(str, range(count))),
        tuple("abc"[: values.shape[1]]),
        ("ohm",) * values.shape[1],
        values,
        (),
        {},
        np.zeros((count, 0), dtype=bool),
        np.zeros((count, 0)),
        good,
        np.zeros(count, dtype=bool),
        margin,
        (),
    )


def test_yield_of_a_closed_form_is_in_the_interval():
    # t90 = R C ln 10 is linear in R, which is uniform: the yield is the share of its range below the limit
    some = [tolerance("r", 800.0, 1200.0)]
    limit = 1075.0 * 1e-9 * np.log(10.0)
    exact = (1075.0 - 800.0) / 400.0
    inside = 0
    for seed in range(40):
        values = draw_trials(some, 500, seed)
        good = values[:, 0] * 1e-9 * np.log(10.0) <= limit
        found = yield_of(good, np.zeros(500, dtype=bool), 0.95)
        inside += found.low <= exact <= found.high
    # 40 intervals of 95 %: fewer than 33 of them right has a probability below 1e-3
    assert inside >= 33


def test_failed_trials_are_left_out_of_the_yield():
    found = yield_of(np.array([True, True, False, False]), np.array([False, False, False, True]), 0.9)
    assert (found.good, found.judged, found.failed) == (2, 3, 1)


def test_the_tolerance_that_loses_most_comes_first():
    # of y = a + 0.5 b, independent and uniform alike, a has 1 / 1.25 of the variance
    some = [tolerance("a", -1.0, 1.0), tolerance("b", -1.0, 1.0), tolerance("c", -1.0, 1.0)]
    values = draw_trials(some, 4000, 2)
    margin = 5.0 - values[:, 0] - 0.5 * values[:, 1]
    causes = loss_causes(trials(values, margin > 0.0, margin), some)
    assert [cause.name for cause in causes] == ["a", "b", "c"]
    assert [cause.of for cause in causes] == ["margin"] * 3
    # within eight classes a share of 1/64 of a uniform variance stays inside
    assert causes[0].share == pytest.approx(0.8 * 63 / 64, abs=0.02)
    assert causes[1].share == pytest.approx(0.2 * 63 / 64, abs=0.02)
    assert causes[2].share == pytest.approx(0.0, abs=0.005)


def test_loss_itself_is_explained_where_there_is_enough_of_it():
    some = [tolerance("a", -1.0, 1.0), tolerance("b", -1.0, 1.0)]
    values = draw_trials(some, 2000, 4)
    good = values[:, 1] < 0.5
    first, second = loss_causes(trials(values, good, np.full(2000, np.nan)), some)
    assert (first.name, first.of) == ("b", "loss")
    # the limit lies on a class border, but for the few trials that chance puts on its other side
    assert first.share > 0.9
    assert (first.low, first.high) == (0.0, pytest.approx(1.0, abs=0.1))
    assert second.share < 0.02


def test_a_loss_on_both_sides_is_found():
    # no linear measure would see it
    some = [tolerance("a", -1.0, 1.0), tolerance("b", -1.0, 1.0)]
    values = draw_trials(some, 2000, 4)
    first, second = loss_causes(trials(values, np.abs(values[:, 0]) < 0.5, np.full(2000, np.nan)), some)
    assert first.name == "a"
    assert first.share > 0.9
    assert second.share < 0.02
