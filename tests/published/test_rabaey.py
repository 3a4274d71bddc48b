"""Turn-off and turn-on of a junction diode with transit time and depletion capacitance.

Source: J. M. Rabaey, Digital Integrated Circuits, example 2.7: a current source that goes from +1 mA to -0.1 mA and back,
50 kohm in parallel, IS 0.2 fA, TT 5 ns, CJO 0.2 pF, VJ 0.65 V, M 0.5. The book's hand values, from average capacitances
and charges: the diode's voltage crosses zero 11.99 ns after the step and reaches -4.5 V at 22.99 ns; at turn-on it
crosses zero after 0.486 ns. A simulation of the same circuit with ngspice's diode: 13.30, 23.68 and 0.487 ns, held to half of
the last digit; the book's values to 15 %, which is what its averages are worth. On the shipped part junction_diode.
"""

import numpy as np
import pytest

DOWN, UP = 2e-9, 102e-9


def first(time, value, level):
    """Return when a waveform that falls, or that rises if `value` is negated, reaches a level."""
    place = int(np.flatnonzero(value < level)[0])
    return float(np.interp(-level, -value[place - 1 : place + 1], time[place - 1 : place + 1]))


def test_crossings(body, transient):
    deck = (
        body("junction", "junction_diode")
        + "Xd a 0 junction_diode saturation_current=2e-16 transit_time=5e-9 junction_capacitance=0.2e-12 "
        + "junction_potential=0.65 grading=0.5\n"
        + f"I1 0 a PWL(0 1e-3 {DOWN} 1e-3 {DOWN + 1e-12} -1e-4 {UP} -1e-4 {UP + 1e-12} 1e-3)\nR1 a 0 50e3\n"
    )
    plot = transient(deck, 110e-9, 0.02e-9)
    time, voltage = plot["time"], plot["v(a)"]
    off, on = (time > DOWN) & (time < UP), time > UP
    found = (
        first(time[off] - DOWN, voltage[off], 0.0),
        first(time[off] - DOWN, voltage[off], -4.5),
        first(time[on] - UP, -voltage[on], 0.0),
    )
    for value, simulated, half_digit in zip(found, (13.30e-9, 23.68e-9, 0.487e-9), (5e-12, 5e-12, 5e-13), strict=True):
        assert value == pytest.approx(simulated, abs=half_digit)
    assert found == pytest.approx((11.99e-9, 22.99e-9, 0.486e-9), rel=0.15)
