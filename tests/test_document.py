"""The JSON documents: their keys, and that JSON readers everywhere accept them.

Outside reference: RFC 8259, which knows neither NaN nor Infinity; Python's own JSON reader, told to refuse them.
"""

import json
import math
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.errors import (
    ConvergenceError,
    DesignError,
    EngineNotFound,
    InvalidDesign,
    NetlistError,
    OutputError,
    TransimError,
)
from transim.measure.limits import Limit
from transim.parts.catalogue import load_catalogue
from transim.report.document import error_document, json_text, limit_document, part_document


def strict(text):
    """Read JSON, refusing what RFC 8259 does not know."""

    def refuse(constant):
        raise AssertionError(f"{constant} is no JSON")

    return json.loads(text, parse_constant=refuse)


VALUES = st.recursive(
    st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8),
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.text(max_size=4), inner, max_size=3),
    max_leaves=12,
)


def expected(value):
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if isinstance(value, list):
        return [expected(element) for element in value]
    if isinstance(value, dict):
        return {key: expected(element) for key, element in value.items()}
    return value


@given(st.dictionaries(st.text(max_size=4), VALUES, max_size=4))
def test_what_is_not_finite_is_null_and_all_else_is_kept(document):
    text = json_text(document)
    assert strict(text) == expected(document)
    assert text.isascii()
    assert text.endswith("}\n")


@pytest.mark.parametrize(
    ("error", "status"),
    [
        (DesignError("no", file=Path("a.toml"), line=3, column=5, key="control.low"), 2),
        (InvalidDesign([DesignError("one", key="a"), DesignError("two", key="b")]), 2),
        (NetlistError("no", file=Path("x.cir"), line=7), 2),
        (OutputError("not empty"), 2),
        (EngineNotFound("nowhere", command=["ngspice"]), 3),
        (ConvergenceError("stuck", time_reached=1e-9, log_tail="one\ntwo"), 3),
        (TransimError("unexpected"), 3),
    ],
)
def test_an_error_has_its_place_and_the_exit_status(error, status):
    document = strict(json_text(error_document(error)))
    assert set(document) == {"format", "errors", "exit"}
    assert (document["format"], document["exit"]) == (1, status)
    assert all({"file", "line", "column", "key", "message"} <= set(one) for one in document["errors"])


def test_every_error_of_a_design_is_one_entry():
    document = error_document(InvalidDesign([DesignError("one", key="a"), DesignError("two", key="b")]))
    assert [(one["key"], one["message"]) for one in document["errors"]] == [("a", "one"), ("b", "two")]


def test_a_limit_has_the_bounds_that_were_given():
    assert limit_document(Limit("on_time", max=1.5e-7)) == {"metric": "on_time", "max": 1.5e-7}
    assert limit_document(Limit("isolation", 40.0)) == {"metric": "isolation", "min": 40.0}
    assert set(limit_document(Limit("isolation", 40.0, 60.0))) == {"metric", "min", "max"}


def test_a_part_has_every_key_that_a_design_may_set():
    for part in load_catalogue():
        document = strict(json_text(part_document(part)))
        keys = [entry["name"] for entry in document["supplies"] + document["parameters"]]
        assert keys == list(part.settings)
        for entry in document["parameters"]:
            assert entry["default"] == part.settings[entry["name"]].default
