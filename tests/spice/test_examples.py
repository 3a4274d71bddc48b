"""The examples, run as a user runs them.

Outside reference: the limits in each example's own file, held against the figures in the document.
"""

import json
import tomllib
from pathlib import Path

import pytest

from transim.cli import main
from transim.measure.metrics import METRICS
from transim.quantities import parse_quantity

EXAMPLES = sorted((Path(__file__).parents[2] / "examples").glob("*.toml"))
NUMBER = (int, float)
#: Paths of the examples that have several ways for the RF.
THROWS = {"spdt_series": ["p2", "p3"]}


@pytest.fixture(scope="module", params=EXAMPLES, ids=lambda file: file.stem)
def example(request, tmp_path_factory):
    """Return the file's document, and what its run gives: exit status, text, JSON document."""
    folder = tmp_path_factory.mktemp(request.param.stem)
    with pytest.MonkeyPatch.context() as patch, (folder / "out.txt").open("w") as out:
        patch.setattr("sys.stdout", out)
        status = main(["run", str(request.param), "--json", str(folder / "run.json")])
    design = tomllib.loads(request.param.read_text())
    return design, status, (folder / "out.txt").read_text(), json.loads((folder / "run.json").read_text())


def expected_verdict(metric, bounds, figures):
    value = figures[metric]["value"]
    if value is None:
        return "undefined"
    unit = METRICS[metric].unit
    low = "min" not in bounds or value >= parse_quantity(bounds["min"], unit)
    high = "max" not in bounds or value <= parse_quantity(bounds["max"], unit)
    return "pass" if low and high else "fail"


def test_exit_status_is_as_the_limits_say(example):
    design, status, text, document = example
    verdicts = set()
    for result in document["results"]:
        assert result["faults"] == []
        limits = [entry for entry in result["limits"] if "rating" not in entry]
        for judged, (metric, bounds) in zip(limits, design["limits"].items(), strict=True):
            assert judged["metric"] == metric
            assert judged["verdict"] == expected_verdict(metric, bounds, result["metrics"])
        verdicts |= {entry["verdict"] for entry in result["limits"]}
    verdict = "fail" if "fail" in verdicts else "undefined" if "undefined" in verdicts else "pass"
    assert document["verdict"] == verdict
    assert status == {"pass": 0, "fail": 1, "undefined": 4}[verdict]
    assert text.splitlines()[-1].startswith(f"Verdict: {verdict.upper()}")


def test_document_has_every_driver_and_carrier_and_what_is_described(example):
    design, _, _, document = example
    assert document["format"] == 1
    assert document["title"] == design["title"]
    carriers = [parse_quantity(text, "Hz") for text in design["carrier"]["frequency"]]
    places = [(result["driver"], result["carrier"], result["throw"]) for result in document["results"]]
    throws = THROWS.get(design["switch"]["path"], [None])
    assert places == [(d, carrier, throw) for d in design["driver"] for carrier in carriers for throw in throws]
    for result in document["results"]:
        assert {
            "driver", "carrier", "temperature", "analysis", "method", "check_db", "faults", "verdict",
            "metrics", "limits",
        } <= set(result)  # fmt: skip
        assert isinstance(result["check_db"], NUMBER)
        assert result["check_db"] <= 0.05
        for entry in result["metrics"].values():
            assert set(entry) == {"value", "unit", "note", "uncertainty"}
            assert isinstance(entry["value"], NUMBER) != isinstance(entry["note"], str)
        for judged in result["limits"]:
            assert {"metric", "value", "margin", "verdict"} <= set(judged)
            margins = [judged["value"] - judged["min"]] if "min" in judged else []
            margins += [judged["max"] - judged["value"]] if "max" in judged else []
            assert judged["margin"] == pytest.approx(min(margins))


def test_text_fits_a_page_and_names_what_was_run(example):
    design, _, text, document = example
    assert max(map(len, text.splitlines())) <= 100
    assert text.startswith(f"{design['title']}\n{document['engine']}; envelope analysis; 25 degC;")
    assert "10 and 90 % of RF voltage" in text
    for driver in design["driver"]:
        assert f"\n{driver}: " in text
    for frequency in design["carrier"]["frequency"]:
        assert f"\nAt {frequency}, {design['carrier']['level']} and 25 degC, envelope analysis\n" in text
    several = design["switch"]["path"] in THROWS
    for metric, entry in METRICS.items():
        assert (f"\n  {metric} " in text) == (metric in design["limits"] or entry.serves("envelope", throws=several))
