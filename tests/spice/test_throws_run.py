"""A two-throw design as a user runs it: results, waveforms and files of each throw.

Outside references: the waveforms that the run itself writes, measured here by numpy; symmetry: two equal arms under a
command that is as long high as low do the same half a period apart.
"""

import json
from pathlib import Path

import numpy as np
import pytest

from transim.cli import main
from transim.design.toml import read_design
from transim.report.cycle import cycles_of
from transim.report.leakage_figures import leakage_figure, spectrum_figure
from transim.study.run import run_design

EXAMPLE = Path(__file__).parents[2] / "examples" / "commutator_two.toml"


@pytest.fixture(scope="module")
def outcome(tmp_path_factory):
    folder = tmp_path_factory.mktemp("two")
    text = EXAMPLE.read_text()
    (folder / "two.toml").write_text(text + '\n[static]\nfrom = "10 MHz"\nto = "1 GHz"\npoints = 5\n')
    words = ["--driver", "rails", "--out", str(folder / "out"), "--figures", str(folder / "figures")]
    status = main(["run", str(folder / "two.toml"), *words, "--json", str(folder / "two.json")])
    assert status == 0
    return folder, json.loads((folder / "two.json").read_text())


def at(document, throw, carrier=30e6):
    (found,) = (r for r in document["results"] if (r["throw"], r["carrier"]) == (throw, carrier))
    return {name: figure["value"] for name, figure in found["metrics"].items()}


def test_files_of_each_throw(outcome):
    folder, _ = outcome
    for throw in ("p2", "p3"):
        for name in (f"envelope_30MHz_{throw}.csv", f"static_{throw}.csv", f"static_on_{throw}.s3p", f"static_off_{throw}.s3p"):
            assert (folder / "out" / "rails" / name).is_file()
        for name in ("cycle", "leakage", "spectrum", "envelope_150MHz"):
            assert (folder / "figures" / "rails" / f"{name}_{throw}.png").is_file()
    # what is on for one throw is off for the other
    on, off = ((folder / "out" / "rails" / f"static_{name}.s3p").read_text() for name in ("on_p2", "off_p3"))
    data = [[line for line in text.splitlines() if not line.startswith("!")] for text in (on, off)]
    assert data[0] == data[1]


def test_figures_are_those_of_the_waveforms(outcome):
    folder, document = outcome
    waves = np.load(folder / "out" / "rails" / "waveforms.npz")
    for throw, entry in (("p2", ""), ("p3", "_bias2")):
        figures = at(document, throw)
        peaks = [np.abs(waves[f"port_{port}"]).max() for port in ("p1", throw)]
        assert figures["video_peak"] == pytest.approx(max(peaks), rel=1e-6)
        assert figures["driver_source_peak"] == pytest.approx(waves[f"driver_current{entry}"].max(), rel=1e-6)
        time, wave = waves[f"envelope_30MHz_{throw}_time"], np.abs(waves[f"envelope_30MHz_{throw}"])
        # 2 mV of 1 V: the last points of both states
        loss = -20.0 * np.log10(wave[0] if throw == "p3" else wave[np.searchsorted(time, 3e-6)])
        assert loss == pytest.approx(figures["insertion_loss"], abs=0.05)


def test_overlap_is_that_of_the_envelopes(outcome):
    folder, document = outcome
    waves = np.load(folder / "out" / "rails" / "waveforms.npz")
    time = waves["envelope_30MHz_p2_time"]
    # the command rises at 62 ns (edge and a fiftieth of the pulse) and falls 3 us later
    for throw, other, start, stop in (("p2", "p3", 62e-9, 3.06e-6), ("p3", "p2", 3.062e-6, 8e-6)):
        fine = np.linspace(start, stop, 200001)
        shares = []
        for name in (throw, other):
            on = 10.0 ** (-at(document, name)["insertion_loss"] / 20.0)
            shares.append(np.interp(fine, time, np.abs(waves[f"envelope_30MHz_{name}"])) / on)
        both = np.mean((shares[0] > 0.1) & (shares[1] > 0.1)) * (stop - start)
        assert at(document, throw)["throw_overlap"] == pytest.approx(both, rel=0.005)
        assert at(document, throw)["throw_gap"] == 0.0


def test_figures_of_leakage_show_the_ports_that_are_judged(engine):
    cycles = cycles_of(run_design(read_design(EXAMPLE), engine, drivers=["rails"]))
    assert [(cycle.throw, [port.name for port in cycle.leaking]) for cycle in cycles] == [
        ("p2", ["p1", "p2"]),
        ("p3", ["p1", "p3"]),
    ]
    for cycle in cycles:
        assert len(leakage_figure(cycle).axes) == 4
        # the leakage in band of both carriers is marked inside the axes
        (axes,) = spectrum_figure(cycle).axes
        low, high = axes.get_ylim()
        marks = [line.get_ydata()[0] for line in axes.lines if line.get_label() == "_inband"]
        assert len(marks) == 2
        # a whole circle, not the half of one
        assert all(low + 2.0 < mark < high - 2.0 for mark in marks)


def test_equal_arms_do_the_same_half_a_period_apart(tmp_path):
    text = EXAMPLE.read_text().replace('period = "8 us"', 'period = "6 us"\npulses = 3')
    (tmp_path / "two.toml").write_text(text)
    main(["run", str(tmp_path / "two.toml"), "--driver", "rails", "--json", str(tmp_path / "two.json")])
    document = json.loads((tmp_path / "two.json").read_text())
    first, second = at(document, "p2", 150e6), at(document, "p3", 150e6)
    for name in ("on_time", "off_time", "rise_time", "fall_time", "driver_charge_on", "driver_charge_off", "throw_overlap"):
        assert first[name] == pytest.approx(second[name], rel=0.01), name
    for name in ("insertion_loss", "isolation"):
        assert first[name] == pytest.approx(second[name], abs=1e-6)
