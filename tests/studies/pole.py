"""A gate whose RF transmission follows the voltage of one RC section: its envelope is a single pole.

The response of a pole to a ramp of duration T reaches 90 % at RC ln(10 (RC/T) (exp(T/RC) - 1)) after the ramp begins
(derived from the convolution of ramp and exponential), so that on_time is linear in R where T is short.
"""

import math

PART = """\
* transim part
* name: pole_gate
* role: path
* terminals: p1 p2 bias
* ports: p1 p2
* through: p1 p2
* bias: bias
* passes: biased
* summary: transmission proportional to the voltage of one RC section, for tests
* parameter: resistance | ohm | 1 kohm | 1 ohm .. 1 Mohm | of the section
* parameter: capacitance | F | 100 pF | 1 fF .. 1 uF | of the section
.subckt pole_gate p1 p2 bias resistance=1000 capacitance=1e-10
Rgate bias x {resistance}
Cgate x 0 {capacitance}
Rin p1 0 1000000
Bgate 0 p2 i = 0.01 * v(p1) * v(x)
.ends
"""
DESIGN = """\
title = "One pole"
[control]
low = "0 V"
high = "1 V"
edge = "20 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = "100 MHz"
[switch]
path = "pole_gate.cir"
[driver.source]
part = "ideal_voltage"
on_voltage = "1 V"
off_voltage = "0 V"
output_resistance = "1 mohm"
[limits]
on_time = { max = "LIMIT" }
"""
EDGE, CAPACITANCE = 20e-9, 100e-12


def exact_on_time(resistance):
    tau = (resistance + 1e-3) * CAPACITANCE
    # counted from the ramp's middle
    return tau * math.log(10.0 * tau / EDGE * math.expm1(EDGE / tau)) - EDGE / 2.0
