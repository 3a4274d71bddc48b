"""The register of metrics, limits and verdicts."""

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.errors import DesignError
from transim.measure import (
    METRICS,
    Definitions,
    Figure,
    Limit,
    Record,
    Timing,
    extract,
    judge,
    metric,
    verdict,
)
from transim.quantities import UNITS

NAMES = """
    on_time off_time on_delay off_delay rise_time fall_time on_settling off_settling overshoot phase_settling
    video_peak video_peak_on video_peak_off video_swing video_area video_energy video_width video_inband
    driver_source_peak driver_sink_peak driver_charge_on driver_charge_off driver_power
    junction_charge junction_reverse junction_current_peak supply_current_peak
    junction_dissipation driver_dissipation highest_rate insertion_loss isolation return_loss_on return_loss_off
    holdoff_peak_margin holdoff_bias_margin charge_margin rf_modulation level_loss level_isolation on_compression
    bias_shift_on bias_shift_off hot_switching_peak hot_switching_energy throw_overlap throw_gap shortest_pulse shortest_gap
"""

values = st.floats(-1e3, 1e3)


TIMING = Timing(on_edge=1.0, off_edge=2.0, edge=0.1, start=0.0, stop=3.0, period=3.0)
EMPTY = Record(timing=TIMING, definitions=Definitions(), carrier=1e8, impedance=50.0, biased_passes=True)


def held(value, **bounds):
    return judge({"on_time": Figure(value, "s")}, [Limit("on_time", **bounds)])[0]


def test_the_register_holds_each_metric_once_and_in_order():
    assert list(METRICS) == NAMES.split()
    for name, entry in METRICS.items():
        assert entry.name == name == entry.function.__name__
        assert entry.unit in UNITS
        assert entry.title
    with pytest.raises(ValueError, match="registered twice"):
        metric("on_time", unit="s", title="again")(METRICS["off_time"].function)


def test_the_register_cannot_be_changed():
    with pytest.raises(TypeError):
        METRICS["mine"] = METRICS["on_time"]


def test_an_empty_record_gives_every_figure_a_reason():
    figures = extract(EMPTY)
    assert list(figures) == list(METRICS)
    for name, figure in figures.items():
        assert figure.value is None
        assert figure.unit == METRICS[name].unit
        assert figure.note


def test_a_function_that_gives_no_finite_number_gives_no_figure(monkeypatch):
    broken = replace(METRICS["on_time"], function=lambda _: math.inf)
    monkeypatch.setattr("transim.measure.metrics.METRICS", {"on_time": broken})
    assert extract(EMPTY) == {"on_time": Figure(None, "s", "the waveform gives no finite number")}


def test_a_figure_of_zero_has_no_sign(monkeypatch):
    zero = replace(METRICS["on_time"], function=lambda _: -0.0)
    monkeypatch.setattr("transim.measure.metrics.METRICS", {"on_time": zero})
    assert math.copysign(1.0, extract(EMPTY)["on_time"].value) == 1.0


@pytest.mark.parametrize(
    ("value", "bounds", "margin", "outcome"),
    [
        (1.2e-7, {"max": 1.5e-7}, 3e-8, "pass"),
        (1.5e-7, {"max": 1.5e-7}, 0.0, "pass"),
        (1.6e-7, {"max": 1.5e-7}, -1e-8, "fail"),
        (1.0e-7, {"min": 0.5e-7, "max": 1.2e-7}, 2e-8, "pass"),
        (0.4e-7, {"min": 0.5e-7, "max": 1.2e-7}, -1e-8, "fail"),
        (-2.0, {"max": -3.0}, -1.0, "fail"),
    ],
)
def test_margin_is_the_distance_to_the_nearer_bound(value, bounds, margin, outcome):
    judgement = held(value, **bounds)
    assert judgement.margin == pytest.approx(margin, abs=1e-20)
    assert (judgement.verdict, judgement.value) == (outcome, value)
    assert (judgement.min, judgement.max) == (bounds.get("min"), bounds.get("max"))


@pytest.mark.parametrize("value", [None, math.nan, math.inf, -math.inf])
def test_a_figure_without_a_number_is_undefined(value):
    judgement = held(value, max=1.0)
    assert (judgement.verdict, judgement.value, judgement.margin) == ("undefined", None, None)
    assert judge({}, [Limit("on_time", max=1.0)])[0].verdict == "undefined"


@given(values, values)
def test_pass_is_exactly_not_above_max(value, bound):
    assert (held(value, max=bound).verdict == "pass") == (value <= bound)
    assert (held(value, min=bound).verdict == "pass") == (value >= bound)


def test_verdicts_join_a_miss_before_a_gap():
    good, missed, gap = held(1.0, max=2.0), held(3.0, max=2.0), held(None, max=2.0)
    assert verdict([]) == "pass"
    assert verdict([good, good]) == "pass"
    assert verdict([good, gap]) == "undefined"
    assert verdict([gap, missed, good]) == "fail"


def test_judgements_keep_the_order_of_the_limits():
    limits = [Limit("isolation", min=40.0), Limit("on_time", max=1e-7)]
    figures = {"on_time": Figure(1e-8, "s"), "isolation": Figure(30.0, "dB")}
    found = [(judgement.metric, judgement.verdict) for judgement in judge(figures, limits)]
    assert found == [("isolation", "fail"), ("on_time", "pass")]


def test_an_unknown_metric_is_answered_with_the_nearest():
    with pytest.raises(DesignError) as caught:
        Limit("on_tine", max=1.0)
    assert caught.value.nearest == "on_time"
    assert caught.value.key == "limits.on_tine"


@pytest.mark.parametrize("bounds", [{}, {"max": math.nan}, {"min": math.inf}, {"min": 2.0, "max": 1.0}])
def test_bounds_that_bound_nothing_are_refused(bounds):
    with pytest.raises(DesignError) as caught:
        Limit("on_time", **bounds)
    assert caught.value.key == "limits.on_time"
