"""Mean of an envelope over the carrier period, against arithmetic: a step, averaged twice, is a quadratic ramp."""

import math

import numpy as np
import pytest

from transim.measure import Definitions, Record, Timing, Waveform, extract
from transim.study.averaging import averaged_envelope, averaging_notes

NS = 1e-9
PERIOD = 10 * NS


def step_at(instant, final=0.5 + 0.5j):
    """Return an envelope that goes up within 1 ps."""
    time = np.unique(np.concatenate((np.linspace(0.0, 1000.0, 4001), [instant, instant + 1e-3]))) * NS
    return Waveform(time, np.where(time > instant * NS, final, 0.0), "1")


def record(envelope, on_edge):
    return Record(
        timing=Timing(on_edge=on_edge, off_edge=900 * NS, edge=2 * NS, start=0.0, stop=1000 * NS, period=2e-6),
        definitions=Definitions(),
        carrier=1.0 / PERIOD,
        impedance=50.0,
        biased_passes=True,
        envelope=envelope,
        static_on=0.5 + 0.5j,
    )


def test_once_is_a_straight_ramp_of_one_period():
    ramp = averaged_envelope(step_at(200), 1.0 / PERIOD, 1)
    for share in (0.1, 0.5, 0.9):
        instant = 200 * NS + (share - 0.5) * PERIOD
        assert complex(ramp.at(instant)) == pytest.approx(share * (0.5 + 0.5j), abs=1e-3)


def test_twice_reaches_90_percent_where_the_triangle_has_a_tenth_left():
    smooth = averaged_envelope(step_at(200), 1.0 / PERIOD, 2)
    # a triangle of two periods: (1 - x/T)^2 / 2 is left after x
    instant = 200 * NS + PERIOD * (1.0 - math.sqrt(0.2))
    assert abs(complex(smooth.at(instant))) == pytest.approx(0.9 * math.sqrt(0.5), rel=1e-3)
    assert averaged_envelope(step_at(200), 1.0 / PERIOD, 0).value.tolist() == step_at(200).value.tolist()


def test_what_moves_by_more_than_a_percent_is_said():
    found = record(step_at(200), on_edge=150 * NS)
    (note,) = averaging_notes(found, extract(found), 0)
    # 50 ns become 55.53 ns
    assert note.startswith("on_time is that of the envelope at each instant")
    assert "55.5" in note
    assert "+11.1%" in note


def test_what_does_not_move_is_not_said():
    # the same shift is half a percent of 1.1 us
    time = np.linspace(0.0, 4000.0, 16001) * NS
    slow = Waveform(time, np.clip((time / NS - 1000.0) / 2000.0, 0.0, 1.0) * (0.5 + 0.5j), "1")
    found = record(slow, on_edge=150 * NS)
    found = Record(**{**vars(found), "timing": Timing(150 * NS, 3900 * NS, 2 * NS, 0.0, 4000 * NS, 8e-6)})
    figures = extract(found)
    assert figures["on_time"].value == pytest.approx(2650 * NS, rel=1e-3)
    assert averaging_notes(found, figures, 0) == ()


def test_an_envelope_that_is_averaged_already_is_left_alone():
    found = record(step_at(200), on_edge=150 * NS)
    assert averaging_notes(found, extract(found), 2) == ()
