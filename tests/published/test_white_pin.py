"""Resistance of the I-region: Q = IF tau, R = W^2/((mun + mup) Q).

Source: J. F. White, Microwave Semiconductor Engineering, 1982. Read: 50 um, 0.18 m^2/Vs, 10 mA, 1 us: 1.38889 ohm;
100 um, 100 mA, 5 us: 0.111111 ohm. On the shipped part pin_lumped, by ngspice's AC impedance at 1 GHz, where the RF
moves no charge (1/(2 pi f tau) is 2e-4, in quadrature), and by its DC voltage. 1e-4: the junction itself is some
microohm.
"""

import pytest


@pytest.mark.parametrize(
    ("width", "current", "lifetime", "resistance"), [(50e-6, 10e-3, 1e-6, 1.38889), (100e-6, 100e-3, 5e-6, 0.111111)]
)
def test_resistance(engine, body, width, current, lifetime, resistance):
    deck = (
        "* I-region\n" + body("junction", "pin_lumped") + f"Xd a 0 pin_lumped lifetime_exponent=0 mobility_exponent=0 width={width} lifetime={lifetime} "
        "mobility=0.18 transit_time=1e-12 capacitance=0 series_resistance=0 intrinsic_resistance=1e9\n"
        f"I1 0 a DC {current} AC 1\n.control\nset appendwrite\nop\nwrite region.raw all\nac lin 1 1e9 1e9\n"
        "write region.raw all\nquit 0\n.endc\n.end\n"
    )
    bias, response = engine.run(deck, name="region", writes_raw=True).plots
    # the part puts 0.1 mohm in series with every series resistance, zero included
    assert response["v(a)"][0].real == pytest.approx(resistance + 1e-4, rel=1e-4)
    drop = float((bias["v(xd.m)"] - bias["v(xd.n)"])[0].real)
    assert drop / current == pytest.approx(resistance, rel=1e-4)
    assert 1e-9 * float(bias["v(xd.q)"][0].real) == pytest.approx(current * lifetime, rel=1e-5)
