"""Settled states of the paths with lines, of several junctions and throws: scikit-rf's networks, published figures.

Sources: R. V. Garver, "Microwave Diode Control Devices", 1976; J. F. White, "Microwave Semiconductor Engineering",
1982: the series-shunt switch, two shunt junctions a quarter wave apart, the two-throw switches with series junctions
and with shunt junctions behind quarter waves. The figures are worked out from the closed forms stated there, junctions
1 or 2 ohm on and 0.3 pF off, Z0 50 ohm; half a unit of their last digit is allowed.

The junction's own impedance: P. O. Lauritzen, C. L. Ma, IEEE Trans. Power Electron. 6(2), 1991, linearised by hand
(derived) as in test_static_networks. A lossless line: ABCD of cos, j Z sin, j sin / Z, cos (D. M. Pozar, Microwave
Engineering, from memory). scikit-rf's nodal solver puts the networks together; it shares nothing with ngspice or this
program. Every S-parameter of every state agrees within 0.01 dB, 1 MHz to 10 GHz.
"""

import math

import numpy as np
import pytest
import scipy.constants
import scipy.optimize
import skrf
from skrf.circuit import Circuit

from transim.design.toml import read_design
from transim.parts.catalogue import load_catalogue
from transim.study.case import Case
from transim.study.settled import run_static_sweeps

Z0 = 50.0
TEMPERATURE = 25.0
VT = scipy.constants.k * (TEMPERATURE + 273.15) / scipy.constants.e
CURRENT = 0.01
JUNCTION = {
    "lifetime": 1e-6, "transit_time": 4e-9, "width": 50e-6, "mobility": 0.18, "capacitance": 0.25e-12,
    "series_resistance": 0.3, "intrinsic_resistance": 8e3,
}  # fmt: skip
FEED = {"resistance": 2.5, "inductance": 3.3e-6, "capacitance": 0.2e-12, "loss": 15e3}
BLOCK = 1.2e-9
#: A line that is neither matched nor a quarter wave at its own frequency.
LINE = {"line_impedance": 65.0, "line_length": 80.0, "line_frequency": 1.3e9}
LINED = ("shunt_quarter_wave_pair", "spdt_quarter_wave", "spdt_shunt")
RETURNED = ("series_shunt", "spdt_series", "spdt_quarter_wave")

DESIGN = """
title = "Heron"
[control]
low = "0 V"
high = "3 V"
edge = "10 ns"
on_for = "2 us"
period = "5 us"
[carrier]
frequency = ["0.9 GHz", "1 GHz", "1.1 GHz"]
[switch]
path = "{path}"
junction = "hp"
{settings}
[junction.hp]
part = "pin_lumped"
{junction}
[driver.bench]
part = "ideal_current"
on_current = "{current} A"
off_current = "10 uA"
compliance = "12 V"
[static]
from = "1 MHz"
to = "10 GHz"
"""


def case_of(engine, tmp_path, path, settings, junction):
    """Return a path under ideal currents."""
    parts = load_catalogue()
    lines = {
        key: "\n".join(f'{name} = "{value!r} {part.settings[name].unit}"' for name, value in values.items())
        for key, values, part in (
            ("settings", settings, parts.find("path", path)),
            ("junction", junction, parts.find("junction", "pin_lumped")),
        )
    }
    file = tmp_path / "some.toml"
    file.write_text(DESIGN.format(path=path, current=CURRENT, **lines))
    design = read_design(file)
    return Case(design, design.drivers[0], TEMPERATURE, engine)


def on_impedance(omega, current):
    """Return the impedance of a junction that is on, between its terminals."""
    p = JUNCTION
    tau, transit = p["lifetime"], p["transit_time"]
    lag = tau / (1.0 + 1j * omega * tau)
    junction = (1.0 + lag / transit) * transit * VT / (current * (tau + transit))
    resistance = region(current)
    reaction = resistance - current * p["mobility"] / p["width"] ** 2 * resistance**2 * lag
    return p["series_resistance"] + 1.0 / (1j * omega * p["capacitance"] + 1.0 / (junction + reaction))


def region(current):
    """Return the I-region's resistance at a holding current [ohm]."""
    p = JUNCTION
    return 1.0 / (1.0 / p["intrinsic_resistance"] + p["mobility"] / p["width"] ** 2 * current * p["lifetime"])


def off_impedance(omega):
    """Return the impedance of a junction that is reverse biased: its capacitance and leads."""
    return JUNCTION["series_resistance"] + 1.0 / (1j * omega * JUNCTION["capacitance"])


def divided():
    """Return the currents of two equal junctions in parallel, the first with the DC return in series (derived)."""
    def drop(current):
        return VT * math.log(current) + current * (JUNCTION["series_resistance"] + region(current))

    def mismatch(first):
        return drop(first) + first * FEED["resistance"] - drop(CURRENT - first)

    first = scipy.optimize.brentq(mismatch, 1e-6 * CURRENT, (1.0 - 1e-6) * CURRENT)
    return first, CURRENT - first


class Board:
    """A network put together node by node, solved by scikit-rf."""

    def __init__(self, frequency):
        self.frequency = frequency
        self.omega = 2.0 * math.pi * frequency
        self._media = skrf.media.DefinedGammaZ0(skrf.Frequency.from_f(frequency, unit="Hz"), z0=Z0)
        self._nodes = {}
        self._count = 0

    def _join(self, network, *nodes):
        for place, node in enumerate(nodes):
            if node == "0":
                ground = Circuit.Ground(self._media.frequency, f"g{self._count}", z0=Z0)
                self._nodes[f"ground {self._count}"] = [(ground, 0), (network, place)]
                self._count += 1
            else:
                self._nodes.setdefault(node, []).append((network, place))

    def element(self, first, second, impedance):
        self._count += 1
        impedance = impedance * np.ones(self.frequency.size, dtype=complex)
        self._join(self._media.resistor(impedance, name=f"z{self._count}"), first, second)

    def block(self, first, second):
        self.element(first, second, 1.0 / (1j * self.omega * BLOCK))

    def line(self, first, second):
        self._count += 1
        angle = math.radians(LINE["line_length"]) * self.frequency / LINE["line_frequency"]
        z = LINE["line_impedance"]
        chain = np.array([[np.cos(angle), 1j * z * np.sin(angle)], [1j * np.sin(angle) / z, np.cos(angle)]])
        s = skrf.network.a2s(np.moveaxis(chain, -1, 0), Z0)
        self._join(skrf.Network(frequency=self._media.frequency, s=s, z0=Z0, name=f"z{self._count}"), first, second)

    def choke(self, node, bypass=None):
        """Add a feed from a bypassed entry, or a DC return."""
        choke = 1.0 / (
            1.0 / (1j * self.omega * FEED["inductance"]) + 1j * self.omega * FEED["capacitance"] + 1.0 / FEED["loss"]
        )
        self.element(node, "0", FEED["resistance"] + choke + (1.0 / (1j * self.omega * bypass) if bypass else 0.0))

    def s(self, ports):
        joined = []
        for k, node in enumerate(ports):
            port = Circuit.Port(self._media.frequency, f"port{k}", z0=Z0)
            joined.append([(port, 0), *self._nodes.pop(node)])
        return Circuit([*joined, *self._nodes.values()]).network.s


#: No driver can be seen through it.
BYPASS = 1e-5


def shunt_quarter_wave_pair(board, on, high):
    board.block("p1", "a1")
    for node in ("a1", "a2"):
        board.element(node, "0", on(high, CURRENT / 2.0))
    board.line("a1", "a2")
    board.block("a2", "p2")
    board.choke("a1", BYPASS)


def series_shunt(board, on, high):
    board.block("p1", "a")
    board.element("a", "k", on(high))
    board.block("k", "s")
    board.element("s", "0", on(not high))
    board.block("s", "p2")
    board.choke("a", BYPASS)
    board.choke("k")
    board.choke("s", BYPASS)


def spdt_series(board, on, high):
    board.block("p1", "k")
    board.choke("k")
    for port, open_arm in (("p2", high), ("p3", not high)):
        board.element(f"a{port}", "k", on(open_arm))
        board.block(f"a{port}", port)
        board.choke(f"a{port}", BYPASS)


def spdt_quarter_wave(board, on, high):
    first, second = divided()
    board.block("p1", "m")
    board.element("m", "k", on(high, first))
    board.block("k", "p2")
    board.choke("k")
    board.line("m", "s")
    board.element("s", "0", on(high, second))
    board.block("s", "p3")
    board.choke("s", BYPASS)


def spdt_shunt(board, on, high):
    for port, closed in (("p2", not high), ("p3", high)):
        board.block("p1", f"l{port}")
        board.line(f"l{port}", f"a{port}")
        board.element(f"a{port}", "0", on(closed))
        board.block(f"a{port}", port)
        board.choke(f"a{port}", BYPASS)


PATHS = (shunt_quarter_wave_pair, series_shunt, spdt_series, spdt_quarter_wave, spdt_shunt)


def expected(build, frequency, high, ports):
    """Return S of a path with the command high or low."""
    board = Board(frequency)

    def junction(on, current=CURRENT):
        return on_impedance(board.omega, current) if on else off_impedance(board.omega)

    build(board, junction, high)
    return board.s([f"p{k + 1}" for k in range(ports)])


@pytest.mark.parametrize("build", PATHS)
def test_paths_against_scikit_rf(engine, tmp_path, build):
    path = build.__name__
    chokes = ("feed", "return") if path in RETURNED else ("feed",)
    settings = {"dc_block": BLOCK, "bypass": BYPASS}
    settings |= {f"{name}_{key}": value for name in chokes for key, value in FEED.items()}
    settings |= LINE if path in LINED else {}
    case = case_of(engine, tmp_path, path, settings, JUNCTION)
    sweeps = run_static_sweeps(case)
    assert [sweep.through for sweep in sweeps] == [throw.through for throw in case.netlist.throws]
    for sweep, throw in zip(sweeps, case.netlist.throws, strict=True):
        assert (sweep.frequency[0], sweep.frequency[-1]) == (pytest.approx(1e6), pytest.approx(1e10))
        for found, high in ((sweep.on, throw.passes_high), (sweep.off, not throw.passes_high)):
            wanted = expected(build, sweep.frequency, high, len(case.netlist.ports))
            assert np.abs(found - wanted).max() < 1e-3
            assert 20.0 * np.abs(np.log10(np.abs(found / wanted))).max() < 0.01


def test_a_delay_takes_the_place_of_degrees(engine, tmp_path):
    degrees = {"line_length": 45.0, "line_frequency": 0.5e9}
    states = [
        case_of(engine, tmp_path, "spdt_shunt", settings, JUNCTION).static()[1]
        for settings in (degrees, {"line_delay": 0.25e-9}, degrees | {"line_delay": 0.3e-9})
    ]
    assert states[0] == pytest.approx(states[1], abs=1e-9)
    assert np.abs(states[2] - states[1]).max() > 0.01


#: Settings that leave of a path its junctions and lines.
BARE = {"dc_block": 1e-4, "feed_inductance": 1.0, "feed_capacitance": 0.0, "feed_loss": 1e12}
BARE_RETURN = {"return_inductance": 1.0, "return_capacitance": 0.0, "return_loss": 1e12}


def switched(resistance, current=CURRENT):
    """Return a junction of a resistance when on, 0.3 pF when off; over a long lifetime nothing else has an impedance."""
    # the part's leads keep 0.1 mohm
    lifetime, inner = 1e-4, resistance - 1e-4
    return {
        "lifetime": lifetime, "transit_time": 1e-12, "width": math.sqrt(0.18 * current * lifetime * inner),
        "mobility": 0.18, "capacitance": 0.3e-12, "series_resistance": 0.0, "intrinsic_resistance": 1e9,
    }  # fmt: skip


def found(engine, tmp_path, path, junction):
    """Return loss and isolation [dB] of the first throw at 0.9, 1 and 1.1 GHz, lines a quarter wave at 1 GHz."""
    settings = BARE | (BARE_RETURN if path in RETURNED else {})
    settings |= {"line_frequency": 1e9} if path in LINED else {}
    case = case_of(engine, tmp_path, path, settings, junction)
    _, states = case.static()
    throw = case.netlist.throws[0]
    first, second = throw.through
    through = -20.0 * np.log10(np.abs(states[:, :, second, first]))
    return through[int(throw.passes_high)], through[int(not throw.passes_high)]


def series(impedance):
    return np.array([[1.0, impedance], [0.0, 1.0]])


def shunt(impedance):
    return np.array([[1.0, 0.0], [1.0 / impedance, 1.0]])


def quarter(share):
    angle = 0.5 * math.pi * share
    return np.array([[math.cos(angle), 1j * Z0 * math.sin(angle)], [1j * math.sin(angle) / Z0, math.cos(angle)]])


def loaded(chain):
    """Return the impedance into a chain that ends in Z0."""
    voltage, current = chain @ np.array([Z0, 1.0])
    return voltage / current


#: Chain matrices between two ports by the impedances of a junction on and off and the frequency in GHz: loss, isolation.
CIRCUITS = {
    "series_shunt": (lambda on, off, _: series(on) @ shunt(off), lambda on, off, _: series(off) @ shunt(on)),
    "shunt_quarter_wave_pair": (
        lambda _, off, share: shunt(off) @ quarter(share) @ shunt(off),
        lambda on, _, share: shunt(on) @ quarter(share) @ shunt(on),
    ),
    "spdt_series": (
        lambda on, off, _: shunt(off + Z0) @ series(on),
        lambda on, off, _: shunt(on + Z0) @ series(off),
    ),
    "spdt_shunt": (
        lambda on, off, share: shunt(loaded(quarter(share) @ shunt(on))) @ quarter(share) @ shunt(off),
        lambda on, off, share: shunt(loaded(quarter(share) @ shunt(off))) @ quarter(share) @ shunt(on),
    ),
}


def kept_capacitance(path, resistance, share):
    """Return by how much loss and isolation rise since a junction keeps its 0.3 pF while it is on [dB] (derived)."""
    off = 1.0 / (2j * math.pi * share * 1e9 * 0.3e-12)
    rise = []
    for circuit in CIRCUITS[path]:
        levels = []
        for on in (resistance * off / (resistance + off), resistance):
            a, b, c, d = circuit(on, off, share).ravel()
            levels.append(20.0 * math.log10(abs(a + b / Z0 + c * Z0 + d) / 2.0))
        rise.append(levels[0] - levels[1])
    return rise


@pytest.mark.parametrize(
    ("path", "resistance", "loss", "isolation"),
    [
        ("series_shunt", 1.0, {1.0: 0.09625}, {1.0: 48.685}),
        ("shunt_quarter_wave_pair", 2.0, {}, {1.0: 50.591}),
        ("spdt_series", 1.0, {1.0: 0.13453}, {1.0: 20.516}),
        ("spdt_shunt", 1.0, {0.9: 0.14699, 1.0: 0.09456, 1.1: 0.09527}, {0.9: 34.275, 1.0: 34.208, 1.1: 33.958}),
    ],
)
def test_published_figures(engine, tmp_path, path, resistance, loss, isolation):
    # the current of the pair divides evenly
    current = CURRENT / 2.0 if path == "shunt_quarter_wave_pair" else CURRENT
    levels = found(engine, tmp_path, path, switched(resistance, current))
    shares = (0.9, 1.0, 1.1)
    for k, (published, digit) in enumerate(((loss, 1e-5), (isolation, 1e-3))):
        for share, value in published.items():
            level = levels[k][shares.index(share)] - kept_capacitance(path, resistance, share)[k]
            assert level == pytest.approx(value, abs=0.5 * digit)
