"""Numerical uncertainty and what it does to limits; notes on results that are less sure than they look.

Outside reference: the rule itself (a margin smaller than the uncertainty is no verdict); the waveforms are made so that
each note is due, or not.
"""

from __future__ import annotations

import math
from dataclasses import replace
from types import SimpleNamespace

import numpy as np
import pytest

from transim.design.model import Numerics
from transim.measure.definitions import Definitions, Timing
from transim.measure.limits import Judgement, Limit, judge
from transim.measure.metrics import Figure
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.study.certify import SAFETY, certified, finer_designs
from transim.study.result import Result
from transim.study.soundness import numerical_notes, unbounded

LIMIT = Limit("on_time", max=100e-9)


@pytest.mark.parametrize(
    ("value", "uncertainty", "verdict"),
    [
        (90e-9, None, "pass"), (90e-9, 9e-9, "pass"), (90e-9, 11e-9, "undefined"), (110e-9, 9e-9, "fail"),
        (110e-9, 11e-9, "undefined"), (100e-9, 0.0, "pass"), (90e-9, math.inf, "undefined"), (99.99e-9, None, "pass"),
    ],
)  # fmt: skip
def test_margin_smaller_than_the_uncertainty_is_no_verdict(value, uncertainty, verdict):
    (judged,) = judge({"on_time": Figure(value, "s", None, uncertainty)}, (LIMIT,))
    assert judged.verdict == verdict
    assert judged.value == value
    assert (judged.note is not None) == (verdict == "undefined")


def test_note_of_a_level_is_in_decibels():
    judged = Judgement("video_inband", None, -60.0, -60.1, 0.1, "pass").within(0.2)
    assert judged.note == "it is 0.1 dB inside its bound, and its numerical uncertainty is 0.2 dB"


def result(value, note=None, rating=1.0):
    rated = (Judgement("rating output_current of fast", None, 2.0, rating, 2.0 - rating, "pass", "A"),)
    return Result("fast", 1e8, 25.0, "envelope", {"on_time": Figure(value, "s", note)}, (), "frozen", ratings=rated)


def design(*limits):
    return SimpleNamespace(limits=limits)


def test_uncertainty_is_a_multiple_of_the_widest_spread():
    done = certified(result(90e-9), [result(91e-9), result(89e-9), result(90e-9)], design(LIMIT))
    assert done.figures["on_time"].value == 90e-9
    assert done.figures["on_time"].uncertainty == pytest.approx(SAFETY * 2e-9, rel=1e-3)
    assert done.judgements[0].verdict == "pass"
    assert certified(result(95e-9), [result(97e-9)], design(LIMIT)).judgements[0].verdict == "undefined"
    assert certified(result(120e-9), [result(121e-9)], design(LIMIT)).judgements[0].verdict == "fail"


def test_figure_that_finer_settings_do_not_have_is_not_known():
    done = certified(result(90e-9), [result(90e-9), result(None, "never on")], design(LIMIT))
    assert done.figures["on_time"].uncertainty == math.inf
    assert done.figures["on_time"].note == "at finer settings it has no value: never on"
    assert done.judgements[0].verdict == "undefined"


def test_ratings_are_judged_with_their_uncertainty():
    done = certified(result(90e-9, rating=1.9), [result(90e-9, rating=1.8)], design())
    assert done.ratings[0].verdict == "undefined"
    assert done.verdict == "undefined"


def test_finer_settings_have_half_the_step_and_less_tolerance():
    plain = SimpleNamespace(numerics=Numerics(), model_copy=lambda update: SimpleNamespace(**update))
    finer = [one.numerics for one in finer_designs(plain)]
    assert all(one.steps >= 2 * Numerics().steps for one in finer)
    assert all(one.reltol <= Numerics().reltol / 4.0 for one in finer)
    assert len({(one.steps, one.reltol) for one in finer}) == len(finer) > 1


# Notes

TIMING = Timing(1e-7, 3.1e-6, 1e-9, 0.0, 5e-6, 1e-5)
AXIS = np.unique(np.concatenate([np.linspace(0, 4.999e-6, 2000), 1e-7 + np.linspace(-6e-10, 6e-10, 9), 3.1e-6 + np.linspace(-6.1e-10, 6e-10, 9)]))


def record(end=1.0, **changes):
    level = np.where((AXIS > 1e-7) & (AXIS < 3.1e-6), end, 1e-3)
    fields = {"timing": TIMING, "definitions": Definitions(), "carrier": 1e8, "impedance": 50.0, "biased_passes": True}
    return Record(**{**fields, "envelope": Waveform(AXIS, level.astype(complex), "1"), "static_on": 1.0 + 0j, **changes})


def test_a_sound_result_has_no_notes():
    assert numerical_notes(record(), {"rise_time": Figure(1e-7, "s")}, AXIS, 400) == ()


@pytest.mark.parametrize(("end", "words"), [(0.9, "0.915 dB below"), (1.2, "1.58 dB above")])
def test_unsettled_on_state_is_said(end, words):
    (note,) = numerical_notes(record(end), {}, AXIS, 400)
    assert "has not settled by the end of its interval" in note
    assert words in note


def test_settled_within_the_band_is_not_said():
    assert numerical_notes(record(0.96), {}, AXIS, 400) == ()


def test_edge_without_time_steps_is_said():
    coarse = np.linspace(0, 5e-6, 2001)
    (note,) = numerical_notes(record(), {}, coarse, 400)
    assert "edge of 1 ns has 1 time steps" in note or "edge of 1 ns has 0 time steps" in note
    assert "raise numerics.steps above 400" in note


@pytest.mark.parametrize(("carrier", "said"), [(1e6, True), (1.9e7, True), (2.1e7, False)])
def test_transition_of_few_periods_is_said(carrier, said):
    notes = numerical_notes(record(carrier=carrier), {"rise_time": Figure(1e-7, "s")}, AXIS, 400)
    assert bool(notes) == said
    assert all("periods of the carrier" in note for note in notes)


def test_waveform_without_bound_is_a_fault():
    vectors = {"time": np.array([0.0, 1e-6]), "v(p1)": np.array([0.0, 1.0]), "v(xpath.x1.q)": np.array([0.0, 1e9])}
    assert unbounded(vectors) == ()
    (fault,) = unbounded({**vectors, "v(drive)": np.array([0.0, -2e6])})
    assert fault.startswith("v(drive) passes 1 MV at 1 us")
    faulty = replace(result(90e-9), faults=(fault,))
    assert faulty.verdict == "undefined"
