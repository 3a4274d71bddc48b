"""Preferred numbers against IEC 60063:2015 (E24 as printed there; E48 and E96 from memory of its tables)."""

import math
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.design.preferred import SERIES, nearest_preferred, preferred_values

E24 = "10 11 12 13 15 16 18 20 22 24 27 30 33 36 39 43 47 51 56 62 68 75 82 91"
E12 = "10 12 15 18 22 27 33 39 47 56 68 82"
E6 = "10 15 22 33 47 68"
E48 = (
    "100 105 110 115 121 127 133 140 147 154 162 169 178 187 196 205 215 226 237 249 261 274 287 301 316 332 348 365"
    " 383 402 422 442 464 487 511 536 562 590 619 649 681 715 750 787 825 866 909 953"
)


@pytest.mark.parametrize(("series", "digits"), [("E6", E6), ("E12", E12), ("E24", E24), ("E48", E48)])
def test_digits_of_the_standard(series, digits):
    assert SERIES[series] == tuple(map(int, digits.split()))


def test_e96_has_the_values_of_e48_and_one_between_each():
    assert len(SERIES["E96"]) == 96
    assert SERIES["E96"][::2] == SERIES["E48"]
    # memory of the standard's table
    assert {102, 124, 158, 232, 324, 475, 698, 976} <= set(SERIES["E96"])


@pytest.mark.parametrize(
    ("series", "value", "nearest"),
    # a speed-up capacitor by charge balance (Millman & Taub): 33.436 pF; 37.32 pF lies between two values of E24
    [("E24", 33.436e-12, 33e-12), ("E24", 37.32e-12, 36e-12), ("E12", 37.32e-12, 39e-12), ("E6", 999.0, 1000.0)],
)
def test_nearest_in_ratio(series, value, nearest):
    assert nearest_preferred(series, value) == nearest


def test_values_are_the_floats_that_a_design_file_gives():
    assert preferred_values("E12", 1e-10, 1e-9) == (*(float(f"{n}e-11") for n in E12.split()), 1e-9)


@given(st.sampled_from(sorted(SERIES)), st.floats(1e-15, 1e9), st.floats(1.0, 1e4))
def test_range_holds_all_values_of_the_series_and_no_other(series, low, ratio):
    high = low * ratio
    values = preferred_values(series, low, high)
    assert list(values) == sorted(set(values))
    assert all(low * (1 - 1e-8) <= value <= high * (1 + 1e-8) for value in values)
    # neighbours of a series are never further apart than its largest step
    step = {"E6": 1.52, "E12": 1.26, "E24": 1.16, "E48": 1.06, "E96": 1.0302}[series]
    if values:
        assert values[0] <= low * step
        assert values[-1] >= high / step
        assert all(b / a <= step for a, b in pairwise(values))
    else:
        assert math.log(ratio) <= math.log(step)
