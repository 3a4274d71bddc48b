"""Command `check`: the circuit that a design makes, in words."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from transim.circuit.assemble import assemble
from transim.circuit.timeline import timeline_of
from transim.commands.console import Console
from transim.design.model import Design, Driver, Junction
from transim.design.toml import read_design
from transim.measure.metrics import METRICS
from transim.parts.catalogue import shipped_folder
from transim.parts.part import Part
from transim.quantities import format_quantity
from transim.report.document import FORMAT, limit_document
from transim.report.layout import Column, align, wrap
from transim.report.tables import limit_text
from transim.report.throws import throw_sentences
from transim.report.verdicts import definition_lines
from transim.study.decks import carrier_timeline

__all__ = ["check_design"]


def check_design(console: Console, file: Path) -> int:
    """Read a design, put its circuits together, and describe them.

    Parameters
    ----------
    console : Console
        Where to write.
    file : Path
        The design file.

    Returns
    -------
    int
        Exit status.

    Raises
    ------
    InvalidDesign
        With all the errors of the file.
    TopologyError
        If path, junctions and a driver do not fit together.
    """
    design = read_design(file)
    for driver in design.drivers:
        assemble(design, driver)
    console.write([*_describe(design), f"no errors; next: transim run {file}"])
    console.document(_document(design))
    return 0


def _describe(design: Design) -> Iterator[str]:
    yield from wrap(design.title)
    for section in (_command(design), _path(design), _junctions(design), _drivers(design)):
        yield ""
        yield from section
    yield ""
    yield from _rf(design)
    yield ""
    yield from _limits(design)
    yield ""
    yield from _runs(design)
    yield ""


def _command(design: Design) -> Iterator[str]:
    control = design.control
    timeline = timeline_of(design)
    low, high = format_quantity(control.low, "V"), format_quantity(control.high, "V")
    times = {name: format_quantity(getattr(control, name), "s") for name in ("edge", "on_for", "period")}
    if control.record is not None:
        yield from wrap(
            f"command: recorded in {control.record.file}, {len(control.record.time)} corners;"
            f" {control.pulses} complete pulse{'s' * (control.pulses > 1)}, of which the last is judged: from {low} to"
            f" {high}, edges of {times['edge']} (0 to 100 %), high for {times['on_for']} between its 50 % points, every"
            f" {times['period']}; {format_quantity(timeline.stop, 's')} are simulated"
        )
        return
    train = "a single pulse" if control.pulses == 1 else f"{control.pulses} pulses, of which the last is judged"
    yield from wrap(
        f"command: from {low} to {high} with edges of {times['edge']} (0 to 100 %), high for {times['on_for']}"
        f" between its 50 % points, every {times['period']}; {train};"
        f" {format_quantity(timeline.stop, 's')} are simulated"
    )


def _path(design: Design) -> Iterator[str]:
    switch = design.switch
    path = switch.path
    yield from wrap(f"path {path.name}: {path.summary}")
    yield from wrap(f"RF ports {', '.join(path.ports)}; {'; '.join(throw_sentences(path))}", "  ")
    yield from _settings(path, switch.values)
    yield from _notes(path)


def _junctions(design: Design) -> Iterator[str]:
    switch = design.switch
    for junction in _distinct(switch.junctions):
        slots = [slot for slot in switch.path.slots if switch.junctions[slot.name].name == junction.name]
        places = "; ".join(f"{slot.name}: {slot.meaning}" for slot in slots)
        yield from wrap(f"junction {junction.name} ({places})")
        yield from _part(junction)


def _drivers(design: Design) -> Iterator[str]:
    for number, driver in enumerate(design.drivers):
        if number:
            yield ""
        yield f"driver {driver.name}"
        yield from _part(driver)


def _part(component: Junction | Driver) -> Iterator[str]:
    yield from wrap(f"{component.part.name}: {component.part.summary}", "  ")
    silenced: tuple[str, ...] = ()
    if component.model is not None and component.part.model is not None:
        silenced = component.part.model.parameters
        yield from wrap(f"model card of its own: {component.model}", "  ", "    ")
    yield from _settings(component.part, component.values, silenced)
    yield from _notes(component.part)
    ratings = component.ratings
    texts = [f"{key} {format_quantity(value, ratings.unit(key))}" for key, value in ratings.stated.items()]
    if texts:
        yield from wrap(f"ratings: at most {', '.join(texts)}", "  ", "    ")


def _notes(part: Part) -> Iterator[str]:
    """Say what a file of the user's own has been taken for; shipped parts have their notes in `transim parts`."""
    if not part.file.is_relative_to(shipped_folder()):
        for note in part.notes:
            yield from wrap(f"note: {note}", "  ", "    ")


def _settings(part: Part, values: Mapping[str, float], silenced: tuple[str, ...] = ()) -> list[str]:
    """Write a line for each supply and parameter that has an effect."""
    settings = [setting for name, setting in part.settings.items() if name not in silenced]
    columns = (
        Column("", tuple(setting.name for setting in settings)),
        Column("", tuple(format_quantity(values[s.name], s.unit, 12) for s in settings), right=True),
        Column("", tuple("default" if values[s.name] == s.default else "" for s in settings)),
        Column("", tuple(setting.meaning for setting in settings)),
    )
    return [line for text in align(columns, "    ") for line in _wrap_row(text, columns)] if settings else []


def _wrap_row(text: str, columns: tuple[Column, ...]) -> list[str]:
    """Break the last cell of a row that is too long, below its own beginning."""
    start = 4 + sum(column.width + 2 for column in columns[:-1])
    rest = wrap(text[start:], " " * start, "")
    return [text[:start] + rest[0][start:], *rest[1:]]


def _rf(design: Design) -> Iterator[str]:
    carrier = design.carrier
    frequencies = ", ".join(format_quantity(value, "Hz", 12) for value in carrier.frequency)
    degrees = ", ".join(format_quantity(value, "degC", 12) for value in design.environment.temperature)
    yield from wrap(
        f"carriers: {frequencies} at {', '.join(format_quantity(level, 'dBm') for level in carrier.level)} from"
        f" {format_quantity(carrier.impedance, 'ohm')} into {format_quantity(carrier.impedance, 'ohm')}"
    )
    yield f"temperatures: {degrees}"
    for sentence in definition_lines(design.definitions):
        yield from wrap(sentence)


def _limits(design: Design) -> Iterator[str]:
    if not design.limits:
        yield "limits: none; a run gives figures and judges nothing"
        return
    yield "limits"
    columns = (
        Column("", tuple(limit.metric for limit in design.limits)),
        Column("", tuple(limit_text(limit) for limit in design.limits)),
        Column("", tuple(METRICS[limit.metric].title for limit in design.limits)),
    )
    yield from align(columns, "  ")


def _runs(design: Design) -> Iterator[str]:
    drivers, degrees = len(design.drivers), len(design.environment.temperature)
    times = _times(drivers, "driver") + (f" and {_times(degrees, 'temperature')}" if degrees > 1 else "")
    yield f"decks, for {times}"
    yield "  static    both control states: operating point and S-parameters at every carrier"
    yield "  video     the control pulse without RF"
    yield "  check_*   envelope analysis: S-parameters by ngspice at single biases of the video run"
    yield from _sweeps(design)
    for frequency in design.carrier.frequency:
        steps = carrier_timeline(design, frequency).stop * frequency * design.numerics.carrier_points
        yield (
            f"  carrier_* carrier analysis at {format_quantity(frequency, 'Hz', 12)}: three decks of about"
            f" {float(f'{steps:.2g}'):.0f} time steps"
        )


def _sweeps(design: Design) -> Iterator[str]:
    static = design.static
    if static is None:
        return
    ends = [format_quantity(value, "Hz", 12) for value in (static.start, static.stop)]
    yield f"  sweep     both control states from {ends[0]} to {ends[1]}, {static.points} points a decade"
    if static.bias_sweep:
        currents = ", ".join(format_quantity(value, "A", 12) for value in static.bias_sweep)
        sentence = f"bias_*    once a temperature, without a driver: holding currents of {currents}"
        yield from wrap(sentence, "  ", " " * 10)


def _times(count: int, noun: str) -> str:
    return f"{count} {noun}{'s' if count != 1 else ''}"


def _distinct(junctions: Mapping[str, Junction]) -> list[Junction]:
    return list({junction.name: junction for junction in junctions.values()}.values())


def _document(design: Design) -> dict[str, Any]:
    path = design.switch.path
    return {
        "format": FORMAT,
        "title": design.title,
        "design": design.source.path.name,
        "control": {
            **design.control.model_dump(exclude={"record"}),
            "record": None if design.control.record is None else design.control.record.file,
        },
        "carrier": design.carrier.model_dump(),
        "path": {"part": path.name, "values": dict(design.switch.values)},
        "junctions": {slot: _component(junction) for slot, junction in design.switch.junctions.items()},
        "drivers": [_component(driver) for driver in design.drivers],
        "limits": [limit_document(limit) for limit in design.limits],
        "temperature": list(design.environment.temperature),
        "static": None if design.static is None else design.static.model_dump(by_alias=True),
    }


def _component(component: Junction | Driver) -> dict[str, Any]:
    return {
        "name": component.name,
        "part": component.part.name,
        "values": dict(component.values),
        "model": component.model,
        "ratings": component.ratings.stated,
    }
