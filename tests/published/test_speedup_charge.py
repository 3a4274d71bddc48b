"""Speed-up capacitor by charge balance: C = QB/DV, QB = IC TF + tau_s (IB1 - IC/bF).

Source: J. Millman, H. Taub, Pulse, Digital and Switching Waveforms, 1965 (from memory); tau_s by Moll as in the test of the
storage time: bF 416, bR 0.7, TF 0.3 ns, TR 240 ns, IC 10 mA, IB1 1 mA. Read: 33.436 pF for DV = 5 V. On the shipped part
bjt_pair without its capacitances and resistances, held in saturation: its stored charge over 5 V, to 0.5 % (tau_s is one
time constant for two), and the preferred value of it, 33 pF (IEC 60063).
"""

import numpy as np
import pytest

from transim.design.preferred import nearest_preferred

CAPACITANCE, SWING = 33.436e-12, 5.0


def test_charge_that_the_capacitor_has_to_draw(body, transient):
    ideal = " ".join(
        f"{name}=0"
        for name in (
            "base_resistance", "collector_resistance", "emitter_resistance", "emitter_capacitance",
            "collector_capacitance",
        )
    )  # fmt: skip
    deck = (
        body("junction", "bjt_pair")
        + "Xq c b 0 bjt_pair forward_gain=416 reverse_gain=0.7 forward_transit_time=0.3e-9 reverse_transit_time=240e-9 "
        + f"forward_early_voltage=1e4 forward_knee_current=1e3 {ideal}\n"
        + "I1 0 b 1e-3\nIc 0 c 10e-3\n.save @q.xq.q1[qbe] @q.xq.q1[qbc]\n"
    )
    plot = transient(deck, 1e-9, 1e-11)
    stored = sum(float(np.real(plot[name][-1])) for name in plot.names if "[qb" in name)
    assert stored / SWING == pytest.approx(CAPACITANCE, rel=5e-3)
    assert nearest_preferred("E24", stored / SWING) == pytest.approx(33e-12)
