"""Storage time of a charge-controlled diode: ts = tau ln(1 + IF/IR).

Source: J. L. Moll, S. Krakauer, R. Shen, "P-N junction charge-storage diodes", Proc. IRE 50, 43-53, 1962; the formula
is from memory. Read: tau 100 ns, IF = IR = 10 mA: 69.315 ns; tau 1 us, 10 mA and 6 mA: 980.83 ns. The shipped part
junction_diode is driven by the shipped ideal_current. 1e-4: the charge that is left while the junction falls from its
forward voltage to zero is below 1e-4 of what was stored, and steps are a thousandth of ts.
"""

import numpy as np
import pytest

EDGE = 1e-12


@pytest.mark.parametrize(
    ("lifetime", "forward", "reverse", "storage"),
    [(100e-9, 10e-3, 10e-3, 69.315e-9), (1e-6, 10e-3, 6e-3, 980.83e-9)],
)
def test_storage_time(body, transient, lifetime, forward, reverse, storage):
    deck = (
        body("junction", "junction_diode")
        + body("driver", "ideal_current")
        + f"Xd a 0 junction_diode transit_time={lifetime} junction_capacitance=0\n"
        + f"Xi ctl a ideal_current on_current={forward} off_current={reverse}\n"
        + f"Vctl ctl 0 PWL(0 1 1e-9 1 {1e-9 + EDGE} 0)\n"
    )
    plot = transient(deck, 1.2 * storage, storage / 1000.0)
    time, voltage = plot["time"] - 1e-9 - EDGE / 2.0, plot["v(a)"]
    end = int(np.flatnonzero(voltage < 0.0)[0])
    found = np.interp(0.0, -voltage[end - 1 : end + 1], time[end - 1 : end + 1])
    assert found == pytest.approx(storage, rel=1e-4)
    # charge out of the terminal: IR ts
    assert voltage[0] == pytest.approx(0.0258649 * np.log(forward / 1e-14), rel=1e-3)
