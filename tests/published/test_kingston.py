"""Storage time of a diode whose charge diffuses through a long base: erf(sqrt(ts/tau)) = IF/(IF + IR).

Source: R. H. Kingston, "Switching time in junction diodes and junction transistors", Proc. IRE 42, 829-834, 1954, as in
D. A. Neamen, Semiconductor Physics and Devices, 4th edition, eq. 8.109. Read: 1.75 mA and 0.5 mA, tau 100 ns:
74.498 ns; IF = IR: 0.22747 tau. On the shipped part pin_distributed with an I-region of eight diffusion lengths, so that
each end is a long base, and driven by the shipped ideal_current; 2 %, for the division into 40 cells. The lumped formula tau ln(1 + IF/IR) would give 150.4 and 69.3 ns.
"""

import math

import numpy as np
import pytest
from scipy.special import erfinv

LIFETIME = 100e-9
LENGTH = math.sqrt(0.09 * 0.02586493 * LIFETIME)
STEP = 1e-9


@pytest.mark.parametrize(("forward", "reverse", "storage"), [(1.75e-3, 0.5e-3, 74.498e-9), (10e-3, 10e-3, 22.747e-9)])
def test_storage_time(body, transient, forward, reverse, storage):
    assert LIFETIME * erfinv(forward / (forward + reverse)) ** 2 == pytest.approx(storage, rel=1e-4)
    deck = (
        body("junction", "pin_distributed")
        + body("driver", "ideal_current")
        + f"Xd a 0 pin_distributed cells=40 lifetime_exponent=0 mobility_exponent=0 lifetime={LIFETIME} width={8 * LENGTH} mobility=0.18 transit_time=1e-12 "
        + "capacitance=0 series_resistance=0\n"
        + f"Xi ctl a ideal_current on_current={forward} off_current={reverse}\n"
        + f"Vctl ctl 0 PWL(0 1 {STEP} 1 {STEP + 1e-12} 0)\n"
    )
    plot = transient(deck, 1.2 * storage + STEP, storage / 500.0, "reltol=1e-5")
    # the junction's own voltage, without that of the I-region
    time, voltage = plot["time"] - STEP, plot["v(xd.n)"]
    end = int(np.flatnonzero(voltage < 0.0)[0])
    found = np.interp(0.0, -voltage[end - 1 : end + 1], time[end - 1 : end + 1])
    assert found == pytest.approx(storage, rel=0.02)
