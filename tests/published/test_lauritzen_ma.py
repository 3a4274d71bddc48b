"""Reverse recovery of the lumped p-i-n: i = (qE - qM)/TM, dqM/dt = i - qM/tau.

Source: P. O. Lauritzen, C. L. Ma, "A simple diode model with reverse recovery", IEEE Trans. Power Electron. 6(2),
188-191, 1991, eqs. 1 to 5. Ramp: IRM = a (tau - trr')(1 - exp(-T1/tau)), 1/trr' = 1/tau + 1/TM, numbers for
tau 100 ns, TM 25 ns, IF 10 mA, a 1 A/us worked out from it: T0 10 ns, T1 31.780 ns, IRM 21.780 mA, trr (to 10 %) 67.832
ns. Step (derived from the same equations, no published number): ts = tau ln[(1 + IF/IR)/(1 + TM/tau)] = 47.000 ns for
IF = IR, to 10 % 93.052 ns. Read on the current of the shipped part pin_lumped. 0.2 %: while
the junction falls from its forward voltage to the clamp, 0.05 pF takes 0.08 pC of the 250 pC.
"""

import numpy as np
import pytest

PIN = "Xd a 0 pin_lumped lifetime_exponent=0 mobility_exponent=0 lifetime=1e-7 transit_time=25e-9 capacitance=5e-14 series_resistance=0 width=1e-5\n"
START = 1e-9


def first_below(time, value, level, after=0.0):
    """Return when a waveform first falls to a level, by a chord."""
    place = int(np.flatnonzero((value <= level) & (time > after))[0])
    return np.interp(level, value[[place, place - 1]], time[[place, place - 1]])


def test_step(body, transient):
    deck = (
        body("junction", "pin_lumped")
        + body("driver", "ideal_current")
        + PIN
        + "Xi ctl a ideal_current on_current=0.01 off_current=0.01 compliance=1\n"
        + f"Vctl ctl 0 PWL(0 1 {START} 1 {START + 1e-12} 0)\n"
    )
    plot = transient(deck, 120e-9, 0.05e-9, "reltol=1e-5")
    time, reverse = plot["time"] - START, -plot["i(v.xd.vsense)"]
    # the diode lets go when its emitter charge qE = qM + TM i is gone: qM is TM IR then
    assert first_below(time, 1e-9 * plot["v(xd.q)"], 25e-9 * 0.01) == pytest.approx(47.000e-9, rel=2e-4)
    assert reverse[(time > 1e-9) & (time < 46e-9)] == pytest.approx(0.01, rel=1e-3)
    assert np.interp(47.5e-9, time, reverse) < 0.0099
    assert first_below(time, reverse, 1e-3, after=50e-9) == pytest.approx(93.052e-9, rel=2e-3)


def test_ramp(body, transient):
    # a current ramp that a clamp takes over once the diode blocks
    deck = (
        body("junction", "pin_lumped")
        + PIN
        + f"Iramp 0 a PWL(0 10e-3 {START} 10e-3 {START + 100e-9} -90e-3)\n"
        + "Dlow low a clamp\nVlow low 0 -1\n.model clamp D(is=1e-14 n=0.05)\n"
    )
    plot = transient(deck, 100e-9, 0.02e-9, "reltol=1e-5")
    time, reverse = plot["time"] - START, -plot["i(v.xd.vsense)"]
    peak = int(reverse.argmax())
    zero = time[np.flatnonzero(reverse > 0.0)[0]]
    assert zero == pytest.approx(10e-9, abs=0.03e-9)
    assert reverse[peak] == pytest.approx(21.780e-3, rel=2e-3)
    assert time[peak] == pytest.approx(31.780e-9, rel=2e-3)
    tenth = first_below(time, reverse, 0.1 * reverse[peak], after=time[peak])
    assert tenth - 10e-9 == pytest.approx(67.832e-9, rel=2e-3)
