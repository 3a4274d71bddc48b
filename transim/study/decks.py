"""The decks of one driver at one temperature that can be written without running any of them."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from transim.circuit.assemble import assemble
from transim.circuit.decks import Deck, Origin, Tone, carrier_deck, static_deck, video_deck
from transim.circuit.settled import bias_deck, sweep_deck
from transim.circuit.timeline import Timeline, timeline_of
from transim.design.model import Design, Driver
from transim.quantities import format_quantity
from transim.study.stress import amplitude_of

__all__ = ["bias_sweep_decks", "carrier_decks", "carrier_timeline", "case_decks"]

#: Carrier periods before the first edge for the start-up to die away, and after the judged cycle.
_SETTLING_PERIODS, _OVERRUN_PERIODS = 20.0, 2.0


def case_decks(design: Design, driver: Driver, temperature: float) -> tuple[Deck, ...]:
    """Write the static and the video deck, and the sweep deck where the design asks for it.

    Parameters
    ----------
    design : Design
        The design.
    driver : Driver
        One of its drivers.
    temperature : float
        [degC].

    Returns
    -------
    tuple of Deck
        Static, video, sweep; the video deck of an envelope analysis saves some device currents more.

    Raises
    ------
    TopologyError
        If path and driver do not fit together.
    """
    netlist, origin = assemble(design, driver), _origin(design, driver, temperature)
    control, numerics = design.control, design.numerics
    decks = [
        static_deck(netlist, control, design.carrier.frequency, numerics, origin),
        video_deck(netlist, control, timeline_of(design), numerics, origin),
    ]
    if design.static is not None:
        decks.append(sweep_deck(netlist, control, design.static, numerics, origin))
    return tuple(decks)


def bias_sweep_decks(design: Design) -> tuple[Deck, ...]:
    """Write the decks that step the holding current; they belong to no driver.

    Parameters
    ----------
    design : Design
        The design.

    Returns
    -------
    tuple of Deck
        One for each temperature; none where the design does not ask for it.

    Raises
    ------
    TopologyError
        If the path has no single bias entry.
    """
    static = design.static
    if static is None or not static.bias_sweep:
        return ()
    netlist, carriers = assemble(design, None), design.carrier.frequency
    file = Path(design.source.path).name
    origins = [
        Origin(design.title, file, "none, a current source in its place", temperature)
        for temperature in design.environment.temperature
    ]
    return tuple(bias_deck(netlist, static, carriers, design.numerics, origin) for origin in origins)


def carrier_timeline(design: Design, frequency: float) -> Timeline:
    """Lay out the command of a carrier-resolved run.

    Parameters
    ----------
    design : Design
        The design.
    frequency : float
        Carrier [Hz].

    Returns
    -------
    Timeline
        With time for the carrier to settle before the first edge.
    """
    return timeline_of(design, settle=_SETTLING_PERIODS / frequency, overrun=_OVERRUN_PERIODS / frequency)


def carrier_decks(
    design: Design, driver: Driver, temperature: float, frequency: float, level: float
) -> dict[int, tuple[Deck, Deck, Deck]]:
    """Write the decks of the carrier analysis: two in quadrature, one without RF.

    Parameters
    ----------
    design : Design
        The design.
    driver : Driver
        One of its drivers.
    temperature, frequency, level : float
        [degC], [Hz], available power [dBm].

    Returns
    -------
    dict of int to tuple of Deck
        At 0 deg, at 90 deg, and quiet, by the place of the port that the RF enters; throws share it, as a rule.

    Raises
    ------
    TopologyError
        If path and driver do not fit together.
    """
    netlist, origin = assemble(design, driver), _origin(design, driver, temperature)
    timeline = carrier_timeline(design, frequency)
    amplitude = amplitude_of(level, design.carrier.impedance)
    entries = dict.fromkeys(throw.through[0] for throw in netlist.throws)
    group = f"carrier_{format_quantity(frequency, 'Hz', 12).replace(' ', '')}"
    if len(design.carrier.level) > 1:
        group += f"_{level:g}dBm"
    found = {}
    for entry in entries:
        own = group if len(entries) == 1 else f"{group}_{netlist.ports[entry].node}"
        first, second, quiet = (
            replace(
                carrier_deck(
                    netlist, design.control, timeline, design.numerics, origin, Tone(frequency, size, phase, entry)
                ),
                group=own,
            )
            for size, phase in ((amplitude, 0.0), (amplitude, 90.0), (0.0, 0.0))
        )
        found[entry] = (first, second, quiet)
    return found


def _origin(design: Design, driver: Driver, temperature: float) -> Origin:
    return Origin(design.title, Path(design.source.path).name, driver.name, temperature)
