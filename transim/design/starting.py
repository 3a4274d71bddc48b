"""The text of a starting design file, with every key and what it means."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any

from pydantic import BaseModel

from transim.design.fields import Choice, Count, Quantity, Series, table_keys
from transim.design.limits import Unitful
from transim.design.model import Carrier, Control, Environment, Measure, Numerics, Static
from transim.design.ratings import DriverRatings, JunctionRatings
from transim.errors import DesignError
from transim.parts.catalogue import Catalogue
from transim.parts.part import Parameter, Part, Slot
from transim.quantities import UNITS, format_quantity

__all__ = ["starting_design"]

_TITLE = "Antenna commutator of a VHF direction finder for wildlife tags"
_CONTROL = {"low": "0 V", "high": "3.3 V", "period": "50 us", "on_for": "10 us", "edge": "2 ns"}
_LIMITS = {
    "on_time": '{ max = "2 us" }',
    "off_time": '{ max = "4 us" }',
    "insertion_loss": '{ max = "1.5 dB" }',
    "isolation": '{ min = "20 dB" }',
}
_STATIC: dict[str, str | list[str]] = {
    "from": "1 MHz",
    "to": "1 GHz",
    "bias_sweep": ["10 uA", "100 uA", "1 mA", "10 mA"],
}
#: Keys whose values are no quantity, count or choice; those that name a file are shown as comments.
_PLAIN = {"record": '"command.csv"', "shortest": "false"}
_FILES = ("record",)
_LARGER_IS_BETTER = ("isolation", "return_loss", "highest_rate")
_PREFERRED_JUNCTION = "pin_lumped"


def starting_design(
    path_name: str, driver_name: str, catalogue: Catalogue, *, metrics: Mapping[str, Unitful] | None = None
) -> str:
    """Write a complete design file with a path, junctions that fit it, and a driver.

    Parameters
    ----------
    path_name, driver_name : str
        Names of a path and a driver part.
    catalogue : Catalogue
        Where they, and the junctions, are looked up.
    metrics : mapping of str to object with unit, or None
        Metrics that are listed; None: all that transim extracts.

    Returns
    -------
    str
        TOML text that `read_design` accepts: every key with its default, its range and its meaning.

    Raises
    ------
    DesignError
        If there is no such path or driver, or no junction that fits.
    NetlistError
        If a part file cannot be used.
    """
    if metrics is None:
        from transim.measure.metrics import METRICS

        metrics = METRICS
    path = catalogue.find("path", path_name)
    driver = catalogue.find("driver", driver_name)
    fitting = {slot.terminals: _fitting_junction(slot, catalogue) for slot in path.slots}
    names = {terminals: f"junction{index}" for index, terminals in enumerate(fitting, start=1)}
    lines = [
        '# A quantity is a text with its unit: "2.2 nF", "4k7 ohm", "-10 dBm". M is mega, m is milli.',
        "# Keys with a default may be left out.",
        f'title = "{_TITLE}"',
        '# parts = "my_parts"  # folder with part files of your own, relative to this file',
        "",
        "[control]  # the logic command; every time is counted from the 50 % points of its edges",
        *_table(Control, _CONTROL),
        "",
        "[carrier]",
        *_table(Carrier, {"frequency": _carriers(path)}),
        "",
        f"[switch]  # {path.summary}",
        _entry("path", f'"{path.name}"', "a part, or a part file of your own (*.cir)"),
        *_slot_entries(path, names),
        *_parameters(path.parameters),
    ]
    for terminals, part in fitting.items():
        lines += ["", f"[junction.{names[terminals]}]  # {part.summary}", *_part_entries(part)]
    lines += ["", f"[driver.{driver.name}]  # {driver.summary}", *_part_entries(driver)]
    lines += ["", "# Any number of drivers is simulated and judged side by side: add tables [driver.NAME]."]
    lines += ["", "[limits]  # each with min, max or both", *_limits(metrics)]
    lines += ["", "[measure]  # definitions that the metrics use", *_table(Measure, {})]
    lines += ["", "[environment]", *_table(Environment, {})]
    lines += ["", "[numerics]", *_table(Numerics, {})]
    lines += ["", "# [static]  # settled states against frequency, and against the holding current"]
    lines += [f"# {entry}" for entry in _table(Static, _STATIC)]
    return "\n".join(lines) + "\n"


def _carriers(path: Part) -> list[str]:
    """Return carriers at which the path does what it is for: its lines are as long as they should be at one of them."""
    lines = path.settings.get("line_frequency")
    return ["30 MHz", "150 MHz"] if lines is None else [format_quantity(lines.default, "Hz", 12)]


def _fitting_junction(slot: Slot, catalogue: Catalogue) -> Part:
    """Return the preferred junction with the terminals of a slot, else the first one."""
    parts = [catalogue.find("junction", name) for name in catalogue.names("junction")]
    fitting = [part for part in parts if part.terminals == slot.terminals]
    if not fitting:
        raise DesignError(
            f"no junction part fits the slot {slot.name}",
            expected=f"a junction part with the terminals {' '.join(slot.terminals)}",
        )
    return next((part for part in fitting if part.name == _PREFERRED_JUNCTION), fitting[0])


def _entry(key: str, value: str, meaning: str, *, active: bool = True) -> str:
    return f"{'' if active else '# '}{key} = {value}".ljust(40) + f"  # {meaning}"


def _toml(value: Any, unit: str) -> str:
    """Write a value in its unit, exactly."""
    if isinstance(value, tuple):
        return "[" + ", ".join(_toml(element, unit) for element in value) + "]"
    return repr(value) if unit == "1" else f'"{format_quantity(value, unit, 17)}"'


def _given(value: str | list[str]) -> str:
    return f'"{value}"' if isinstance(value, str) else "[" + ", ".join(f'"{text}"' for text in value) + "]"


def _table(model: type[BaseModel], given: Mapping[str, str | list[str]]) -> Iterable[str]:
    """Write every key of a table that has a model."""
    for key, field in table_keys(model).items():
        kinds = (entry for entry in field.metadata if isinstance(entry, Quantity | Series | Count | Choice))
        kind = next(kinds, None)
        meaning = str(field.description)
        if kind is None:
            yield _entry(key, _PLAIN[key], meaning, active=key not in _FILES)
            continue
        if isinstance(kind, Choice):
            yield _entry(key, f'"{field.default}"', f"{kind.expected}: {meaning}")
            continue
        if isinstance(kind, Count):
            yield _entry(key, str(field.default), f"{meaning}; {kind.low} .. {kind.high}")
            continue
        quantity = kind.quantity if isinstance(kind, Series) else kind
        meaning = f"{meaning}; {quantity.range}"
        if key in given:
            yield _entry(key, _given(given[key]), meaning)
        elif field.default is None:
            yield _entry(key, f'"{UNITS[quantity.unit].example}"', meaning, active=False)
        else:
            yield _entry(key, _toml(field.default, quantity.unit), meaning)


def _parameters(parameters: Iterable[Parameter]) -> Iterable[str]:
    for parameter in parameters:
        meaning = f"{parameter.meaning}; {parameter.range}"
        yield _entry(parameter.name, _toml(parameter.default, parameter.unit), meaning)


def _part_entries(part: Part) -> Iterable[str]:
    """Write every key of a junction or driver table."""
    yield _entry("part", f'"{part.name}"', "a part, or a part file of your own (*.cir)")
    if part.model is not None:
        kinds = [" or ".join(place.kinds) for place in part.model.places]
        card = f"one .model card of kind {' and one of kind '.join(kinds)}"
        meaning = f"file with {card}; it replaces parameters"
        yield _entry("model", '"device.lib"', meaning, active=False)
    yield from _parameters(part.settings.values())
    ratings = DriverRatings if part.role == "driver" else JunctionRatings
    without = () if part.supplies or part.role != "driver" else ("dissipation", "supply_current")
    entries = (f'{key} = "{UNITS[ratings.unit(key)].example}"' for key in ratings.model_fields if key not in without)
    yield _entry("ratings", f"{{ {', '.join(entries)} }}", "what it stands at most, any of these", active=False)


def _slot_entries(path: Part, names: Mapping[tuple[str, ...], str]) -> Iterable[str]:
    """Write which junction fills which slot."""
    if len(names) == 1:
        slots = "; ".join(f"{slot.name}: {slot.meaning}" for slot in path.slots)
        yield _entry("junction", f'"{next(iter(names.values()))}"', slots)
        return
    for slot in path.slots:
        yield _entry(slot.name, f'"{names[slot.terminals]}"', slot.meaning)


def _limits(metrics: Mapping[str, Unitful]) -> Iterable[str]:
    """Write some limits, and all the other metrics as comments."""
    for name, metric in metrics.items():
        title = getattr(metric, "title", "")
        example = UNITS[metric.unit].example
        end = "min" if name.startswith(_LARGER_IS_BETTER) else "max"
        value = _LIMITS.get(name) or f"{{ {end} = {example if metric.unit == '1' else _given(example)} }}"
        yield _entry(name, value, f"{title} [{metric.unit}]", active=name in _LIMITS)
