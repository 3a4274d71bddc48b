"""Smallest reverse bias that holds off the RF, and charge margin of a junction that is on.

Sources: R. H. Caverly, G. Hiller, IEEE Trans. Microwave Theory Tech. 38(12), 1990: |Vdc| = V/sqrt(1 + [(0.0142 f W^2/
(V sqrt D)) sqrt(1 + (0.056 V sqrt D/W)^2)]^2), f in MHz, W in mils, V the peak. Coefficients from memory. Read: 100 V,
10 MHz, 4 mil: 99.924 V; 500 V, 300 MHz, 10 mil: 183.59 V.
J. F. White, Microwave Semiconductor Engineering, 1982: charge margin 2 pi f IF tau/Ipk. Read: 10 W in 50 ohm (0.63246 A),
100 MHz, 10 mA, 1 us: 9.9346.

End to end the design file is run. The hold-off cases: a shunt junction with little capacitance on a matched line, so
that the line's own peak, V = sqrt(2 P Z0), stands across it: 100 V is 100 W, 500 V is 2.5 kW. 0.1 %: capacitance,
choke and DC blocks take that much from the peak. The charge case: a series junction, fed 10 mA by a current source for
long, 1e-3 beside its feed and return.
"""

import math

import pytest

from transim.design.toml import read_design
from transim.measure.holdoff import smallest_reverse_bias
from transim.study.simulate import simulate

MIL = 25.4e-6
PUBLISHED = [(100.0, 10e6, 4.0, 99.924), (500.0, 300e6, 10.0, 183.59)]

DESIGN = """
title = "rated by its bias"
[control]
low = "0 V"
high = "1 V"
edge = "5 ns"
on_for = "{on_for}"
period = "{period}"
[carrier]
frequency = "{frequency} Hz"
level = "{level} dBm"
[switch]
path = "{path}"
junction = "rated"
dc_block = "{block}"
feed_resistance = "1 ohm"
feed_inductance = "100 uH"
feed_capacitance = "0 F"
feed_loss = "1 Tohm"
{more}
[junction.rated]
part = "pin_lumped"
lifetime = "1 us"
width = "{width} m"
capacitance = "1 fF"
series_resistance = "1 mohm"
breakdown_voltage = "2 kV"
[driver.reference]
{driver}
"""
RETURN = """
return_resistance = "1 ohm"
return_inductance = "100 uH"
return_capacitance = "0 F"
return_loss = "1 Tohm"
"""


def stressed(engine, folder, **values):
    """Return the envelope's figures; the probes of the turn-on belong to other tests."""
    file = folder / "rated.toml"
    values = {"on_for": "300 us", "period": "600 us", "block": "100 nF", "more": ""} | values
    file.write_text(DESIGN.format(**values))
    design = read_design(file)
    # a part's lifetime is that at 25 degC
    run = simulate(design, design.drivers[0], 25.0, engine, ["envelope"], checks="start")
    assert run.results[0].faults == ()
    return run.results[0].figures


@pytest.mark.parametrize(("peak", "frequency", "mils", "bias"), PUBLISHED)
def test_relation(peak, frequency, mils, bias):
    assert smallest_reverse_bias(peak, frequency, mils * MIL) == pytest.approx(bias, rel=1e-4)


@pytest.mark.parametrize(("peak", "frequency", "mils", "bias"), PUBLISHED)
def test_margins_of_a_run(engine, tmp_path, peak, frequency, mils, bias):
    level = 10.0 * math.log10(peak**2 / (2.0 * 50.0) / 1e-3)
    driver = f'part = "ideal_voltage"\noff_voltage = "{-bias:g} V"\non_voltage = "5 V"'
    figures = stressed(
        engine, tmp_path, path="shunt_single", frequency=frequency, level=level, width=mils * MIL, driver=driver
    )
    # at exactly the published bias nothing is left, and the peak is not held off by the whole difference
    assert figures["holdoff_bias_margin"].value == pytest.approx(0.0, abs=1e-3 * bias)
    assert figures["holdoff_peak_margin"].value == pytest.approx(bias - peak, abs=1e-3 * peak)


def test_half_of_the_duty_counts_as_a_lower_peak():
    # the duty factor stands beside the peak as V sqrt(D) and leaves the numerator alone
    whole, half = (smallest_reverse_bias(500.0, 300e6, 10 * MIL, duty) for duty in (1.0, 0.25))
    term = 0.0142 * 300.0 * 10.0**2 / 250.0 * math.sqrt(1.0 + (0.056 * 250.0 / 10.0) ** 2)
    assert half == pytest.approx(500.0 / math.sqrt(1.0 + term**2), rel=1e-9)
    assert half < whole


def test_charge_margin_of_a_run(engine, tmp_path):
    driver = 'part = "ideal_current"\non_current = "10 mA"\noff_current = "10 mA"\ncompliance = "2 V"'
    figures = stressed(
        engine,
        tmp_path,
        path="series_single",
        frequency=100e6,
        level=40.0,
        width=10e-6,
        driver=driver,
        more=RETURN,
        block="10 nF",
    )
    # 10 W in 50 ohm: 0.63246 A through a series junction of next to no resistance
    assert figures["charge_margin"].value == pytest.approx(9.9346, rel=2e-3)
