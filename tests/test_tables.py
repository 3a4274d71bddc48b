"""Tables and verdicts as text: what stands where, and that it fits a page of 100 columns.

Outside references: the definition of the decibel, and the figures themselves, which are read back from the text.
"""

import math
import re
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from transim.design.toml import read_design
from transim.engine.rawfile import Plot
from transim.measure.definitions import Definitions
from transim.measure.limits import judge
from transim.measure.metrics import METRICS, Figure
from transim.quantities import format_quantity, parse_quantity
from transim.report.layout import WIDTH, Column, align, wrap
from transim.report.tables import limit_text, metric_tables
from transim.report.verdicts import definition_lines, head_lines, verdict_lines
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
frequency = ["30 MHz", "433.92 MHz"]
[switch]
path = "series_pair"
junction = "reed"
[junction.reed]
part = "pin_lumped"
DRIVERS
[limits]
on_time = { max = "150 ns" }
isolation = { min = "40 dB" }
video_inband = { min = "-120 dBm", max = "-60 dBm" }
"""
#: Metrics that the envelope analysis gives.
SHOWN = [name for name, metric in METRICS.items() if metric.serves("envelope")]
NO_VIDEO = Plot("t", "Transient Analysis", "real", ("time",), ("time",), np.zeros((0, 1)))


def build(tmp_path, drivers, *, limits=True, temperatures=(25.0,), changes=None, faults=None):
    """Return an outcome whose every figure is 1.2345 of its unit, apart from changes by (driver, metric)."""
    tables = "".join(f'[driver.{name}]\npart = "resistor_feed"\n' for name in drivers)
    text = DESIGN.replace("DRIVERS", tables)
    if not limits:
        text = text.partition("[limits]")[0]
    text += "[environment]\ntemperature = [" + ", ".join(f'"{value} degC"' for value in temperatures) + "]\n"
    file = tmp_path / "reed.toml"
    file.write_text(text, encoding="utf-8")
    design = read_design(file)
    cases = []
    for driver in drivers:
        for temperature in temperatures:
            results = [
                result_of(design, driver, temperature, carrier, changes or {}, (faults or {}).get(driver, ()))
                for carrier in design.carrier.frequency
            ]
            cases.append(CaseRun(driver, temperature, tuple(results), (), NO_VIDEO, (ThrowRun("", {}),), 0.1))
    return Outcome(design, "ngspice 39", tuple(cases))


def result_of(design, driver, temperature, carrier, changes, faults):
    figures = {name: Figure(1.2345, metric.unit) for name, metric in METRICS.items()}
    figures["on_time"] = Figure(1e-7, "s")
    figures["isolation"] = Figure(50.0, "dB")
    figures["video_inband"] = Figure(-80.0, "dBm")
    for (name, metric), figure in changes.items():
        if name == driver:
            figures[metric] = figure
    return Result(
        driver,
        carrier,
        temperature,
        "envelope",
        figures,
        judge(figures, design.limits),
        "frozen: as requested",
        faults,
        3.2e-5,
    )


def test_one_table_a_carrier_and_temperature_with_limits_first(tmp_path):
    lines = metric_tables(build(tmp_path, ["gate", "fast"], temperatures=(-40.0, 85.0)))
    assert [line for line in lines if line.startswith("At ")] == [
        f"At {carrier}, -10 dBm and {temperature}, envelope analysis"
        for temperature in ("-40 degC", "85 degC")
        for carrier in ("30 MHz", "433.92 MHz")
    ]
    first = lines[: lines.index(next(line for line in lines[1:] if line.startswith("At ")))]
    names = [line.split()[0] for line in first if line.startswith("  ")]
    limited = ["on_time", "isolation", "video_inband"]
    assert names == ["with", *limited, "without", *(name for name in SHOWN if name not in limited)]


def test_a_row_holds_each_drivers_figure_and_verdict_and_the_limit(tmp_path):
    outcome = build(
        tmp_path,
        ["gate", "rails", "fast"],
        changes={("rails", "on_time"): Figure(1.6e-7, "s"), ("fast", "on_time"): Figure(None, "s", "no edge")},
    )
    rows = [line for line in metric_tables(outcome) if line.startswith("  on_time ") and "most" in line]
    cells = [re.split(r"\s{2,}", row.strip()) for row in rows]
    assert cells == [["on_time", "100 ns PASS", "160 ns FAIL", "- UNDEFINED", "at most 150 ns"]] * 2


@pytest.mark.parametrize("count", [1, 3, 8])
@pytest.mark.parametrize("length", [4, 18, 40])
def test_every_line_fits_the_page_and_no_driver_is_lost(tmp_path, count, length):
    drivers = [f"d{number}".ljust(length, "x") for number in range(count)]
    note = "isolation floor -18.3 dB of the on level is above 10 % (-20 dB), which is a long reason"
    changes = {(name, "off_time"): Figure(None, "s", note) for name in drivers}
    outcome = build(tmp_path, drivers, changes=changes, temperatures=(-40.0, 25.0))
    lines = [*head_lines(outcome), *metric_tables(outcome), *verdict_lines(outcome)]
    assert max(map(len, lines)) <= WIDTH
    headings = " ".join(line for line in lines if line.startswith("  with"))
    # limited and not limited, two carriers, two temperatures
    assert all(headings.split().count(name) == 8 for name in drivers)


def test_a_reason_stands_once_below_with_all_that_it_holds_for(tmp_path):
    gone = Figure(None, "s", "the RF never falls")
    outcome = build(
        tmp_path,
        ["gate", "fast"],
        changes={
            ("gate", "off_time"): gone,
            ("fast", "off_time"): gone,
            ("gate", "fall_time"): gone,
            ("fast", "fall_time"): gone,
            ("fast", "video_width"): Figure(None, "s", "there is no leakage"),
        },
    )
    lines = metric_tables(outcome)
    table = lines[: lines.index("At 433.92 MHz, -10 dBm and 25 degC, envelope analysis")]
    start = table.index("  undefined (-), because")
    assert table[start + 1 : -1] == [
        "  off_time, fall_time: the RF never falls",
        "  video_width (fast): there is no leakage",
    ]
    (row,) = [line.split() for line in table if line.startswith("  video_width ")][:1]
    assert row[:4] == ["video_width", "1.234", "s", "-"]


def test_figures_are_read_back_from_the_table(tmp_path):
    outcome = build(tmp_path, ["gate"])
    lines = metric_tables(outcome)[: len(SHOWN) + 8]
    found = {}
    for line in lines:
        cells = re.split(r"\s{2,}", line.strip())
        if cells[0] in METRICS:
            found[cells[0]] = parse_quantity(re.sub(" (PASS|FAIL)$", "", cells[1]), METRICS[cells[0]].unit)
    figures = outcome.results[0].figures
    assert found == {name: pytest.approx(figures[name].value, rel=5e-4) for name in SHOWN}


def test_a_fault_makes_every_verdict_undefined_and_says_why(tmp_path):
    outcome = build(tmp_path, ["gate", "fast"], faults={"fast": ("the envelope differs by 1 dB",)})
    rows = [line for line in metric_tables(outcome) if line.startswith(("  on_time", "  isolation"))]
    assert all(("PASS" in row, "UNDEFINED" in row) == (True, True) for row in rows)
    lines = verdict_lines(outcome)
    assert "  fault at 30 MHz: the envelope differs by 1 dB" in lines
    assert lines[-1] == "Verdict: UNDEFINED; a limit cannot be judged for fast; every limit is met by gate"


def test_the_worst_limit_is_the_one_missed_by_the_largest_share(tmp_path):
    outcome = build(
        tmp_path,
        ["gate"],
        changes={("gate", "on_time"): Figure(1.8e-7, "s"), ("gate", "isolation"): Figure(30.0, "dB")},
    )
    lines = verdict_lines(outcome)
    assert lines[0] == "gate: FAIL; limits met 2, missed 4"
    # 10 dB of 40 dB is a quarter, 30 ns of 150 ns a fifth
    assert lines[1] == "  worst: isolation at 30 MHz is 30 dB, that is 10 dB outside its limit of at least 40 dB"
    assert lines[-1] == "Verdict: FAIL; a limit is missed by gate"


def test_a_driver_that_passes_shows_its_smallest_margin(tmp_path):
    lines = verdict_lines(build(tmp_path, ["gate"]))
    assert lines[0] == "gate: PASS; limits met 6"
    # 10 dB of 40 dB, 50 ns of 150 ns, 20 dB of 60 dB
    assert lines[1] == "  closest: isolation at 30 MHz is 50 dB, that is 10 dB inside its limit of at least 40 dB"
    assert lines[-1] == "Verdict: PASS; every limit is met"


def test_a_design_without_limits_judges_nothing(tmp_path):
    outcome = build(tmp_path, ["gate"], limits=False)
    assert not any("with a limit" in line for line in metric_tables(outcome))
    lines = verdict_lines(outcome)
    assert (lines[0], lines[-1]) == ("gate: no limits to judge", "Verdict: PASS; the design sets no limits")


def test_method_and_check_stand_with_the_driver(tmp_path):
    lines = verdict_lines(build(tmp_path, ["gate"]))
    assert "  envelope at 433.92 MHz: frozen: as requested" in lines
    assert any("by less than 0.001 dB" in line for line in lines)


@pytest.mark.parametrize(("basis", "factor"), [("voltage", 20.0), ("power", 10.0)])
def test_definitions_state_the_basis_with_its_levels(basis, factor):
    # the definition of the decibel: 20 lg of a voltage ratio, 10 lg of a power ratio
    low, high = (format_quantity(factor * math.log10(share), "1", 3) for share in (0.1, 0.9))
    text = definition_lines(Definitions(basis=basis))[0]
    assert f"10 and 90 % of RF {basis} ({low} and {high} dB)" in text
    assert "static on state" in text
    assert "end of the on interval" in definition_lines(Definitions(reference="end_of_pulse"))[0]


def test_definitions_state_the_bandwidths():
    text = definition_lines(replace(Definitions(), video_bandwidth=5e8, resolution_bandwidth=1e3))[1]
    assert "one pole at 500 MHz" in text
    assert "in band per 1 kHz" in text


def test_limits_in_words(tmp_path):
    limits = build(tmp_path, ["gate"]).design.limits
    assert [limit_text(limit) for limit in limits] == ["at most 150 ns", "at least 40 dB", "-120 dBm .. -60 dBm"]


@given(st.lists(st.lists(st.text("abc 1", max_size=12), min_size=3, max_size=3), min_size=1, max_size=5))
def test_columns_keep_their_place(cells):
    columns = [Column(str(number), tuple(column), number % 2 == 1) for number, column in enumerate(cells)]
    lines = align(columns)
    assert len(lines) == 4
    start = 0
    for number, column in enumerate(columns):
        found = [line[start : start + column.width].strip() for line in lines]
        assert found == [str(number), *(cell.strip() for cell in column.cells)]
        start += column.width + 2


@given(st.integers(1, 130))
def test_a_number_stays_with_its_unit(length):
    lines = wrap("x" * length + " 412.3 ns and 225 % of it")
    assert any("412.3 ns" in line for line in lines)
    assert any("225 %" in line for line in lines)
    assert " ".join(line.strip() for line in lines) == "x" * length + " 412.3 ns and 225 % of it"
