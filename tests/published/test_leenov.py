"""Resistance of an I-region whose charge is not even: R = (2 Vt/IF) sinh u atan(sinh u), u = W/2L, L = sqrt(mu Vt tau).

Source: D. Leenov, "The silicon PIN diode as a microwave radar protector at megawatt levels", IEEE Trans. Electron
Devices 11(2), 53-61, 1964 (from memory, derived anew: 1/p integrated over p = p0 cosh(x/L)). Read: W 200 um, 50 mA,
tau 1 us, mu 0.09 m^2/Vs for each carrier: 5.34203 ohm, where W^2/(2 mu IF tau) would give 4.44444 ohm. On the shipped
part pin_distributed with 40 cells, by its DC voltage and by ngspice's AC impedance at 10 GHz, where the RF moves no
charge; 1 %, and twice the accuracy with every doubling of the cells shows that the cells are what is left.
"""

import numpy as np
import pytest

PART = "Xd a 0 pin_distributed lifetime_exponent=0 mobility_exponent=0 transit_time=1e-13 capacitance=0 series_resistance=0 intrinsic_resistance=1e9 "


def resistance(engine, body, values, current):
    """Return the resistance of the I-region by DC and by AC [ohm]."""
    deck = (
        "* I-region\n" + body("junction", "pin_distributed") + PART + values + "\n"
        f"I1 0 a DC {current} AC 1\n.control\nset appendwrite\nop\nwrite region.raw all\nac lin 1 1e10 1e10\n"
        "write region.raw all\nquit 0\n.endc\n.end\n"
    )
    bias, response = engine.run(deck, name="region", writes_raw=True).plots
    assert 1e-9 * float(bias["v(xd.q)"][0].real) > 0.0
    drop = float((bias["v(xd.m0)"] - bias["v(xd.n)"])[0].real)
    return drop / current, float(response["v(a)"][0].real)


def test_resistance(engine, body):
    thermal = 0.02586493
    u = 200e-6 / 2.0 / np.sqrt(0.09 * thermal * 1e-6)
    assert 2.0 * thermal / 50e-3 * np.sinh(u) * np.arctan(np.sinh(u)) == pytest.approx(5.34203, rel=1e-3)
    found = {n: resistance(engine, body, f"width=200e-6 lifetime=1e-6 mobility=0.18 cells={n}", 50e-3) for n in (10, 20, 40)}
    for value in found[40]:
        assert value == pytest.approx(5.34203, rel=0.01)
    errors = [abs(found[n][0] / 5.34203 - 1.0) for n in (10, 20, 40)]
    assert errors[0] > 2.0 * errors[1]
    assert errors[1] > 2.0 * errors[2]


def test_thin_region_is_that_of_the_lumped_part(engine, body):
    # White, 1982: 50 um, 0.18 m^2/Vs, 10 mA, 1 us: 1.38889 ohm; a lifetime of 1 ms at 10 uA makes the same charge even
    for value in resistance(engine, body, "width=50e-6 lifetime=1e-3 mobility=0.18 cells=10", 10e-6):
        assert value == pytest.approx(1.38889, rel=2e-3)
