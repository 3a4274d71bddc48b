"""The distributed p-i-n against SciPy's own solution of the same diffusion equation.

dp/dt = D d2p/dx2 - p/tau on 0 < x < W, half of the current entering at each end (equal mobilities), so that by symmetry
one half has -D dp/dx = i/2 at its end and no flow in its middle; charge Q = integral of p, junction voltage from the
density at the end, resistance of the I-region as the integral of W^2/(mobility Q(x)) (J. F. White, 1982). SciPy
(`scipy.integrate.solve_ivp`, Radau) has 400 cells that grow towards the middle; the part has 40. 1 % in the storage
time, the charge that is left then and the resistance on the way.
"""

import numpy as np
import pytest
from scipy.integrate import solve_ivp

LIFETIME, WIDTH, MOBILITY, CURRENT = 1e-6, 150e-6, 0.18, 20e-3
DIFFUSION = 0.5 * MOBILITY * 0.02586493
STEP = 1e-9


def reference():
    """Return time, charge density at the end, charge and resistance after the current turned round."""
    faces = 0.5 * WIDTH * np.expm1(3.0 * np.linspace(0.0, 1.0, 401)) / np.expm1(3.0)
    size, middle = np.diff(faces), 0.5 * (faces[1:] + faces[:-1])
    between = DIFFUSION / np.diff(middle)

    def slope(_time, density, current):
        flow = np.concatenate([[0.5 * current], -between * np.diff(density), [0.0]])
        return -np.diff(flow) / size - density / LIFETIME

    def end(_time, density):
        return density[0] - 0.5 * CURRENT * middle[0] / DIFFUSION

    end.terminal = True
    matrix = np.stack([slope(0.0, column, 0.0) for column in np.eye(400)], axis=1)
    start = np.linalg.solve(matrix, -slope(0.0, np.zeros(400), CURRENT))
    run = solve_ivp(
        lambda t, p: slope(t, p, -CURRENT), (0.0, 3e-6), start, method="Radau", jac=matrix, events=end, rtol=1e-7,
        atol=1e-12 * start[0], dense_output=True,
    )  # fmt: skip
    assert run.status == 1

    def charge(time):
        return 2.0 * size @ run.sol(time)

    def resistance(time):
        return 2.0 * size @ (1.0 / run.sol(time)) / MOBILITY

    return float(run.t_events[0][0]), charge, resistance


def test_turn_off(body, transient):
    storage, charge, resistance = reference()
    deck = (
        body("junction", "pin_distributed")
        + body("driver", "ideal_current")
        + f"Xd a 0 pin_distributed cells=40 lifetime_exponent=0 mobility_exponent=0 lifetime={LIFETIME} width={WIDTH} mobility={MOBILITY} transit_time=1e-12 "
        + "capacitance=0 series_resistance=0 intrinsic_resistance=1e7\n"
        + f"Xi ctl a ideal_current on_current={CURRENT} off_current={CURRENT}\n"
        + f"Vctl ctl 0 PWL(0 1 {STEP} 1 {STEP + 1e-12} 0)\n"
    )
    plot = transient(deck, 1.2 * storage + STEP, storage / 500.0, "reltol=1e-5")
    time, voltage = plot["time"] - STEP, plot["v(xd.n)"]
    end = int(np.flatnonzero(voltage < 0.0)[0])
    found = np.interp(0.0, -voltage[end - 1 : end + 1], time[end - 1 : end + 1])
    assert found == pytest.approx(storage, rel=0.01)
    current = plot["i(v.xd.vsense)"]
    drop = (plot["v(xd.m0)"] - plot["v(xd.n)"]) / current
    for share in (-0.01, 0.1, 0.3, 0.5, 0.7, 0.9):
        moment = max(share, 0.0) * storage
        at = share * storage if share > 0.0 else -0.5 * STEP
        assert 1e-9 * np.interp(at, time, plot["v(xd.q)"]) == pytest.approx(charge(moment), rel=0.01)
        assert np.interp(at, time, drop) == pytest.approx(resistance(moment), rel=0.01)
    # far from what a lumped store would do
    lumped = LIFETIME * np.log(2.0)
    assert storage < 0.7 * lumped
