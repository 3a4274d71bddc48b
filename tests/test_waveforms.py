"""Names of a case's waveforms: each array holds the vector that its name says.

Outside reference: the vectors themselves, each filled with a number of its own; the fixed-point form of numpy's text.
"""

import numpy as np
import pytest

from transim.circuit.assemble import assemble
from transim.design.toml import read_design
from transim.engine.rawfile import Plot
from transim.report.waveforms import carrier_name, csv_text, envelope_name, video_waveforms

DESIGN = """\
[control]
low = "0 V"
high = "5 V"
edge = "2 ns"
on_for = "1 us"
period = "4 us"
[carrier]
frequency = "30 MHz"
[switch]
path = "series_bjt"
junction = "heron"
[junction.heron]
part = "bjt_pair"
[driver.fast]
part = "push_pull_speedup"
"""


@pytest.fixture
def case(tmp_path):
    """Return a netlist and a run in which every vector has a value of its own."""
    file = tmp_path / "heron.toml"
    file.write_text(DESIGN)
    design = read_design(file)
    netlist = assemble(design, design.drivers[0])
    probed = [vector for probe in netlist.probes for _, vector in probe.terms]
    names = ["time", "v(ctl)", "v(drive)", "i(vdrive)", "v(p1)", "v(p2)", "i(vsupply_vp)", "i(vsupply_vn)", *probed]
    names = list(dict.fromkeys(names))
    data = np.outer([1.0, 2.0], 1.0 + np.arange(len(names)))
    plot = Plot("t", "Transient Analysis", "real", tuple(names), ("notype",) * len(names), data)
    return netlist, plot


def test_each_name_has_its_vector_and_unit(case):
    netlist, plot = case
    found = video_waveforms(plot, netlist)
    for name, (vector, sign, unit) in {
        "time": ("time", 1, "s"),
        "control": ("v(ctl)", 1, "V"),
        "driver_voltage": ("v(drive)", 1, "V"),
        "driver_current": ("i(vdrive)", 1, "A"),
        "port_p1": ("v(p1)", 1, "V"),
        "port_p2": ("v(p2)", 1, "V"),
        # ngspice counts a source's current into its positive terminal
        "supply_current_vp": ("i(vsupply_vp)", -1, "A"),
        "supply_current_vn": ("i(vsupply_vn)", -1, "A"),
    }.items():
        assert found[name][0].tolist() == (sign * plot[vector]).tolist()
        assert found[name][1] == unit


def test_every_probe_of_a_junction_has_a_name_of_its_own(case):
    netlist, plot = case
    found = video_waveforms(plot, netlist)
    names = [name for name in found if name.startswith(("charge", "current", "reverse"))]
    assert len(names) == len(netlist.probes)
    # a transistor has two junctions, and so two reverse voltages
    (instance,) = {probe.junction for probe in netlist.probes}
    assert {f"charge_{instance}", f"reverse_{instance}", f"reverse_{instance}_2"} <= set(names)
    for name, probe in zip(names, netlist.probes, strict=True):
        total = sum(scale * plot[vector] for scale, vector in probe.terms)
        assert found[name][0] == pytest.approx(total)
        assert found[name][1] == {"charge": "C", "current": "A", "reverse": "V"}[probe.quantity]


def test_names_of_carriers():
    assert [carrier_name(value) for value in (30e6, 433.92e6, 2.4e9)] == ["30MHz", "433.92MHz", "2.4GHz"]
    assert envelope_name("envelope", 3e7) != envelope_name("carrier", 3e7)


def test_text_keeps_nine_digits_of_every_sample():
    time = np.array([0.0, 1.234567891e-9])
    assert csv_text({"time [s]": time, "a [V]": time * 2.0}) == "time [s],a [V]\n0,0\n1.23456789e-09,2.46913578e-09\n"
