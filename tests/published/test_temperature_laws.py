"""Temperature laws of the junctions: mobility, lifetime, saturation current.

Sources: silicon mobility of N. D. Arora, J. R. Hauser, D. J. Roulston, IEEE Trans. Electron Devices 29(2), 292-295, 1982 (coefficients from
memory) at 1e14 per cm^3: 1338.9 and 461.1 cm^2/Vs at 300 K, 907.6 and 323.2 at 358.15 K; the parts' one power law stays
within 1.5 % of the sum from -40 to 125 degC. Saturation current of SPICE (IS 1e-14 A, XTI 3, EG 1.11 V, N 1, nominal
300.15 K): 9.02855e-10 A at 125 degC, 2.06516e-20 A at -40 degC. Lifetime (T/300 K)^1.5, common practice.
"""

import math

import numpy as np
import pytest

#: Where lifetime and mobility are the parameters' own values; IS is at SPICE's nominal 300.15 K.
NOMINAL = 298.15


def arora(kelvin):
    """Return the sum of electron and hole mobility [cm^2/Vs]."""
    t, doping = kelvin / 300.0, 1e14
    share = 0.88 * t**-0.146
    electrons = 88.0 * t**-0.57 + 7.4e8 * kelvin**-2.33 / (1.0 + share * doping / (1.26e17 * t**2.4))
    holes = 54.3 * t**-0.57 + 1.36e8 * kelvin**-2.23 / (1.0 + share * doping / (2.35e17 * t**2.4))
    return electrons + holes


def steady(engine, body, part, celsius, current=1e-3):
    """Return charge, drop across the I-region and junction voltage of a thin region under a constant current."""
    inner = "xd.m" if part == "pin_lumped" else "xd.m0"
    deck = (
        "* steady\n" + body("junction", part) + f"Xd a 0 {part} width=5e-6 lifetime=1e-5 series_resistance=0 "
        f"transit_time=1e-12\nI1 0 a DC {current}\n.options temp={celsius}\n.control\nop\nwrite steady.raw all\nquit 0\n"
        ".endc\n.end\n"
    )
    plot = engine.run(deck, name="steady", writes_raw=True).plots[0]
    charge, high, low = (float(plot[f"v({name})"][0].real) for name in ("xd.q", inner, "xd.n"))
    return 1e-9 * charge, high - low, low


def test_mobility_follows_arora():
    assert arora(300.0) == pytest.approx(1338.9 + 461.1, abs=0.2)
    assert arora(358.15) == pytest.approx(907.6 + 323.2, abs=0.2)
    for kelvin in np.linspace(233.15, 398.15, 12):
        assert arora(kelvin) / arora(NOMINAL) == pytest.approx((kelvin / NOMINAL) ** -2.15, rel=0.015)


@pytest.mark.parametrize("part", ["pin_lumped", "pin_distributed"])
@pytest.mark.parametrize(("celsius", "saturation"), [(-40.0, 2.06516e-20), (27.0, 1e-14), (125.0, 9.02855e-10)])
def test_steady_state(engine, body, part, celsius, saturation):
    kelvin = celsius + 273.15
    charge, drop, junction = steady(engine, body, part, celsius)
    lifetime = 1e-5 * (kelvin / NOMINAL) ** 1.5
    assert charge == pytest.approx(1e-3 * lifetime, rel=1e-3)
    mobility = 0.18 * arora(kelvin) / arora(NOMINAL)
    # a distributed charge of 0.03 diffusion lengths is even to 0.1 %
    assert drop / 1e-3 == pytest.approx(25e-12 / (mobility * charge), rel=0.017)
    thermal = 8.617333262e-5 * kelvin
    assert junction == pytest.approx(thermal * math.log(1e-3 / saturation), abs=2e-4)
