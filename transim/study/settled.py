"""Settled states beyond the carriers: swept over frequency by case, and over the holding current without a driver."""

from __future__ import annotations

import numpy as np

from transim.circuit.assemble import assemble
from transim.circuit.decks import Deck
from transim.circuit.netlist import Netlist, ThrowPlace
from transim.circuit.settled import shared_throws, sweep_deck
from transim.design.model import Design
from transim.engine.ngspice import Engine
from transim.engine.rawfile import Plot
from transim.errors import RawFileError
from transim.measure.sweep import Array, BiasSweep, StaticSweep, attenuation
from transim.study.case import Case
from transim.study.decks import bias_sweep_decks

__all__ = ["run_bias_sweeps", "run_static_sweeps"]


def run_static_sweeps(case: Case) -> tuple[StaticSweep, ...]:
    """Sweep both settled states of a case over frequency.

    Parameters
    ----------
    case : Case
        One driver at one temperature.

    Returns
    -------
    tuple of StaticSweep
        One for each throw; none where the design has no table `[static]`.

    Raises
    ------
    EngineError
        If the deck fails.
    """
    design, netlist = case.design, case.netlist
    if design.static is None:
        return ()
    deck = sweep_deck(netlist, design.control, design.static, design.numerics, case.origin)
    plots = case.run(deck).plots
    count = len(netlist.ports)
    if len(plots) != 2 * count:
        raise RawFileError(f"expected {2 * count} AC plots of {deck.name}, found {len(plots)}")
    low, high = (_scattering(plots[state * count : (state + 1) * count], netlist) for state in range(2))
    return tuple(
        StaticSweep(
            frequency=np.real(plots[0]["frequency"]),
            on=high if throw.passes_high else low,
            off=low if throw.passes_high else high,
            ports=tuple(port.node for port in netlist.ports),
            through=throw.through,
            impedance=design.carrier.impedance,
        )
        for throw in netlist.throws
    )


def run_bias_sweeps(design: Design, engine: Engine) -> tuple[tuple[BiasSweep, ...], float]:
    """Step the holding current at every temperature.

    Parameters
    ----------
    design : Design
        The design; it says which currents.
    engine : Engine
        ngspice.

    Returns
    -------
    sweeps : tuple of BiasSweep
        One for each temperature and each throw that the RF enters where it enters the first one; none where the
        design does not ask for them.
    seconds : float
        Time spent in ngspice [s].

    Raises
    ------
    EngineError
        If a deck fails.
    """
    decks = bias_sweep_decks(design)
    if not decks:
        return (), 0.0
    netlist, seconds, sweeps = assemble(design, None), 0.0, []
    for deck, temperature in zip(decks, design.environment.temperature, strict=True):
        done = engine.run(deck.text, name=deck.name, timeout=design.numerics.timeout, writes_raw=True)
        seconds += done.seconds
        sweeps += [
            _bias_sweep(design, netlist, deck, done.plots, (throw, temperature)) for throw in shared_throws(netlist)
        ]
    return tuple(sweeps), seconds


def _scattering(plots: tuple[Plot, ...], netlist: Netlist) -> np.ndarray[tuple[int, ...], np.dtype[np.complex128]]:
    """Return S of one state from one plot an excited port, shape (n, p, p)."""
    count = len(netlist.ports)
    s = np.empty((plots[0]["frequency"].size, count, count), dtype=complex)
    for column, (plot, source) in enumerate(zip(plots, netlist.ports, strict=True)):
        for row, port in enumerate(netlist.ports):
            scale = 2.0 * np.sqrt(source.impedance / port.impedance)
            s[:, row, column] = scale * plot[f"v({port.node})"] - (row == column)
    return s


def _bias_sweep(
    design: Design, netlist: Netlist, deck: Deck, plots: tuple[Plot, ...], what: tuple[ThrowPlace, float]
) -> BiasSweep:
    throw, temperature = what
    currents, carriers = design.static.bias_sweep if design.static else (), design.carrier.frequency
    each = 1 + len(carriers)
    if len(plots) != each * len(currents):
        raise RawFileError(f"expected {each * len(currents)} plots of {deck.name}, found {len(plots)}")
    points, first, second = plots[::each], *(netlist.ports[place] for place in throw.through)
    # the wave at the far port against the one that the source sends
    scale = 2.0 * np.sqrt(first.impedance / second.impedance)
    waves = [scale * plot[f"v({second.node})"][0] for k, plot in enumerate(plots) if k % each]
    s = np.array(waves, dtype=complex).reshape(len(currents), len(carriers))
    charge = {
        probe.junction: np.array([sum(factor * _vector(plot, name) for factor, name in probe.terms) for plot in points])
        for probe in netlist.probes
        if probe.quantity == "charge"
    }
    voltage: Array = np.array([_vector(plot, "v(drive)") for plot in points])
    return BiasSweep(temperature, carriers, np.array(currents), voltage, attenuation(s), charge, throw.name)


def _vector(plot: Plot, name: str) -> float:
    """Return a vector at an operating point."""
    return float(np.real(plot[name][0]))
