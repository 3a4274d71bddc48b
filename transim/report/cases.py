"""What stands in the result folder: a folder a driver and temperature, with its decks and waveforms."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from transim.circuit.assemble import assemble
from transim.circuit.decks import Deck
from transim.circuit.timeline import timeline_of
from transim.design.model import Design, Driver
from transim.quantities import format_quantity
from transim.report.settled import write_bias_sweeps, write_static_sweep
from transim.report.waveforms import write_waveforms
from transim.study.decks import bias_sweep_decks, carrier_decks, case_decks
from transim.study.run import Outcome

__all__ = ["case_name", "placed_decks", "write_cases", "write_decks"]


def case_name(design: Design, driver: str, temperature: float) -> str:
    """Return the name of the folder of one driver and temperature.

    Parameters
    ----------
    design : Design
        The design.
    driver : str
        Name of the driver.
    temperature : float
        [degC].

    Returns
    -------
    str
        The driver's name, with the temperature where the design has several.
    """
    if len(design.environment.temperature) == 1:
        return driver
    return f"{driver}_{format_quantity(temperature, 'degC', 12).replace(' ', '')}"


def placed_decks(design: Design, driver: Driver, temperature: float) -> dict[str, Deck]:
    """Return the decks that can be written without running any.

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
    dict of str to Deck
        By file; the decks of each carrier have a folder of their own.
    """
    decks = list(case_decks(design, driver, temperature))
    for frequency in design.carrier.frequency:
        for level in design.carrier.level:
            for several in carrier_decks(design, driver, temperature, frequency, level).values():
                decks += several
    return {deck_file(deck): deck for deck in decks}


def deck_file(deck: Deck) -> str:
    """Return the file of a deck in its driver's folder."""
    return f"{deck.group}/{deck.name}.cir" if deck.group else f"{deck.name}.cir"


def write_cases(folder: Path, outcome: Outcome) -> None:
    """Write every deck that was run, and the waveforms.

    Parameters
    ----------
    folder : Path
        The result folder.
    outcome : Outcome
        The run of a design.
    """
    design = outcome.design
    drivers = {driver.name: driver for driver in design.drivers}
    for case in outcome.cases:
        place = folder / case_name(design, case.driver, case.temperature)
        driver = drivers[case.driver]
        write_decks(place, {deck_file(deck): deck for deck in case.decks})
        write_waveforms(place, case, assemble(design, driver))
        for throw in case.throws:
            if throw.static is not None:
                title = f"{design.title}; driver {case.driver} at {format_quantity(case.temperature, 'degC', 12)}"
                write_static_sweep(place, throw.static, title, throw.name)
    write_bias_sweeps(folder, outcome.bias_sweeps)
    if outcome.bias_sweeps:
        write_decks(folder, {deck_file(deck): deck for deck in bias_sweep_decks(design)})
    (folder / "README.txt").write_text(_readme(design), encoding="utf-8")


def write_decks(place: Path, decks: Mapping[str, Deck]) -> None:
    """Write decks.

    Parameters
    ----------
    place : Path
        Folder of a driver.
    decks : mapping of str to Deck
        By file in it.
    """
    for name, deck in decks.items():
        file = place / name
        file.parent.mkdir(parents=True, exist_ok=True)
        file.write_text(deck.text, encoding="utf-8", newline="\n")


def _readme(design: Design) -> str:
    timeline = timeline_of(design)
    edges = [format_quantity(edge, "s", 8) for edge in (timeline.rising, timeline.falling)]
    return "\n".join([_README.format(title=design.title, rising=edges[0], falling=edges[1]), ""])


_README = """\
Results of: {title}

result.json       every figure with its limit and verdict; SI units
bias_*.csv        attenuation, voltage and charge against the holding current, without a driver, by temperature
files.txt         every file that was written here; a later run with --force replaces these and no others

In the folder of each driver (and temperature, where the design has several):
*.cir             the decks that were run; the head of each says how to run it by itself
waveforms.csv     the run of the control pulse without RF
envelope_*.csv    complex S21 of the judged ports against time, by the carrier in the name
static.csv        loss, isolation and return losses of the settled states against frequency, where [static] asks for it
static_*.sNp      S-parameters of the settled states on and off as Touchstone 2.0 files of N ports
*_THROW.*         where the path has several throws: of the one of that name
waveforms.npz     all waveforms as arrays; the array "units" holds name and unit of each

All times count from the start of the run. The judged pulse of the command passes 50 %
at {rising} (rising) and {falling} (falling).

time                  instants of the arrays below
control               logic command
driver_voltage        bias entry of the path, where the driver feeds it; of a second entry with its name
driver_current        out of the driver, positive into the bias entry; likewise
port_NAME             RF port: without RF this is the video leakage
supply_current_NAME   out of a supply
charge_NAME           stored in a junction, positive when forward biased
current_NAME          of a junction, as its part file defines it
reverse_NAME          voltage across a junction, positive when reverse biased; several of a transistor are numbered
envelope_CARRIER      complex S21 at the instants envelope_CARRIER_time, by the envelope analysis
envelope_CARRIER_resolved   the same by the carrier analysis"""

