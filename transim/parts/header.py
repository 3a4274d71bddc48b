"""The header of a part file: one fact a line, `* key: value`, before the `.subckt`.

::

    * transim part
    * name: pin_lumped
    * role: junction
    * terminals: a k
    * summary: p-i-n diode with one lumped store of charge in its I-region
    * parameter: lifetime | s | 1 us | 10 ps .. 1 ms | ambipolar carrier lifetime in the I-region
    * probe: charge | C | 1e-9 * v(q)
    .subckt pin_lumped a k lifetime=1e-6
    ...
    .ends

A range is ``low .. high``; ``-`` leaves an end open, and ``> low`` excludes the lower end itself.
"""

from __future__ import annotations

import math
import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from transim.errors import NetlistError, QuantityError
from transim.parts.agreement import check_agreement
from transim.parts.cards import read_netlist_text
from transim.parts.nearest import nearest_name
from transim.parts.part import ROLES, ModelSlot, Parameter, Part, Probe, Slot, Throw
from transim.parts.subcircuit import read_subcircuit
from transim.quantities import UNITS, parse_quantity

__all__ = ["FIRST_LINE", "ModelSlot", "Parameter", "Part", "Probe", "Slot", "read_part", "read_role"]

#: What the first line of every part file says.
FIRST_LINE = "* transim part"

_ALWAYS = ("name", "role", "terminals", "summary", "source", "note", "parameter", "model", "probe")
_OF_ROLE = {
    "junction": (),
    "path": ("ports", "bias", "through", "passes", "throw", "inverted", "slot"),
    "driver": ("supply",),
}
_REPEATED = ("source", "note", "parameter", "model", "probe", "slot", "supply", "throw")
_FACT = re.compile(r"\*\s*([a-z]+)\s*:\s*(.*)")
_NAME = re.compile(r"[a-z][a-z0-9_]*")
_VECTOR = r"v\(\s*[\w.#]+(?:\s*,\s*[\w.#]+)?\s*\)|i\(\s*[\w.#]+\s*\)|@[\w.#]+\[\w+\]"
_NUMBER = r"(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_TERM = re.compile(rf"\s*(?P<sign>[+-])?\s*(?:(?P<scale>{_NUMBER})\s*\*\s*)?(?P<vector>{_VECTOR})\s*")
_KEYS_OF_DESIGN = {"junction": ("part", "model"), "path": ("path", "junction"), "driver": ("part", "model")}


@dataclass(frozen=True)
class _Fact:
    line: int
    key: str
    value: str


class _Header:
    """The facts of one part file, with errors that name the line."""

    def __init__(self, file: Path, facts: Sequence[_Fact]) -> None:
        self.file = file
        self.facts = tuple(facts)

    def fail(self, message: str, line: int | None = 1) -> NetlistError:
        return NetlistError(message, file=self.file, line=line)

    def all(self, key: str) -> list[_Fact]:
        return [fact for fact in self.facts if fact.key == key]

    def optional(self, key: str) -> _Fact | None:
        found = self.all(key)
        return found[0] if found else None

    def one(self, key: str) -> _Fact:
        fact = self.optional(key)
        if fact is None:
            raise self.fail(f'the header has no line "* {key}: ..."')
        return fact

    def names(self, fact: _Fact) -> tuple[str, ...]:
        names = tuple(fact.value.split())
        for name in names:
            self.name(name, fact)
        if not names or len(set(names)) < len(names):
            raise self.fail(f'"{fact.key}" wants different names, found "{fact.value}"', fact.line)
        return names

    def name(self, text: str, fact: _Fact) -> str:
        if _NAME.fullmatch(text) is None:
            raise self.fail(f'"{text}" is no name: a to z first, then a to z, 0 to 9 and _', fact.line)
        return text

    def fields(self, fact: _Fact, count: int, pattern: str) -> list[str]:
        fields = [field.strip() for field in fact.value.split("|", count - 1)]
        if len(fields) < count or not all(fields):
            raise self.fail(f'write "* {fact.key}: {pattern}"', fact.line)
        return fields

    def quantity(self, text: str, unit: str, fact: _Fact) -> float:
        try:
            return parse_quantity(text, unit)
        except QuantityError as exc:
            if text == "0":
                return 0.0
            raise self.fail(f"{fact.key}: {exc}", fact.line) from exc

    def unit(self, text: str, fact: _Fact) -> str:
        if text not in UNITS:
            raise self.fail(f'"{text}" is no unit; known are {", ".join(UNITS)}', fact.line)
        return text


def _read_facts(file: Path, text: str) -> tuple[_Header, str, int]:
    """Return the header, the SPICE text after it, and the line at which that starts."""
    lines = text.split("\n")
    if lines[0].strip() != FIRST_LINE:
        raise NetlistError(f'the first line of a part file is "{FIRST_LINE}"', file=file, line=1)
    facts: list[_Fact] = []
    end = 1
    while end < len(lines) and lines[end].startswith("*"):
        if lines[end].strip("* \t"):
            match = _FACT.fullmatch(lines[end].strip())
            if match is None:
                raise NetlistError(
                    'write "* key: value", or put an empty line between the header and other comments',
                    file=file,
                    line=end + 1,
                )
            facts.append(_Fact(end + 1, match[1], match[2].strip()))
        end += 1
    return _Header(file, facts), "\n".join(lines[end:]).strip("\n") + "\n", _first_line(lines, end)


def _first_line(lines: Sequence[str], end: int) -> int:
    """Return the number of the first line at or after index `end` that is not empty."""
    while end < len(lines) - 1 and not lines[end]:
        end += 1
    return end + 1


def _read_role(header: _Header) -> str:
    fact = header.one("role")
    if fact.value not in ROLES:
        raise header.fail(f'the role is one of {", ".join(ROLES)}, found "{fact.value}"', fact.line)
    return fact.value


def _check_keys(header: _Header, role: str) -> None:
    """Refuse keys that are unknown, not of this role, empty or repeated."""
    known = (*_ALWAYS, *_OF_ROLE[role])
    seen: set[str] = set()
    for fact in header.facts:
        if fact.key not in known:
            nearest = nearest_name(fact.key, known)
            hint = f"; did you mean {nearest}?" if nearest else f"; known are {', '.join(known)}"
            raise header.fail(f'the header of a {role} has no key "{fact.key}"{hint}', fact.line)
        if not fact.value:
            raise header.fail(f'"{fact.key}" has no value', fact.line)
        if fact.key in seen and fact.key not in _REPEATED:
            raise header.fail(f'"{fact.key}" stands twice', fact.line)
        seen.add(fact.key)


def _read_parameter(header: _Header, fact: _Fact) -> Parameter:
    name, unit, default, limits, meaning = header.fields(
        fact, 5, "name | unit | default | low .. high | meaning"
    )
    header.name(name, fact)
    header.unit(unit, fact)
    lower, dots, upper = (piece.strip() for piece in limits.partition(".."))
    if not dots or not lower or not upper:
        raise header.fail(f'write the range as "low .. high", found "{limits}"', fact.line)
    low_open = lower.startswith(">")
    lower = lower.removeprefix(">").strip()
    low = -math.inf if lower == "-" else header.quantity(lower, unit, fact)
    high = math.inf if upper == "-" else header.quantity(upper, unit, fact)
    parameter = Parameter(name, unit, header.quantity(default, unit, fact), low, high, low_open, meaning)
    if not parameter.admits(parameter.default):
        raise header.fail(f"the default of {name}, {default}, is outside its range {limits}", fact.line)
    return parameter


def _read_parameters(header: _Header, key: str, taken: set[str]) -> tuple[Parameter, ...]:
    parameters = []
    for fact in header.all(key):
        parameter = _read_parameter(header, fact)
        if parameter.name in taken:
            raise header.fail(f'the name "{parameter.name}" is taken already; choose another', fact.line)
        taken.add(parameter.name)
        parameters.append(parameter)
    return tuple(parameters)


def _read_slots(header: _Header) -> tuple[Slot, ...]:
    slots: list[Slot] = []
    for fact in header.all("slot"):
        name, terminals, meaning = header.fields(fact, 3, "name | terminals | meaning")
        header.name(name, fact)
        if name in {slot.name for slot in slots}:
            raise header.fail(f'the slot "{name}" stands twice', fact.line)
        slots.append(Slot(name, header.names(_Fact(fact.line, "slot", terminals)), meaning))
    return tuple(slots)


def _read_probe(header: _Header, fact: _Fact) -> Probe:
    quantity, unit, expression = header.fields(fact, 3, "quantity | unit | expression")
    header.name(quantity, fact)
    header.unit(unit, fact)
    terms: list[tuple[float, str]] = []
    position = 0
    while position < len(expression):
        match = _TERM.match(expression, position)
        if match is None or (terms and not match["sign"]):
            raise header.fail(
                "write a probe as a sum of v(node), v(node,node), i(source) and @device[parameter], each with"
                f' or without "number *" before it; not understood: "{expression[position:]}"',
                fact.line,
            )
        scale = float(match["scale"] or 1.0) * (-1.0 if match["sign"] == "-" else 1.0)
        vector = re.sub(r"\s", "", match["vector"]).lower()
        # ngspice saves node voltages, not differences: v(a,b) becomes v(a) - v(b).
        nodes = vector[2:-1].split(",") if vector.startswith("v(") else []
        terms += [(scale, f"v({nodes[0]})"), (-scale, f"v({nodes[1]})")] if nodes[1:] else [(scale, vector)]
        position = match.end()
    return Probe(quantity, unit, tuple(terms))


def _read_model(header: _Header) -> ModelSlot | None:
    found: ModelSlot | None = None
    taken: set[str] = set()
    for fact in reversed(header.all("model")):
        fields = [field.strip() for field in fact.value.split("|", 2)]
        kinds = tuple(fields[0].split())
        if len(fields) < 2 or not kinds or set(kinds) - {"D", "NPN", "PNP"}:
            raise header.fail('write "* model: kinds | name", the kinds out of D, NPN and PNP', fact.line)
        if taken & {*kinds, fields[1]}:
            raise header.fail("two places for a model need different kinds and names", fact.line)
        taken |= {*kinds, fields[1]}
        found = ModelSlot(kinds, header.name(fields[1], fact), companion=found)
    return found


def _read_throws(header: _Header, ports: tuple[str, ...], bias: tuple[str, ...]) -> tuple[Throw, ...]:
    """Return the ways of the RF: each from its own line, or the only one from `through` and `passes`."""
    facts = header.all("throw")
    if not facts:
        if len(bias) != 1:
            raise header.fail(
                f"a path with {len(bias)} bias entries states its ways by "
                '"* throw: name | from to | high or low | bias"',
                header.one("bias").line,
            )
        through = _read_through(header, ports)
        return (Throw(through[1], through, _read_passes(header), bias[0]),)
    for key in ("through", "passes"):
        fact = header.optional(key)
        if fact is not None:
            raise header.fail(f'"{key}" and "throw" exclude each other', fact.line)
    throws: list[Throw] = []
    for fact in facts:
        name, pair, state, entry = header.fields(fact, 4, "name | from to | high or low | bias entry")
        header.name(name, fact)
        if name in {throw.name for throw in throws}:
            raise header.fail(f'the throw "{name}" stands twice', fact.line)
        through = _port_pair(header, _Fact(fact.line, "throw", pair), ports)
        if state not in ("high", "low"):
            raise header.fail(f'RF passes while the command is high or low, found "{state}"', fact.line)
        if entry not in bias:
            raise header.fail(f'the bias entry of a throw is one of {" ".join(bias)}, found "{entry}"', fact.line)
        throws.append(Throw(name, through, state == "high", entry))
    return tuple(throws)


def _read_inverted(header: _Header, bias: tuple[str, ...]) -> tuple[str, ...]:
    fact = header.optional("inverted")
    if fact is None:
        return ()
    names = header.names(fact)
    if set(names) - set(bias):
        raise header.fail(f'"inverted" names bias entries out of {" ".join(bias)}, found "{fact.value}"', fact.line)
    return names


def _read_passes(header: _Header) -> bool:
    fact = header.one("passes")
    if fact.value not in ("biased", "unbiased"):
        raise header.fail(f'"passes" is biased or unbiased, found "{fact.value}"', fact.line)
    return fact.value == "biased"


def _read_through(header: _Header, ports: tuple[str, ...]) -> tuple[str, str]:
    fact = header.optional("through")
    if fact is None and len(ports) == 2:
        return ports[0], ports[1]
    return _port_pair(header, fact or header.one("through"), ports)


def _port_pair(header: _Header, fact: _Fact, ports: tuple[str, ...]) -> tuple[str, str]:
    through = header.names(fact)
    if len(through) != 2 or set(through) - set(ports):
        raise header.fail(f'"{fact.key}" names two of the ports {" ".join(ports)}', fact.line)
    return through[0], through[1]


def read_role(file: Path) -> str | None:
    """Read only the role of a part file.

    Parameters
    ----------
    file : Path
        Any SPICE file.

    Returns
    -------
    str or None
        The role; None if the file is no part file.

    Raises
    ------
    NetlistError
        If the file cannot be read, or is a part file without a valid role.
    """
    text = read_netlist_text(file)
    if text.partition("\n")[0].strip() != FIRST_LINE:
        return None
    return _read_role(_read_facts(file, text)[0])


def read_part(path: Path) -> Part:
    """Read a part file and check its header against its subcircuit.

    Parameters
    ----------
    path : Path
        The part file; its name without ``.cir`` is the part's name.

    Returns
    -------
    Part
        What the file describes.

    Raises
    ------
    NetlistError
        With file and line, if the header is incomplete or not understood, or does not agree with the
        subcircuit: its name, terminals, parameters and defaults, slots, probes and model.
    """
    header, body, first_line = _read_facts(path, read_netlist_text(path))
    role = _read_role(header)
    _check_keys(header, role)
    fact = header.one("name")
    name = header.name(fact.value, fact)
    if name != path.stem:
        raise header.fail(f"the part is named {name}, so its file must be {name}.cir", fact.line)
    slots = _read_slots(header)
    taken = {*_KEYS_OF_DESIGN[role], *(slot.name for slot in slots)}
    supplies = _read_parameters(header, "supply", taken)
    ports = header.names(header.one("ports")) if role == "path" else ()
    bias = header.names(header.one("bias")) if role == "path" else ()
    part = Part(
        name=name,
        role=role,
        file=path,
        terminals=header.names(header.one("terminals")),
        summary=header.one("summary").value,
        sources=tuple(fact.value for fact in header.all("source")),
        notes=tuple(fact.value for fact in header.all("note")),
        parameters=_read_parameters(header, "parameter", taken),
        supplies=supplies,
        ports=ports,
        bias=bias,
        throws=_read_throws(header, ports, bias) if role == "path" else (),
        inverted=_read_inverted(header, bias),
        slots=slots,
        probes=tuple(_read_probe(header, fact) for fact in header.all("probe")),
        model=_read_model(header),
        reserved=(),
        body=body,
    )
    lines = {(fact.key, " ".join(fact.value.split("|")[0].split())): fact.line for fact in header.facts}
    return check_agreement(part, read_subcircuit(body, file=path, first_line=first_line), lines)
