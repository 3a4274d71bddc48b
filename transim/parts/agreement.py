"""Agreement of a part file's header with its subcircuit."""

from __future__ import annotations

import dataclasses
import math
import re
from collections.abc import Mapping

from transim.errors import NetlistError
from transim.parts.part import ModelSlot, Part
from transim.parts.subcircuit import Subcircuit

__all__ = ["check_agreement"]

#: Parameters of a driver's subcircuit that the program sets from the levels of the command.
RESERVED = ("control_low", "control_high")


def check_agreement(part: Part, circuit: Subcircuit, lines: Mapping[tuple[str, str], int]) -> Part:
    """Check what a header says against the subcircuit.

    Parameters
    ----------
    part : Part
        As the header describes it.
    circuit : Subcircuit
        The SPICE text after the header.
    lines : mapping of (key, first field) to int
        Line of each fact of the header.

    Returns
    -------
    Part
        The part with `reserved` and `model.parameters` filled from the subcircuit.

    Raises
    ------
    NetlistError
        With the line, where the two do not agree.
    """
    _check_terminals(part, circuit, lines)
    reserved = _check_defaults(part, circuit)
    _check_calls(part, circuit, lines)
    _check_probes(part, circuit, lines)
    model = _check_model(part, circuit, lines)
    unused = [parameter.name for parameter in part.parameters if parameter.name not in circuit.words()]
    if unused:
        raise NetlistError(
            f"the subcircuit does not use its parameter {unused[0]}",
            file=part.file,
            line=lines["parameter", unused[0]],
        )
    return dataclasses.replace(part, reserved=reserved, model=model)


def _check_terminals(part: Part, circuit: Subcircuit, lines: Mapping[tuple[str, str], int]) -> None:
    if circuit.name != part.name:
        raise NetlistError(
            f"the header names {part.name}, the .subckt {circuit.name}", file=part.file, line=circuit.line
        )
    if circuit.nodes != part.terminals:
        raise NetlistError(
            f"the header's terminals are {' '.join(part.terminals)}, those of the .subckt "
            f"{' '.join(circuit.nodes) or 'none'}",
            file=part.file,
            line=circuit.line,
        )
    complaint = _terminal_complaint(part)
    if complaint:
        raise NetlistError(complaint, file=part.file, line=lines["terminals", " ".join(part.terminals)])


def _terminal_complaint(part: Part) -> str | None:
    """Say how the terminals differ from what the role has."""
    if part.role == "junction":
        if part.terminals not in (("a", "k"), ("c", "b", "e")):
            return f"a junction has the terminals a k or c b e, found {' '.join(part.terminals)}"
    elif part.role == "path":
        if set(part.ports) & set(part.bias) or {*part.ports, *part.bias} != set(part.terminals):
            return "the terminals of a path are its ports and its bias entries"
        if len(part.ports) < 2:
            return "a path has two RF ports or more"
    else:
        missing = {"ctl", *(supply.name for supply in part.supplies)} - set(part.terminals)
        if missing:
            return f"the terminals of a driver include {', '.join(sorted(missing))}"
        if not part.outputs or not all(output.startswith("out") for output in part.outputs):
            return "the terminals of a driver are ctl, out (or out1, out2, ...) and its supplies"
    return None


def _check_defaults(part: Part, circuit: Subcircuit) -> tuple[str, ...]:
    """Compare parameters and defaults; return the reserved parameters that the subcircuit takes."""
    wanted = {parameter.name: parameter.default for parameter in part.parameters}
    allowed = RESERVED if part.role == "driver" else ()
    for name in circuit.defaults:
        if name not in wanted and name not in allowed:
            raise NetlistError(
                f"the .subckt has a parameter {name} that the header does not describe",
                file=part.file,
                line=circuit.line,
            )
    for name, default in wanted.items():
        text = circuit.defaults.get(name)
        if text is None:
            raise NetlistError(
                f"the .subckt lacks the parameter {name} of the header", file=part.file, line=circuit.line
            )
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not math.isclose(value, default, rel_tol=1e-12):
            raise NetlistError(
                f"the default of {name} is {default!r} in the header and {text} in the .subckt"
                " (a plain number with an exponent is wanted)",
                file=part.file,
                line=circuit.line,
            )
    return tuple(name for name in allowed if name in circuit.defaults)


def _check_calls(part: Part, circuit: Subcircuit, lines: Mapping[tuple[str, str], int]) -> None:
    """Compare the X cards with the slots and the nested subcircuits."""
    slots = {slot.name: slot for slot in part.slots}
    nested = circuit.nested()
    for card, name, nodes in circuit.calls():
        if name in slots and nodes != len(slots[name].terminals):
            raise NetlistError(
                f"{card.text.split()[0]} gives {nodes} nodes to the slot {name}, which has the terminals "
                f"{' '.join(slots[name].terminals)}",
                file=part.file,
                line=card.line,
            )
        if name not in slots and name not in nested:
            raise NetlistError(
                f"{card.text.split()[0]} calls {name}, which is no slot and no subcircuit of this file",
                file=part.file,
                line=card.line,
            )
    called = {name for _, name, _ in circuit.calls()}
    for name in slots:
        if name not in called:
            raise NetlistError(
                f"no X card of the subcircuit calls the slot {name}", file=part.file, line=lines["slot", name]
            )


def _check_probes(part: Part, circuit: Subcircuit, lines: Mapping[tuple[str, str], int]) -> None:
    """Look for the nodes and elements that the probes name."""
    elements, words = circuit.elements, circuit.words() | set(circuit.nodes)
    for probe in part.probes:
        for _, vector in probe.terms:
            for name in re.findall(r"[\w.#]+", vector.split("[")[0].removeprefix("v(").removeprefix("i(")):
                pieces = name.split(".")
                if len(pieces) > 1:
                    known = bool(elements & set(pieces))
                else:
                    known = name in (words if vector.startswith("v(") else elements)
                if not known:
                    raise NetlistError(
                        f"the probe {probe.quantity} looks at {vector}, but the subcircuit has no {name}",
                        file=part.file,
                        line=lines["probe", probe.quantity],
                    )


def _check_model(part: Part, circuit: Subcircuit, lines: Mapping[tuple[str, str], int]) -> ModelSlot | None:
    """Look for the default cards; fill in the parameters that only these cards use."""
    checked: ModelSlot | None = None
    for place in reversed(part.model.places if part.model is not None else ()):
        _check_card(part, circuit, place, lines["model", " ".join(place.kinds)])
        elsewhere = circuit.words(without_model=place.name)
        silenced = tuple(parameter.name for parameter in part.parameters if parameter.name not in elsewhere)
        checked = dataclasses.replace(place, parameters=silenced, companion=checked)
    return checked


def _check_card(part: Part, circuit: Subcircuit, place: ModelSlot, line: int) -> None:
    """Look for the default card of one place."""
    cards = [card.text.split(None, 2) for card in circuit.outer if card.text.lower().startswith(".model")]
    named = [fields for fields in cards if fields[1].lower() == place.name]
    if len(named) != 1:
        raise NetlistError(f"the subcircuit needs one .model card named {place.name}", file=part.file, line=line)
    kind = re.split(r"[\s(]", named[0][2])[0].upper() if len(named[0]) > 2 else ""
    if kind not in place.kinds:
        raise NetlistError(
            f"the default card {place.name} is of kind {kind}, the header permits {' '.join(place.kinds)}",
            file=part.file,
            line=line,
        )
