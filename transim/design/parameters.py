"""Parameters of a design by dotted name, and the design with some of them changed.

The names are those of the design file: ``control.edge``, ``carrier.level``, ``environment.temperature``,
``switch.dc_block``, ``junction.hp7.lifetime``, ``driver.fast.speedup_cap``, ``driver.fast.vp``.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TypeVar

from pydantic import BaseModel, ValidationError

from transim.design.fields import Quantity, Series, shown
from transim.design.frozen import FrozenMapping
from transim.design.model import Design, Driver, Junction
from transim.errors import DesignError
from transim.parts.nearest import nearest_name

__all__ = ["changed_design", "find_parameter", "parameter_value", "parameters_of"]

#: Tables with a model whose numbers may be varied; definitions and numerics are no part of the circuit.
_TABLES = ("control", "carrier", "environment")

_Component = TypeVar("_Component", Junction, Driver)


def parameters_of(design: Design) -> dict[str, Quantity]:
    """Return every parameter that can be varied.

    Parameters
    ----------
    design : Design
        The design.

    Returns
    -------
    dict of str to Quantity
        Unit and range by dotted name, in the order of the design file.
    """
    found: dict[str, Quantity] = {}
    for table in _TABLES:
        if table == "control" and design.control.record is not None:
            continue
        model: BaseModel = getattr(design, table)
        for name, field in type(model).model_fields.items():
            for kind in field.metadata:
                if isinstance(kind, Quantity | Series):
                    found[f"{table}.{name}"] = kind if isinstance(kind, Quantity) else kind.quantity
    path = design.switch.path
    found |= {f"switch.{name}": Quantity.of(setting) for name, setting in path.settings.items()}
    for component, prefix in _components(design):
        # a model card of its own makes some parameters of the part idle
        slot = component.part.model
        idle = slot.parameters if slot is not None and component.model is not None else ()
        settings = component.part.settings.items()
        found |= {f"{prefix}.{name}": Quantity.of(setting) for name, setting in settings if name not in idle}
    return found


def find_parameter(design: Design, name: str) -> Quantity:
    """Return unit and range of one parameter.

    Parameters
    ----------
    design : Design
        The design.
    name : str
        Its dotted name.

    Returns
    -------
    Quantity

    Raises
    ------
    DesignError
        If the design has no such parameter; says which one is nearest.
    """
    known = parameters_of(design)
    if name not in known:
        raise DesignError(
            "the design has no such parameter",
            key=name,
            expected="a dotted name, for example " + ", ".join(_examples(known)),
            found=shown(name),
            nearest=nearest_name(name, known),
        )
    return known[name]


def parameter_value(design: Design, name: str) -> float | None:
    """Return the value that a parameter has.

    Parameters
    ----------
    design : Design
        The design.
    name : str
        Dotted name of one of its parameters.

    Returns
    -------
    float or None
        The value [unit of the parameter]; None where the design has several, such as temperatures.

    Raises
    ------
    DesignError
        If the design has no such parameter.
    """
    find_parameter(design, name)
    table, *rest = name.split(".")
    if table in _TABLES:
        value = getattr(getattr(design, table), rest[0])
        if isinstance(value, tuple):
            return float(value[0]) if len(value) == 1 else None
        return float(value)
    if table == "switch":
        return design.switch.values[rest[0]]
    return next(component.values[rest[1]] for component, prefix in _components(design) if name == f"{prefix}.{rest[1]}")


def changed_design(design: Design, values: Mapping[str, float]) -> Design:
    """Return the design with some parameters changed.

    Parameters
    ----------
    design : Design
        The design; it stays as it is.
    values : mapping of str to float
        New values by dotted name [unit of each parameter]. Where the design has several temperatures, levels or
        carriers, the new value takes the place of all.

    Returns
    -------
    Design

    Raises
    ------
    DesignError
        If a name is not known, a value is out of its range, or values exclude each other.
    """
    tables: dict[str, dict[str, float]] = {}
    known = parameters_of(design)
    for name, value in values.items():
        kind = known[name] if name in known else find_parameter(design, name)
        try:
            number = kind.read(value, from_file=False)
        except DesignError as exc:
            raise DesignError(exc.message, key=name, expected=exc.expected, found=exc.found) from exc
        table, _, key = name.rpartition(".")
        tables.setdefault(table, {})[key] = number
    update: dict[str, object] = {
        table: _changed_table(design, table, tables.pop(table)) for table in _TABLES if table in tables
    }
    if tables:
        update |= _changed_parts(design, tables)
    return design.model_copy(update=update)


def _changed_table(design: Design, table: str, values: Mapping[str, float]) -> BaseModel:
    """Return a table with a model with new values, checked as a whole."""
    model: BaseModel = getattr(design, table)
    try:
        return type(model).model_validate({**dict(model), **values})
    except ValidationError as exc:
        detail = exc.errors(include_url=False)[0]
        cause = detail.get("ctx", {}).get("error")
        key = ".".join(map(str, (table, *detail["loc"])))
        if isinstance(cause, DesignError):
            raise DesignError(cause.message, key=key, expected=cause.expected, found=cause.found) from exc
        raise DesignError("the value cannot be used", key=key) from exc


def _changed_parts(design: Design, tables: Mapping[str, Mapping[str, float]]) -> dict[str, object]:
    """Return switch and drivers with new values."""
    switch = design.switch
    junctions = {
        slot: _with_values(junction, tables.get(f"junction.{junction.name}"))
        for slot, junction in switch.junctions.items()
    }
    path = {**switch.values, **tables.get("switch", {})}
    return {
        "switch": switch.model_copy(
            update={"values": FrozenMapping(path), "junctions": FrozenMapping(junctions)},
        ),
        "drivers": tuple(_with_values(driver, tables.get(f"driver.{driver.name}")) for driver in design.drivers),
    }


def _with_values(component: _Component, values: Mapping[str, float] | None) -> _Component:
    if not values:
        return component
    return component.model_copy(update={"values": FrozenMapping({**component.values, **values})})


def _components(design: Design) -> Iterator[tuple[Junction | Driver, str]]:
    for junction in {j.name: j for j in design.switch.junctions.values()}.values():
        yield junction, f"junction.{junction.name}"
    for driver in design.drivers:
        yield driver, f"driver.{driver.name}"


def _examples(known: Mapping[str, object]) -> list[str]:
    """Return one name of each table, the last ones first: components are what is varied most."""
    by_table = {name.partition(".")[0]: name for name in known}
    return [by_table[table] for table in ("driver", "junction", "switch", "control") if table in by_table]
