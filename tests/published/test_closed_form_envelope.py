"""RF envelope of a charge-controlled p-i-n diode, end to end: design file, decks, ngspice, envelope, metrics.

Source: charge control and R = W^2/((mun + mup) Q), as in J. F. White, Microwave Semiconductor Engineering, 1982; the
envelope that follows is derived and has no published numbers: |S21| = 2 Z0/(2 Z0 + R) in series, 2 R/(2 R + Z0) in
shunt, R = k/Q(t), k = W^2/(mun + mup); on: Q = IF tau (1 - exp(-t/tau)); off: Q = (IF + IR) tau exp(-t/tau) - IR tau.
Read: W 50 um, 0.18 m^2/Vs, tau 1 us, IF = IR = 10 mA, Z0 50 ohm. Series: on t10 1.5209, t90 116.26 ns, off t90
589.01, t10 691.63 ns. Shunt, absolute |S21|: falling t90 6.1920, t50 57.158, rising t50 639.08, t90 686.99 ns, floor
0.052632.

1 %: the closed form has no feed, no junction voltage and no DC blocks. At 1.52 ns the I-region still has 900 ohm and
9 V: the DC blocks of shipped paths, 0.1 pF at least, would take 6 % of the 15 pC that are there. So the paths are the
user's own, written here, with blocks of 1 fF at 100 THz (which no design file may ask for), and a clamp that takes
the reverse current once the charge is gone. An I-region of 10 kohm without charge keeps the forward voltage below 31
V, where the part's breakdown diode would conduct; it stands in the closed form as a conductance beside Q/k, worth 9 %
of the first instant of the series diode, 2 % of that of the shunt diode and less than 0.5 % of the others. The edge
of 3 ns takes the current from -10 to 10 mA: the charge grows from its middle, and is a quarter of the edge late after
a rise.
"""

import json

import numpy as np
import pytest

from transim.cli import main
from transim.design.toml import read_design
from transim.study.run import run_design

DESIGN = """
title = "closed form"
parts = "parts"
[control]
low = "0 V"
high = "1 V"
edge = "3 ns"
on_for = "10 us"
period = "12 us"
[carrier]
frequency = "1 THz"
impedance = "50 ohm"
[switch]
path = "{path}"
junction = "ideal"
{more}
[junction.ideal]
part = "pin_lumped"
lifetime = "1 us"
transit_time = "1 ps"
width = "50 um"
mobility = "0.18 m^2/Vs"
capacitance = "0 F"
series_resistance = "10 mohm"
intrinsic_resistance = "{intrinsic:.0f} ohm"
[driver.current]
part = "ideal_current"
on_current = "10 mA"
off_current = "10 mA"
compliance = "{compliance}"
[numerics]
steps = 5000
"""
PATH = """* transim part
* name: {kind}_bare
* role: path
* terminals: p1 p2 bias
* ports: p1 p2
* through: p1 p2
* bias: bias
* passes: {passes}
* slot: junction | a k | the junction
* summary: a junction, two small DC blocks and a clamp
* parameter: dc_block | F | 1 fF | 0.1 fF .. 1 nF | series capacitor at each RF port
.subckt {kind}_bare p1 p2 bias dc_block=1e-15
Cin p1 a {{dc_block}}
Rfeed bias a 1
Dclamp low a clamp
Vlow low 0 -12
.model clamp D(is=1e-14 n=0.05)
{rest}
.ends
"""
REST = {
    "series": "Xj a k junction\nCout k p2 {dc_block}\nLreturn k 0 1e-12",
    "shunt": "Xj a 0 junction\nCout a p2 {dc_block}",
}
SHIPPED = """
dc_block = "0.1 pF"
bypass = "0 F"
feed_resistance = "1 ohm"
feed_inductance = "0 H"
"""
RETURN = """
return_resistance = "1 ohm"
return_inductance = "1 nH"
return_capacitance = "0 F"
return_loss = "1 Tohm"
"""


@pytest.fixture(scope="module")
def results(engine, tmp_path_factory):
    """Return a function that runs one of the designs, once."""
    done = {}

    def run(path):
        if path not in done:
            folder = tmp_path_factory.mktemp(path)
            (folder / "parts").mkdir()
            for kind, passes in (("series", "biased"), ("shunt", "unbiased")):
                text = PATH.format(kind=kind, passes=passes, rest=REST[kind])
                (folder / "parts" / f"{kind}_bare.cir").write_text(text)
            more = {"series_single": SHIPPED + RETURN, "shunt_single": SHIPPED}.get(path, "")
            intrinsic, compliance = (INTRINSIC, "100 V") if path.endswith("bare") else (2e3, "20 V")
            file = folder / "closed_form.toml"
            file.write_text(DESIGN.format(path=path, more=more, intrinsic=intrinsic, compliance=compliance))
            design = read_design(file)
            if path.endswith("bare"):
                carrier = design.carrier.model_copy(update={"frequency": (1e14,)})
                design = design.model_copy(update={"carrier": carrier})
            done[path] = run_design(design, engine), file
        outcome, file = done[path]
        (case,) = outcome.cases
        (result,) = case.results
        assert result.faults == ()
        return result, case, file

    return run


LIFETIME, CURRENT, Z0, K = 1e-6, 10e-3, 50.0, (50e-6) ** 2 / 0.18
INTRINSIC = 10e3
PULSE, EDGE = 10e-6, 3e-9


def filling(charge):
    """Return when the charge is there after the middle of the edge on which the current turns forward."""
    return EDGE / 4.0 - LIFETIME * np.log1p(-charge / (CURRENT * LIFETIME))


def emptying(charge):
    """Return when the charge is left after the current has turned round."""
    return LIFETIME * np.log(2.0 * CURRENT * LIFETIME / (charge + CURRENT * LIFETIME))


def series_charge(share, intrinsic=np.inf):
    """Return the charge at which a series diode passes a share of its final |S21|."""
    full = K / (CURRENT * LIFETIME)
    return K * (1.0 / ((2.0 * Z0 + full) / share - 2.0 * Z0) - 1.0 / intrinsic)


def shunt_charge(level, intrinsic=np.inf):
    """Return the charge at which a shunt diode leaves a level of |S21|."""
    return K * (2.0 * (1.0 - level) / (level * Z0) - 1.0 / intrinsic)


def series_instants(intrinsic=np.inf):
    low, high = series_charge(0.1, intrinsic), series_charge(0.9, intrinsic)
    return {"on_delay": filling(low), "on_time": filling(high), "off_delay": emptying(high), "off_time": emptying(low)}


SERIES = {"on_delay": 1.5209e-9, "on_time": 116.26e-9, "off_delay": 589.01e-9, "off_time": 691.63e-9}


ORDER = (filling, filling, emptying, emptying)


def test_closed_form():
    late = dict.fromkeys(("on_delay", "on_time"), EDGE / 4.0)
    steps = {name: instant - late.get(name, 0.0) for name, instant in series_instants().items()}
    assert steps == pytest.approx(SERIES, rel=5e-5)
    shunt = [function(shunt_charge(level)) for function, level in zip(ORDER, (0.9, 0.5, 0.5, 0.9), strict=True)]
    shunt = [shunt[0] - EDGE / 4.0, shunt[1] - EDGE / 4.0, *shunt[2:]]
    assert shunt == pytest.approx([6.1920e-9, 57.158e-9, 639.08e-9, 686.99e-9], rel=5e-5)


@pytest.mark.parametrize("name", SERIES)
def test_series(results, name):
    found = results("series_bare")[0].figures[name].value
    assert found == pytest.approx(series_instants(INTRINSIC)[name], rel=0.01)


@pytest.mark.parametrize("name", ["on_time", "off_delay", "off_time"])
def test_series_by_the_shipped_path(results, name):
    found = results("series_single")[0].figures[name].value
    assert found == pytest.approx(SERIES[name], rel=0.01)


def test_series_by_the_command_line(results, capsys):
    file = results("series_single")[2]
    assert main(["run", str(file), "--json", "-"]) == 0
    document = json.loads(capsys.readouterr().out)
    (result,) = document["results"]
    for name in ("on_time", "off_delay", "off_time"):
        assert result["metrics"][name]["value"] == pytest.approx(SERIES[name], rel=0.01)


def level(case, timeline_lead):
    """Return time from the rising edge of the command and |S21|."""
    (waveform,) = case.throws[0].envelopes.values()
    return waveform.time - timeline_lead, np.abs(waveform.value)


def crossing(time, value, threshold, start, stop):
    """Return when a monotonic stretch of a waveform has a level."""
    inside = (time > start) & (time < stop)
    time, value = time[inside], value[inside]
    rising = value[-1] > value[0]
    return np.interp(threshold, value if rising else value[::-1], time if rising else time[::-1])


@pytest.mark.parametrize("path", ["shunt_bare", "shunt_single"])
def test_shunt(results, path):
    result, case, _ = results(path)
    time, value = level(case, PULSE / 50.0 + EDGE)
    intrinsic = INTRINSIC if path == "shunt_bare" else 2e3
    for share in (0.9, 0.5):
        charge = shunt_charge(share, intrinsic)
        # the shipped path's DC blocks take 0.5 pC of the 62 pC at the first instant
        if path == "shunt_bare" or share == 0.5:
            assert crossing(time, value, share, 2e-9, 2e-6) == pytest.approx(filling(charge), rel=0.01)
        assert crossing(time - PULSE, value, share, 0.1e-6, 0.69e-6) == pytest.approx(emptying(charge), rel=0.01)
    assert 10.0 ** (-result.figures["isolation"].value / 20.0) == pytest.approx(0.052632, rel=0.01)


def test_charge(results):
    for path in ("series_bare", "shunt_bare"):
        assert results(path)[0].figures["junction_charge"].value == pytest.approx(10e-9, rel=1e-3)
