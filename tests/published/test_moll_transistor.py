"""Saturation storage of a transistor: ts = tau_s ln[(IB1 + IB2)/(IC/bF + IB2)].

Source: J. L. Moll, "Large-signal transient response of junction transistors", Proc. IRE 42, 1773-1784, 1954 (from
memory): tau_s = [bF (1 + bR) TF + bR (1 + bF) TR]/(1 + bF + bR). Parameters: M. T. Thompson, Intuitive Analog Circuit
Design, chapter 10: bF 416, bR 0.7, TF 0.3 ns, TR 240 ns; IC 10 mA, IB1 = IB2 = 1 mA. Read: 112.61 ns by the formula,
112.71 ns by the two charges exactly. On the shipped part bjt_pair without its capacitances and resistances, driven by
the shipped ideal_current. 0.05 % against the exact value (collector current is constant to 0.01 %, VAF is finite),
0.2 % against the formula, whose two poles are one.
"""

import numpy as np
import pytest


def test_storage_time(body, transient):
    ideal = " ".join(
        f"{name}=0"
        for name in (
            "base_resistance", "collector_resistance", "emitter_resistance", "emitter_capacitance",
            "collector_capacitance",
        )
    )  # fmt: skip
    deck = (
        body("junction", "bjt_pair")
        + body("driver", "ideal_current")
        + "Xq c b 0 bjt_pair forward_gain=416 reverse_gain=0.7 forward_transit_time=0.3e-9 reverse_transit_time=240e-9 "
        + f"forward_early_voltage=1e4 forward_knee_current=1e3 {ideal}\n"
        + "Xi ctl b ideal_current on_current=1e-3 off_current=1e-3\n"
        + "Vctl ctl 0 PWL(0 1 1e-9 1 1.001e-9 0)\n"
        # collector: 10 mA until the transistor lets go, then a clamp at 5 V; 30 fF slow its jump by 2 ps
        + "Ic 0 c 10e-3\nCc c 0 3e-14\nDc c high clamp2\nVhigh high 0 5\n.model clamp2 D(is=1e-14 n=0.05)\n"
    )
    plot = transient(deck, 115e-9, 0.02e-9, "reltol=1e-5")
    time, junction = plot["time"] - 1.0005e-9, plot["v(b)"] - plot["v(c)"]
    end = int(np.flatnonzero(junction < 0.0)[0])
    found = np.interp(0.0, -junction[end - 1 : end + 1], time[end - 1 : end + 1])
    assert found == pytest.approx(112.71e-9, rel=5e-4)
    assert found == pytest.approx(112.61e-9, rel=2e-3)
