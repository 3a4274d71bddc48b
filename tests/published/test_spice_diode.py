"""Diffusion capacitance TT Id/(N Vt) and saturation current against temperature of the shipped junction_diode.

Source: P. Antognetti, G. Massobrio, Semiconductor Device Modeling with SPICE, 1988, chapter 1. Read: TT 1 us, 10 mA,
N 1 at 300.15 K: 386.62 nF; IS 1e-14 A, XTI 3, EG 1.11, N 1, nominal 300.15 K: 9.02855e-10 A at 125 degC, 2.06516e-20
A at -40 degC (worked out from the formula with CODATA constants, which ngspice has to the sixth digit). 1e-4.
"""

import math

import numpy as np
import pytest
from scipy.constants import Boltzmann, elementary_charge


def test_diffusion_capacitance(engine, body):
    deck = (
        "* diffusion\n" + body("junction", "junction_diode") + "Xd a 0 junction_diode transit_time=1e-6 "
        "junction_capacitance=0\nI1 0 a DC 10e-3 AC 1\n.options temp=27\n.ac lin 1 1e3 1e3\n.end\n"
    )
    plot = engine.run(deck, name="diffusion").plots[0]
    admittance = 1.0 / plot["v(a)"][0]
    assert admittance.imag / (2.0 * np.pi * 1e3) == pytest.approx(386.62e-9, rel=1e-4)


@pytest.mark.parametrize(
    ("celsius", "voltage", "saturation"), [(125.0, 0.3, 9.02855e-10), (-40.0, 0.75, 2.06516e-20), (27.0, 0.5, 1e-14)]
)
def test_saturation_current(engine, body, celsius, voltage, saturation):
    deck = (
        "* saturation\n" + body("junction", "junction_diode") + f"Xd a 0 junction_diode\nV1 a 0 DC {voltage}\n"
        f".options temp={celsius}\n.op\n.end\n"
    )
    current = -float(engine.run(deck, name="saturation").plots[0]["i(v1)"][0])
    thermal = Boltzmann * (celsius + 273.15) / elementary_charge
    assert current / math.expm1(voltage / thermal) == pytest.approx(saturation, rel=1e-4)
