"""Ringing solution against scipy's integration of the same complex envelope equations.

Outside reference: scipy.integrate.solve_ivp (DOP853, 1e-8) on equations of motion written out here, one carrier period
averaged as the solution's docstring says. The resonator: node m between two ports behind 500 ohm each, L and C to
ground and one element that changes in time.
"""

from functools import cache

import numpy as np
import pytest
from scipy.integrate import cumulative_simpson, solve_ivp

from transim.circuit.elements import read_listing
from transim.circuit.netlist import RfPort
from transim.envelope.bias import Bias
from transim.envelope.frozen import solve_frozen
from transim.envelope.linearise import linearise
from transim.envelope.ringing import solve_ringing

CARRIER = 100e6
OMEGA = 2.0 * np.pi * CARRIER
PORTS = (RfPort("p1", "vport_p1", 50.0), RfPort("p2", "vport_p2", 50.0))
TERMINATION = ["rport_p1 ep1 p1 50", "rport_p2 ep2 p2 50", "vport_p1 ep1 0 dc 0", "vport_p2 ep2 0 dc 0"]
L, C, COUPLING = 30e-9, 80e-12, 500.0
RESONATOR = [f"rin p1 m {COUPLING}", f"rout m p2 {COUPLING}", f"l1 m 0 {L}"]
LOSS = 2.0 / (COUPLING + 50.0)
#: Volt at port 2 a volt of m, times 2 for S; the source drives m through its own impedance and the coupling.
OUT, DRIVE = 2.0 * 50.0 / (COUPLING + 50.0), 1.0 / (COUPLING + 50.0)


def network(lines, vectors, time):
    text = "\n".join(f" {k} : {line}" for k, line in enumerate([*RESONATOR, *lines, *TERMINATION]))
    return linearise(read_listing(text), Bias(vectors, time), 27.0, [port.source for port in PORTS])


def ringing(changing, carrier=CARRIER):
    return solve_ringing(changing, PORTS, [carrier], solve_frozen(changing, PORTS, [carrier]).s)


def conducting(conductance, time, capacitance=C):
    """Return a resonator with a conductance that follows given values."""
    lines = [f"c1 m 0 {capacitance}", "b1 m 0 i= v(m) * v(q)", "rq q 0 1e3", "v9 q 0 1"]
    return network(lines, {"v(q)": conductance, "v(m)": np.zeros(time.size)}, time)


def reference(conductance, charge_rate, capacitance, time):
    """Integrate d(Cv)/dt + (g + jwC) v + i = s, L di/dt + jwL i = v; average over one period around each time."""

    def motion(t, y):
        v, i = y
        dv = (DRIVE - i - (LOSS + conductance(t) + charge_rate(t) + 1j * OMEGA * capacitance(t)) * v) / capacitance(t)
        return [dv, v / L - 1j * OMEGA * i]

    v0 = DRIVE / (LOSS + conductance(0.0) + 1j * OMEGA * capacitance(0.0) + 1.0 / (1j * OMEGA * L))
    fine = np.linspace(time[0], time[-1], 20001)
    start = np.array([v0, v0 / (1j * OMEGA * L)])
    found = solve_ivp(motion, (time[0], time[-1]), start, "DOP853", fine, rtol=1e-8, atol=1e-12, max_step=2e-9)
    v = OUT * found.y[0]
    area = cumulative_simpson(v.real, x=fine, initial=0.0) + 1j * cumulative_simpson(v.imag, x=fine, initial=0.0)
    first = np.maximum(time - 0.5 / CARRIER, time[0])
    last = np.minimum(time + 0.5 / CARRIER, time[-1])
    return (np.interp(last, fine, area) - np.interp(first, fine, area)) / (last - first)


def pulse(t):
    """Rise and fall within some ns, at 100 and 500 ns."""
    return 0.25 * (1.0 + np.tanh((t - 100e-9) / 3e-9)) * (1.0 - np.tanh((t - 500e-9) / 3e-9))


def uneven(points, stop=1e-6):
    """Instants that are up to a third of a step away from equal ones; the same at every call."""
    shift = np.random.default_rng(7).uniform(-1 / 3, 1 / 3, points)
    shift[[0, -1]] = 0.0
    return (np.arange(points) + shift) * stop / (points - 1)


@cache
def deviation(points):
    time = uneven(points)
    found = ringing(conducting(30e-3 * pulse(time) + 1e-6, time))
    expected = reference(lambda t: 30e-3 * pulse(t) + 1e-6, lambda _t: 0.0, lambda _t: C, time)
    return np.abs(found.s[0, :, 1, 0] - expected).max() / np.abs(expected).max()


def test_resonator_with_a_switched_conductance():
    assert deviation(2001) < 2e-3


def test_error_falls_with_the_square_of_the_step():
    # at least by three where the step is halved; BDF2 is of second order
    assert deviation(1001) / deviation(2001) > 3.0


def test_the_switched_resonator_rings_at_all():
    time = uneven(2001)
    changing = conducting(30e-3 * pulse(time) + 1e-6, time)
    frozen = solve_frozen(changing, PORTS, [CARRIER]).s[0, :, 1, 0]
    assert np.abs(frozen - ringing(changing).s[0, :, 1, 0]).max() > 0.1 * np.abs(frozen).max()


def test_resonator_with_a_diode_as_capacitor():
    """Charge counts: the current of a junction is d(C v)/dt, with C = CJO (1 - v/VJ)^-M."""
    time = uneven(2001)

    def voltage(t):
        return -6.0 + 5.5 * pulse(t)

    def junction(t):
        return 60e-12 / np.sqrt(1.0 - voltage(t) / 0.8)

    lines = ["c1 m 0 40e-12", "d1 m 0 dm", ".model dm d(is=1e-20 cjo=60p vj=0.8 m=0.5)"]
    changing = network(lines, {"@d1[vd]": voltage(time)}, time)
    found = ringing(changing).s[0, :, 1, 0]
    step = 1e-12
    expected = reference(
        lambda _t: 0.0,
        lambda t: (junction(t + step) - junction(t - step)) / (2.0 * step),
        lambda t: 40e-12 + junction(t),
        time,
    )
    assert np.abs(found - expected).max() < 3e-3 * np.abs(expected).max()


def test_behavioural_capacitor_carries_no_charge_of_its_change():
    """Ngspice makes c = '...' into C dv/dt, not d(C v)/dt, and so does the solution."""
    time = uneven(2001)

    def capacitance(t):
        return 80e-12 + 30e-12 * pulse(t)

    lines = ["e1 x 0 0 m 1", "c1 x 0 1", "b1 m 0 i= i(e1) * (1p * v(q))", "rq q 0 1e3", "v9 q 0 1"]
    vectors = {"v(q)": 1e12 * capacitance(time), "i(e1)": np.zeros(time.size)}
    found = ringing(network(lines, vectors, time)).s[0, :, 1, 0]
    expected = reference(lambda _t: 0.0, lambda _t: 0.0, capacitance, time)
    assert np.abs(found - expected).max() < 3e-3 * np.abs(expected).max()


def test_a_conductance_that_goes_in_one_step():
    """Node discharges with its own time constant, whatever the step that let go: closed form of one pole."""
    time = np.arange(0.0, 200e-9, 0.1e-9)
    conductance = np.where(time < 100e-9, 1e3, 1e-9)
    lines = ["c1 m 0 80e-12", "b1 m 0 i= v(m) * v(q)", "rq q 0 1e3", "v9 q 0 1"]
    text = "\n".join(f" {k} : {line}" for k, line in enumerate([*RESONATOR[:2], *lines, *TERMINATION]))
    vectors = {"v(q)": conductance, "v(m)": np.zeros(time.size)}
    single = linearise(read_listing(text), Bias(vectors, time), 27.0, [port.source for port in PORTS])
    found = ringing(single).s[0, :, 1, 0]
    rate = LOSS / 80e-12 + 1j * OMEGA
    final = OUT * DRIVE / (LOSS + 1j * OMEGA * 80e-12)
    fine = np.linspace(-0.5, 0.5, 201) / CARRIER
    # whole averaging periods only
    late = (time > 110e-9) & (time < 190e-9)
    # two samples do not tell when between them it let go; the instant has to lie between them
    deviations = []
    for instant in np.linspace(99.9e-9, 100e-9, 6):
        waves = final * (1.0 - np.exp(-rate * (time[late, None] - instant + fine)))
        deviations.append(np.abs(found[late] - np.trapezoid(waves, fine) * CARRIER).max() / abs(final))
    assert min(deviations) < 1e-3


def test_ringing_is_frozen_for_slow_changes():
    time = np.linspace(0.0, 200e-6, 2001)
    slow = 10e-3 * np.sin(np.pi * time / 200e-6) ** 2 + 1e-5
    changing = conducting(slow, time)
    frozen, found = solve_frozen(changing, PORTS, [CARRIER]).s[0], ringing(changing).s[0]
    assert np.abs(frozen - found).max() < 2e-3 * np.abs(frozen).max()


def test_a_network_at_rest_stays_at_rest():
    time = uneven(200)
    still = conducting(np.full(200, 1e-3), time)
    frozen = solve_frozen(still, PORTS, [CARRIER, 3 * CARRIER])
    found = solve_ringing(still, PORTS, [CARRIER, 3 * CARRIER], frozen.s)
    assert found.s == pytest.approx(frozen.s, abs=1e-10)
    assert found.method == "ringing"
    assert found.time == pytest.approx(time)
    assert found.frequency.tolist() == [CARRIER, 3 * CARRIER]
