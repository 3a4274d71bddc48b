"""The laws of D and Q against ngspice's own small-signal values, over bias, model cards and temperature.

Outside reference: ngspice 39, at the operating point (``@d[gd]``, ``@q[gm]`` ...) and, for the capacitance of the
diode, its AC current. Tolerance 1e-4: ngspice prints constants of model cards to eight digits or better, and its
AC current of a diode at 10 MHz holds the smaller part of the admittance to that.
"""

import numpy as np
import pytest

from transim.circuit.elements import read_listing
from transim.envelope.diode import DiodeLaw
from transim.envelope.transistor import TransistorLaw

TEMPERATURES = (-40.0, 27.0, 125.0)
VOLTAGES = np.array([-60, -30, -20.3, -20.05, -10.2, -5.1, -3.05, -1, -0.2, -0.08, -0.05, 0, 0.2, 0.45, 0.65, 0.8])

DIODES = {
    "plain": "is=1e-14 n=1.1 rs=2 tt=10n cjo=2p vj=0.7 m=0.4",
    "breakdown": "is=1e-14 n=1.1 bv=20 ibv=1e-4 tt=1n",
    "breakdown of its own slope": "is=1e-12 n=2 nbv=1.3 bv=5 ibv=5m cjo=1p",
    "breakdown at a low current": "is=1e-9 bv=3 ibv=1e-10",
    "breakdown of a leaky junction": "is=1e-9 n=1.8 nbv=2.5 bv=8 ibv=1e-4",
    "high injection": "is=2e-12 n=1.6 ikf=5m tt=3n cjo=1p",
    "high injection and breakdown": "is=1e-12 ikf=1u bv=10",
    "Schottky": "is=1e-8 n=1.05 eg=0.69 xti=2 cjo=10p vj=.5 m=.45 fc=.6",
    "nominal temperature": "is=1e-14 tnom=50 cjo=3p vj=.8 m=.33 tt=5n rs=3 trs=2e-3",
    "saturation current below the smallest": "is=1e-40 n=1",
    "multiplier": "is=1e-14 ikf=1m bv=10 cjo=1p tt=1n rs=5",
    "area": "is=1e-14 ikf=1m bv=10 cjo=1p tt=1n rs=5",
}
#: ngspice stops its search for the knee of breakdown at a current that is right to reltol.
OPTIONS = ".options reltol=1e-6"
INSTANCE = {"area": " area=3", "area and multiplier": " area=3 m=2", "multiplier": " m=2", "area of a pnp": " area=2.5"}


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("card", DIODES)
def test_diode(engine, card, temperature):
    text = DIODES[card]
    words = dict(word.split("=") for word in text.split())
    # ngspice finds no operating point far beyond breakdown
    voltages = VOLTAGES[-float(words.get("bv", "1e3")) - 0.5 < VOLTAGES]
    places = range(len(voltages))
    cells = "".join(
        f"V{k} n{k} 0 DC {v} AC 1\nD{k} n{k} 0 dm{INSTANCE.get(card, '')}\n" for k, v in enumerate(voltages)
    )
    probes = " ".join(f"@d{k}[vd] @d{k}[gd]" for k in places)
    deck = (
        f"* diodes\n{cells}.model dm d({text})\n{OPTIONS} temp={temperature}\n.control\nlisting expand\n"
        f"set appendwrite\nop\nwrite diodes.raw {probes}\nac lin 1 1e7 1e7\nwrite diodes.raw all\nquit 0\n.endc\n.end\n"
    )
    done = engine.run(deck, name="diodes", writes_raw=True)
    bias, response = done.plots
    law = DiodeLaw(read_listing(done.log).devices[0], temperature)
    conductance, capacitance = law.small_signal(np.array([bias[f"@d{k}[vd]"][0] for k in places]))
    assert conductance == pytest.approx(np.array([bias[f"@d{k}[gd]"][0] for k in places]), rel=1e-4, abs=1e-13)
    admittance = conductance + 2j * np.pi * 1e7 * capacitance
    total = admittance / (1.0 + admittance * law.resistance)
    found = -np.array([response[f"i(v{k})"][0] for k in places])
    assert total.real == pytest.approx(found.real, rel=1e-4, abs=2e-12)
    assert total.imag == pytest.approx(found.imag, rel=1e-4, abs=1e-15)


TRANSISTORS = {
    "everything": "npn is=1e-15 bf=150 vaf=60 ikf=0.1 br=4 var=20 ikr=.05 rb=20 rc=1 re=.2 cje=4p cjc=2.5p tf=.4n "
    "tr=40n xtf=3 vtf=2 itf=.2 ise=1e-13 ne=1.8 isc=1e-12 nc=1.7 xcjc=0.6 fc=0.6",
    "base resistance that falls with current": "npn is=1e-15 bf=120 rb=200 rbm=8 irb=0.1m rc=2 cje=1p",
    "base resistance that falls with base charge": "npn is=1e-15 bf=100 ikf=2m rb=150 rbm=10 vaf=30",
    "pnp": "pnp is=1e-14 bf=80 vaf=40 rb=100 rbm=5 irb=1m cje=3p cjc=4p tf=1n tr=100n xtb=1.5 re=0.5",
    "roll-off": "npn is=1e-16 nf=1.02 nkf=0.6 ikf=.02 tf=0.2n",
    "transit time without knee": "npn is=1e-15 tf=1n xtf=5 cje=2p vje=.8 mje=.4",
    "transit time by current": "npn is=1e-15 tf=1n xtf=5 itf=10m",
    "transit time by voltage": "npn is=1e-15 tf=1n xtf=2 itf=10m vtf=1.5 vaf=50 cjc=1p vjc=.6 mjc=.5",
    "leakage": "npn is=1e-15 ise=1e-12 ne=1.4 isc=1e-11 nc=1.3 bf=300 br=2 nr=1.05",
    "germanium": "pnp is=1e-7 bf=60 eg=0.67 xti=2.5 xtb=0.5 cjc=8p xcjc=0.3 rc=3 tr=1u",
    "nominal temperature": "npn is=1e-15 tnom=60 bf=90 xtb=1 cje=3p cjc=2p tf=.3n",
    "split collector junction": "npn is=1e-15 cjc=3p xcjc=0.25 rb=80 rc=4 tr=10n",
    "area of a pnp": "pnp is=1e-16 isc=1e-13 br=3 ikr=1m cjc=1p tr=1n xcjc=0.5",
    "area and multiplier": "npn is=1e-16 ikf=5m ise=1e-14 rb=100 rc=10 re=1 cje=1p cjc=1p tf=1n xtf=2 itf=5m irb=1m "
    "rbm=20",
}
#: Base and collector against the emitter [V], as an NPN has them: active, saturated, reverse, blocked.
BIASES = [
    (0.55, 5.0), (0.65, 5.0), (0.75, 2.0), (0.75, 0.1), (0.8, 0.05), (0.6, 0.0), (0.0, 0.0), (-2.0, -1.0),
    (-1.0, -1.65), (0.0, 3.0), (-3.0, 8.0), (0.0, -0.7), (0.3, 1.0),
]  # fmt: skip


@pytest.mark.parametrize("temperature", TEMPERATURES)
@pytest.mark.parametrize("card", TRANSISTORS)
def test_transistor(engine, card, temperature):
    kind, text = TRANSISTORS[card].split(None, 1)
    sign = -1.0 if kind == "pnp" else 1.0
    # half the voltage for germanium: kiloamperes have no exact operating point
    biases = 0.5 * np.array(BIASES) if card == "germanium" else np.array(BIASES)
    places = range(len(biases))
    cells = "".join(
        f"Vb{k} b{k} 0 {sign * b}\nVc{k} c{k} 0 {sign * c}\nQ{k} c{k} b{k} 0 qm{INSTANCE.get(card, '')}\n"
        for k, (b, c) in enumerate(biases)
    )
    wanted = ("vbe", "vbc", "ic", "gm", "go", "gpi", "gmu", "gx", "cpi", "cmu", "cbx")
    probes = " ".join(f"@q{k}[{name}]" for k in places for name in wanted)
    deck = (
        f"* transistors\n{cells}.model qm {kind}({text})\n.options temp={temperature}\n.control\nlisting expand\nop\n"
        f"write transistors.raw {probes}\nquit 0\n.endc\n.end\n"
    )
    done = engine.run(deck, name="transistors", writes_raw=True)
    ngspice = {name: np.array([done.plots[0][f"@q{k}[{name}]"][0] for k in places]) for name in wanted}
    law = TransistorLaw(read_listing(done.log).devices[0], temperature)
    # the outer part of the collector junction lies between the external base and the internal collector
    drop = law.collector_resistance * ngspice["ic"]
    outer = biases[:, 0] - biases[:, 1] + sign * drop
    ours = law.small_signal(ngspice["vbe"], ngspice["vbc"], outer)
    for name, found, least in (
        ("gm", ours.m, 1e-13), ("go", ours.o, 1e-13), ("gpi", ours.pi, 1e-13), ("gmu", ours.mu, 1e-13),
        ("cpi", ours.c_be, 1e-19), ("cmu", ours.c_bc, 1e-19), ("cbx", ours.c_bx, 1e-19),
    ):  # fmt: skip
        assert found == pytest.approx(ngspice[name], rel=1e-4, abs=least), name
    if law.has_base_resistance:
        assert ours.base == pytest.approx(ngspice["gx"], rel=1e-4)


@pytest.mark.parametrize("temperature", TEMPERATURES)
def test_emitter_charge_follows_the_collector_voltage(engine, temperature):
    """Ngspice does not print the cross capacitance; its AC base current with the collector driven shows it."""
    text = TRANSISTORS["transit time by voltage"].split(None, 1)[1]
    cells = "".join(
        f"Vb{k} b{k} 0 {b}\nVc{k} c{k} 0 {c} AC 1\nQ{k} c{k} b{k} 0 qm\n" for k, (b, c) in enumerate(BIASES)
    )
    probes = " ".join(f"@q{k}[vbe] @q{k}[vbc]" for k in range(len(BIASES)))
    deck = (
        f"* cross\n{cells}.model qm npn({text})\n.options temp={temperature}\n.control\nlisting expand\n"
        f"set appendwrite\nop\nwrite cross.raw {probes}\nac lin 1 1e9 1e9\nwrite cross.raw all\nquit 0\n.endc\n.end\n"
    )
    done = engine.run(deck, name="cross", writes_raw=True)
    bias, response = done.plots
    law = TransistorLaw(read_listing(done.log).devices[0], temperature)
    vbe, vbc = (np.array([bias[f"@q{k}[{name}]"][0] for k in range(len(BIASES))]) for name in ("vbe", "vbc"))
    signal = law.small_signal(vbe, vbc, vbc)
    # with base and emitter quiet, 1 V on the collector draws -(j w (cmu + cross) + gmu) from the base
    expected = -(signal.mu + 2j * np.pi * 1e9 * (signal.c_bc + signal.c_cross))
    found = -np.array([response[f"i(vb{k})"][0] for k in range(len(BIASES))])
    assert np.abs(signal.c_cross).max() > 1e-15
    assert expected.imag == pytest.approx(found.imag, rel=1e-4, abs=1e-12)
    assert expected.real == pytest.approx(found.real, rel=1e-4, abs=2e-12)
