"""Maximum ratings: read from a design, held against waveforms, shown in tables and documents.

Outside references: the waveforms' own peaks and means, worked out by hand; RFC 8259 for the document.
"""

import json
import re
from dataclasses import replace

import numpy as np
import pytest

from transim.design.toml import read_design
from transim.engine.rawfile import Plot
from transim.errors import InvalidDesign, MeasurementError
from transim.measure import METRICS, Definitions, Figure, Rating, Record, Timing, Waveform, judge
from transim.measure.limits import judge_ratings
from transim.measure.rate import rate_study
from transim.report.document import json_text, run_document
from transim.report.layout import WIDTH
from transim.report.ratings import rating_tables
from transim.report.verdicts import verdict_lines
from transim.study.result import CaseRun, Result, ThrowRun
from transim.study.run import Outcome

DESIGN = """\
title = "Reed, arm 2"
[control]
low = "0 V"
high = "5 V"
edge = "2 ns"
on_for = "1 us"
period = "4 us"
[carrier]
frequency = ["30 MHz", "150 MHz"]
[switch]
path = "series_pair"
junction = "reed"
[junction.reed]
part = "pin_lumped"
JUNCTION
[driver.gate]
part = "resistor_feed"
GATE
[driver.ideal]
part = "ideal_current"
IDEAL
[limits]
isolation = { min = "40 dB" }
"""
JUNCTION = 'ratings = { reverse_voltage = "100 V", forward_current_mean = "20 mA", dissipation = "0.25 W" }'
GATE = 'ratings = { output_current = "25 mA", dissipation = "50 mW", supply_current = "30 mA" }'
TIMING = Timing(on_edge=1.0, off_edge=5.0, edge=0.0, start=2.0, stop=11.0, period=10.0)


@pytest.fixture
def read(tmp_path):
    """Return a function that reads a design with these lines in its tables."""

    def read_text(junction="", gate="", ideal=""):
        file = tmp_path / "reed.toml"
        text = DESIGN.replace("JUNCTION", junction).replace("GATE", gate).replace("IDEAL", ideal)
        file.write_text(text, encoding="utf-8")
        return read_design(file)

    return read_text


def wave(time, value, unit="V"):
    return Waveform(np.array(time, dtype=float), np.array(value, dtype=float), unit)


def record_of(*ratings):
    timing = replace(TIMING, start=0.0)
    parts = {"carrier": 1e8, "impedance": 50.0, "biased_passes": True, "definitions": Definitions()}
    return Record(timing=timing, ratings=ratings, **parts)


def test_ratings_are_read_in_si_units(read):
    design = read(JUNCTION, GATE)
    assert design.switch.junctions["junction"].ratings.stated == {
        "reverse_voltage": 100.0,
        "forward_current_mean": 0.02,
        "dissipation": 0.25,
    }
    gate, ideal = design.drivers
    assert gate.ratings.stated == {"output_current": 0.025, "dissipation": 0.05, "supply_current": 0.03}
    assert ideal.ratings.stated == {}
    assert gate.ratings.unit("dissipation") == "W"


def test_a_subtable_serves_as_well(read):
    design = read('[junction.reed.ratings]\nforward_current_peak = "1 A"')
    assert design.switch.junctions["junction"].ratings.forward_current_peak == 1.0


@pytest.mark.parametrize(
    ("where", "text", "key", "expected", "found"),
    [
        ("junction", '{ reverse_voltage = "9 mA" }', "junction.reed.ratings.reverse_voltage", "a voltage in V", "9 mA"),
        ("junction", '{ dissipation = "0 W" }', "junction.reed.ratings.dissipation", "> 0 W", "0 W"),
        ("junction", "{ dissipation = 2 }", "junction.reed.ratings.dissipation", "a power in W", "2"),
        ("junction", '{ disipation = "1 W" }', "junction.reed.ratings.disipation", "dissipation", "disipation"),
        ("junction", '"100 V"', "junction.reed.ratings", "[junction.reed.ratings]", "100 V"),
        ("gate", '{ reverse_voltage = "9 V" }', "driver.gate.ratings.reverse_voltage", "output_", "reverse_voltage"),
    ],
)
def test_a_wrong_rating_is_refused_at_its_place(read, where, text, key, expected, found):
    with pytest.raises(InvalidDesign) as caught:
        read(**{where: f"ratings = {text}"})
    (error,) = caught.value.errors
    assert error.key == key
    assert error.line == {"junction": 15, "gate": 18}[where]
    assert expected in error.expected
    assert found in error.found


@pytest.mark.parametrize("key", ['dissipation = "1 W"', 'supply_current = "1 A"'])
def test_a_driver_without_supplies_has_no_such_rating(read, key):
    with pytest.raises(InvalidDesign, match="ideal_current has no supply, so that this cannot be known"):
        read(ideal=f"ratings = {{ {key} }}")


def test_a_junction_without_probe_has_no_rated_reverse_voltage(tmp_path):
    part = tmp_path / "bare.cir"
    part.write_text(
        "* transim part\n* name: bare\n* role: junction\n* terminals: a k\n* summary: a resistor\n"
        "* parameter: on_resistance | ohm | 1 ohm | 1 mohm .. 1 kohm | its value\n"
        ".subckt bare a k on_resistance=1\nR1 a k {on_resistance}\n.ends\n"
    )
    file = tmp_path / "bare.toml"
    text = DESIGN.replace('part = "pin_lumped"', 'part = "bare.cir"').replace("GATE", "").replace("IDEAL", "")
    file.write_text(text.replace("JUNCTION", 'ratings = { reverse_voltage = "9 V" }'), encoding="utf-8")
    with pytest.raises(InvalidDesign, match="bare has no probe of its reverse voltage"):
        read_design(file)


def test_a_peak_is_over_the_whole_transient_and_a_mean_over_the_period():
    # the largest sample lies before the judged cycle
    peaks = wave([0, 0.5, 1, 11], [0, 12, 4, 3])
    square = wave([0, 1, 1.0001, 5, 5.0001, 11], [0, 0, 2, 2, 0, 0], "W")
    record = record_of(Rating("junction.a.v j1", 10.0, "peak", peaks), Rating("driver.b.p", 1.0, "mean", square))
    judged = judge_ratings(replace(record, timing=TIMING))
    assert (judged[0].metric, judged[0].value, judged[0].margin) == ("rating junction.a.v j1", 12.0, -2.0)
    assert [one.verdict for one in judged] == ["fail", "pass"]
    judged = judge_ratings(record)
    assert (judged[1].value, judged[1].margin) == (pytest.approx(0.8, rel=1e-4), pytest.approx(0.2, rel=1e-3))
    assert (judged[1].unit, judged[1].max, judged[1].min) == ("W", 1.0, None)


def test_a_value_on_its_rating_meets_it_and_a_negative_one_counts_as_none():
    flat, below = wave([0, 11], [10, 10]), wave([0, 11], [-3, -5])
    judged = judge_ratings(record_of(Rating("a", 10.0, "peak", flat), Rating("b", 10.0, "peak", below)))
    assert [(one.value, one.verdict) for one in judged] == [(10.0, "pass"), (0.0, "pass")]


def test_a_sample_that_is_not_finite_leaves_the_rating_undefined_with_its_reason():
    (judged,) = judge_ratings(record_of(Rating("a", 10.0, "peak", wave([0, 5, 11], [0, np.nan, 1]))))
    assert (judged.verdict, judged.value) == ("undefined", None)
    assert judged.note == "the sample at 5 s is not a finite number"


@pytest.mark.parametrize("most", [0.0, -1.0, np.nan])
def test_a_rating_is_a_positive_number(most):
    with pytest.raises(MeasurementError, match="finite positive"):
        Rating("a", most, "peak", wave([0, 1], [0, 0]))


def outcome_of(design, reverse=60.0):
    """Return an outcome in which two junctions take a reverse voltage each, rated 100 V, in two carriers."""
    figures = {name: Figure(50.0, metric.unit) for name, metric in METRICS.items()}
    cases = []
    for driver in ("gate", "ideal"):
        waves = [wave([0, 11], [value, value]) for value in (40.0, reverse)]
        ratings = [Rating(f"junction.reed.reverse_voltage xj{k}", 100.0, "peak", w) for k, w in enumerate(waves, 1)]
        if driver == "gate":
            ratings.append(Rating("driver.gate.output_current", 0.1, "peak", wave([0, 11], [0.02, 0.02], "A")))
        power = wave([0, 1, 1.0001, 5, 5.0001, 11], [0, 0, 2e-3, 2e-3, 0, 0], "W")
        record = replace(record_of(*ratings), junction_power={"xj1": power})
        results = tuple(
            Result(
                driver,
                carrier,
                25.0,
                "envelope",
                figures,
                judge(figures, design.limits),
                "frozen",
                ratings=judge_ratings(record),
                rates=rate_study(record),
            )
            for carrier in design.carrier.frequency
        )
        video = Plot("t", "Transient Analysis", "real", ("time",), ("time",), np.zeros((0, 1)))
        cases.append(CaseRun(driver, 25.0, results, (), video, (ThrowRun("", {}),), 0.1))
    return Outcome(design, "ngspice 39", tuple(cases))


def test_a_violated_rating_is_a_failed_limit(read):
    design = read()
    assert outcome_of(design).verdict == "pass"
    assert outcome_of(design, reverse=120.0).verdict == "fail"
    assert outcome_of(design, reverse=np.nan).verdict == "undefined"


def test_table_shows_the_worst_place_once_and_not_for_each_carrier(read):
    lines = rating_tables(outcome_of(read(), reverse=120.0))
    rows = [re.split(r"\s{2,}", line.strip()) for line in lines]
    assert ["junction.reed.reverse_voltage", "120 V (-20 %) FAIL", "120 V (-20 %) FAIL", "at most 100 V"] in rows
    assert ["driver.gate.output_current", "20 mA (80 %) PASS", "at most 100 mA"] in rows
    assert sum(line.startswith("Ratings at 25 degC") for line in lines) == 1
    assert max(map(len, lines)) <= WIDTH


def test_table_lists_powers_at_rates_and_what_sets_the_highest(read):
    lines = rating_tables(outcome_of(read()))
    rows = [re.split(r"\s{2,}", line.strip()) for line in lines]
    # 0.4 of 2 mW at any rate; no driver power is recorded
    assert ["100 mHz", "800 uW / - / -", "800 uW / - / -"] in rows
    assert any("gate: no highest rate, on_settling is undefined" in line for line in lines)


def test_verdict_names_the_rating_that_is_missed(read):
    lines = verdict_lines(outcome_of(read(), reverse=120.0))
    assert "gate: FAIL; limits met 2; ratings met 2, missed 1" in lines
    text = " ".join(line.strip() for line in lines)
    assert "worst: rating junction.reed.reverse_voltage xj2 without RF is 120 V, that is 20 V (20 %) outside" in text
    assert lines[-1] == "Verdict: FAIL; a limit is missed by gate, ideal"


def test_ratings_alone_are_judged_too(read):
    design = read().model_copy(update={"limits": ()})
    assert verdict_lines(outcome_of(design))[-1] == "Verdict: PASS; every limit is met"


def test_document_lists_ratings_among_the_limits(read):
    document = json.loads(json_text(run_document(outcome_of(read(), reverse=120.0), 1.0)))
    limit, first, second, _ = document["results"][0]["limits"]
    assert "rating" not in limit
    assert first == {
        "metric": "rating junction.reed.reverse_voltage xj1", "max": 100.0, "value": 40.0, "margin": 60.0,
        "verdict": "pass", "rating": True, "unit": "V", "note": None,
    }  # fmt: skip
    assert (second["verdict"], second["margin"]) == ("fail", -20.0)
    rates = document["results"][0]["switching_rate"]
    assert rates["duty"] == pytest.approx(0.4)
    assert set(rates["powers"]) == {"junction_dissipation"}
    assert len(rates["rates"]) == len(rates["powers"]["junction_dissipation"]["values"])
