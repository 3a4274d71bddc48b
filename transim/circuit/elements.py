"""The flattened circuit: what ngspice prints for ``listing expand``, read into elements.

ngspice has by then expanded every subcircuit and evaluated every ``{expression}``, so each line is one
primitive element with plain numbers, whoever wrote the netlist.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

from transim.circuit.expression import Expression, ExpressionError, parse_expression, spice_number
from transim.errors import LinearisationError, NetlistError

__all__ = [
    "Behavioural", "Circuit", "Coupling", "Device", "Element", "Line", "Model", "Opaque", "opaque_device",
    "read_listing",
]

_LISTED = re.compile(r"^\s*(\d+) : (.*)$")
_OPTION = re.compile(r"\s(?:reciproctc|reciprocm|tc1|tc2|m|temp|dtemp)\s*=", re.IGNORECASE)
_ASSIGNMENT = re.compile(r"([a-z_]\w*)\s*=\s*", re.IGNORECASE)

#: Why an element letter stops the envelope solver, and what the user can do.
_REFUSED = {
    "m": "MOSFET",
    "j": "JFET",
    "z": "MESFET",
    "o": "lossy transmission line",
    "u": "RC line",
    "y": "lossy transmission line",
    "p": "coupled lines",
    "s": "voltage-controlled switch",
    "w": "current-controlled switch",
    "a": "code model",
    "n": "compiled model",
}

#: What ngspice prints for a VDMOS, and what it reads.
_VDMOS = re.compile(r"^(\.model\s+\S+\s+)vdmos([np])\s*\(", re.IGNORECASE)
_VDMOS_KINDS = {"n": "vdmos(", "p": "vdmos(pchan "}
#: Terminals of elements whose line does not tell by a model's name where they end.
_TERMINALS = {"r": 2, "c": 2, "l": 2, "b": 2, "e": 2, "g": 2, "f": 2, "h": 2, "v": 2, "i": 2, "w": 2, "t": 4, "k": 0}
#: Elements whose current depends on the voltages at their own terminals only.
_ALONE = "rcmjzsdq"


@dataclass(frozen=True)
class Model:
    """A ``.model`` card: lower-case kind and parameters."""

    name: str
    kind: str
    parameters: Mapping[str, float]


@dataclass(frozen=True)
class Element:
    """R, L, C, V, I, E, G, F or H with constant value.

    Attributes
    ----------
    name : str
        Flattened name; its first letter is its kind.
    nodes : tuple of str
        Output nodes, plus node first; for E and G the two controlling nodes follow.
    value : float
        Ohm, henry, farad, or gain; 0 for V and I, whose value the envelope does not need.
    source : str or None
        Controlling source of F and H.
    """

    name: str
    nodes: tuple[str, ...]
    value: float
    source: str | None = None


@dataclass(frozen=True)
class Coupling:
    """K: two inductors and their coupling factor."""

    name: str
    inductors: tuple[str, str]
    factor: float


@dataclass(frozen=True)
class Device:
    """D or Q with its model and instance parameters (``area``, ``m``)."""

    name: str
    nodes: tuple[str, ...]
    model: Model
    parameters: Mapping[str, float]


@dataclass(frozen=True)
class Line:
    """T: lossless line between two ports, each a node pair; characteristic impedance [ohm] and delay [s]."""

    name: str
    nodes: tuple[str, str, str, str]
    impedance: float
    delay: float


@dataclass(frozen=True)
class Behavioural:
    """B: current or voltage source given by an expression; ``quantity`` is ``i`` or ``v``."""

    name: str
    nodes: tuple[str, str]
    quantity: str
    law: Expression


@dataclass(frozen=True)
class Opaque:
    """An element that has no small-signal form here; it still stands in decks.

    Attributes
    ----------
    name : str
        Flattened name.
    nodes : tuple of str
        Its terminals, in the order of its line.
    reason : LinearisationError
        Why it has no form.
    rest : str or None
        What follows the nodes in its line, where that depends on no other element: then its line with other nodes
        is the same element elsewhere. None otherwise.
    """

    name: str
    nodes: tuple[str, ...]
    reason: LinearisationError
    rest: str | None


@dataclass(frozen=True)
class Circuit:
    """All elements of a flattened netlist.

    Attributes
    ----------
    elements, couplings, devices, behaviourals, delays : tuple
        In the order of the listing; `delays` are the lines.
    opaque : tuple of Opaque
        Elements that have no small-signal form here; nothing is raised, so that decks of such circuits still run.
    lines : tuple of str
        The listing without line numbers.
    """

    elements: tuple[Element, ...]
    couplings: tuple[Coupling, ...]
    devices: tuple[Device, ...]
    behaviourals: tuple[Behavioural, ...]
    opaque: tuple[Opaque, ...]
    lines: tuple[str, ...]
    delays: tuple[Line, ...] = ()

    @property
    def model_cards(self) -> tuple[str, ...]:
        """Its ``.model`` lines in a form that ngspice reads again: of what it prints for a VDMOS it does not."""
        cards = (line for line in self.lines if line.lower().startswith(".model"))
        return tuple(_VDMOS.sub(lambda match: match[1] + _VDMOS_KINDS[match[2].lower()], card) for card in cards)

    @property
    def refused(self) -> tuple[LinearisationError, ...]:
        """Why each of the elements without a small-signal form has none."""
        return tuple(element.reason for element in self.opaque)

    @property
    def nodes(self) -> tuple[str, ...]:
        """Every node except ground, in order of appearance."""
        seen: dict[str, None] = {}
        parts: tuple[Element | Device | Behavioural | Line | Opaque, ...]
        parts = (*self.elements, *self.devices, *self.behaviourals, *self.delays, *self.opaque)
        for part in parts:
            for node in part.nodes:
                seen.setdefault(node)
        seen.pop("0", None)
        return tuple(seen)


def listing_lines(log: str) -> tuple[str, ...]:
    """Cut the numbered listing out of what ngspice printed, without title and line numbers."""
    return tuple(match[2].strip() for match in map(_LISTED.match, log.splitlines()) if match)


def read_listing(log: str) -> Circuit:
    """Read the output of ``listing expand``.

    Parameters
    ----------
    log : str
        Standard output of ngspice, the listing somewhere in it.

    Returns
    -------
    Circuit

    Raises
    ------
    NetlistError
        If there is no listing or a line of it cannot be read.
    """
    lines = listing_lines(log)
    if not lines:
        raise NetlistError("ngspice printed no expanded listing of the netlist")
    models = {model.name: model for model in map(_read_model, lines) if model is not None}
    elements: list[Element] = []
    couplings: list[Coupling] = []
    devices: list[Device] = []
    behaviourals: list[Behavioural] = []
    delays: list[Line] = []
    opaque: list[Opaque] = []
    for line in lines:
        if not line[:1].isalpha():
            continue
        try:
            part = _read_element(line, models)
        except LinearisationError as error:
            opaque.append(_opaque(line, models, error))
            continue
        except (ValueError, IndexError, KeyError) as error:
            reason = LinearisationError(line.split()[0].upper(), f"cannot read its line {line!r} ({error})")
            opaque.append(_opaque(line, models, reason))
            continue
        for kind, home in (
            (Element, elements),
            (Coupling, couplings),
            (Device, devices),
            (Behavioural, behaviourals),
            (Line, delays),
        ):
            if isinstance(part, kind):
                home.append(part)  # type: ignore[arg-type]
    return Circuit(
        tuple(elements),
        tuple(couplings),
        tuple(devices),
        tuple(behaviourals),
        tuple(opaque),
        lines,
        tuple(delays),
    )


def opaque_device(device: Device, line: str, reason: LinearisationError) -> Opaque:
    """Return a diode or transistor as an element without a form.

    Parameters
    ----------
    device : Device
        As it was read.
    line : str
        Its line of the listing.
    reason : LinearisationError
        Why its law has no form.
    """
    return Opaque(device.name, device.nodes, reason, " ".join(line.split()[1 + len(device.nodes) :]))


def _opaque(line: str, models: Mapping[str, Model], reason: LinearisationError) -> Opaque:
    """Find the terminals of an element that has no form."""
    words = line.split()
    letter = words[0][0].lower()
    if letter in _TERMINALS:
        count = _TERMINALS[letter]
    else:
        named = (k for k in range(3, len(words)) if words[k].lower() in models)
        count = next(named, len(words)) - 1
    nodes = tuple(_node(word) for word in words[1 : 1 + count])
    return Opaque(words[0].lower(), nodes, reason, " ".join(words[1 + count :]) if letter in _ALONE else None)


def _read_model(line: str) -> Model | None:
    if not line.lower().startswith(".model"):
        return None
    text = line.lower().replace("(", " ").replace(")", " ").replace(",", " ")
    words = text.split(None, 3)
    if len(words) < 3:
        return None
    return Model(words[1], words[2], _assignments(words[3] if len(words) > 3 else "", words[1]))


def _assignments(text: str, owner: str) -> dict[str, float]:
    pieces = _ASSIGNMENT.split(text)
    if pieces[0].strip():
        raise LinearisationError(owner, f"cannot read {pieces[0].strip()!r}")
    found: dict[str, float] = {}
    for name, value in zip(pieces[1::2], pieces[2::2], strict=True):
        words = value.split()
        try:
            found[name.lower()] = spice_number(words[0]) if words else 1.0
        except ValueError:
            found[name.lower()] = float("nan")
    return found


def _split(words: list[str]) -> tuple[list[str], dict[str, float]]:
    """Divide words into plain ones and ``name=value`` ones (blanks around ``=`` allowed)."""
    text = " ".join(words)
    match = re.search(r"[A-Za-z_]\w*\s*=", text)
    if match is None:
        return words, {}
    return text[: match.start()].split(), _assignments(text[match.start() :], words[0])


def _node(name: str) -> str:
    lower = name.lower()
    return "0" if lower == "gnd" else lower


def _read_element(
    line: str, models: Mapping[str, Model]
) -> Element | Coupling | Device | Behavioural | Line:
    if line[0] in "dDqQ":
        words = line.split()
        return _read_device(words[0].lower(), words, models)
    return _read_alone(line)


# most lines are the same in all points of a study
@lru_cache(maxsize=4096)
def _read_alone(line: str) -> Element | Coupling | Behavioural | Line:
    """Read an element that needs no model."""
    words = line.split()
    name = words[0].lower()
    letter = name[0]
    if letter in _REFUSED:
        raise LinearisationError(name.upper(), f"{_REFUSED[letter]} in the circuit; use the carrier analysis")
    if letter == "b":
        return _read_behavioural(name, line)
    if letter == "t":
        return _read_line(name, words)
    if letter == "k":
        return Coupling(name, (words[1].lower(), words[2].lower()), spice_number(words[3]))
    if letter in "vi":
        return Element(name, (_node(words[1]), _node(words[2])), 0.0)
    if letter in "efgh":
        return _read_controlled(name, line)
    if letter in "rlc":
        return _read_passive(name, words)
    raise LinearisationError(
        name.upper(), f"element letter {letter.upper()!r} is not known to the envelope solver"
    )


def _read_controlled(name: str, line: str) -> Element:
    plain, extra = _split(line.split())
    multiplier = extra.pop("m", 1.0) if name[0] in "fg" else 1.0
    if extra or len(plain) != (6 if name[0] in "eg" else 5):
        raise LinearisationError(name.upper(), f"cannot read this form of controlled source: {line!r}")
    gain = spice_number(plain[-1]) * multiplier
    if name[0] in "eg":
        return Element(name, tuple(map(_node, plain[1:5])), gain)
    return Element(name, (_node(plain[1]), _node(plain[2])), gain, plain[3].lower())


def _read_passive(name: str, words: list[str]) -> Element:
    plain, extra = _split(words)
    value = extra.pop({"r": "r", "l": "l", "c": "c"}[name[0]], None)
    if value is None:
        value = spice_number(plain[3])
    multiplier = extra.pop("m", 1.0)
    extra.pop("ic", None)
    unknown = {key for key, number in extra.items() if number != 0.0}
    if unknown or len(plain) > 4:
        what = ", ".join(sorted(unknown)) or plain[4]
        raise LinearisationError(name.upper(), f"its parameter {what} is not known to the envelope solver")
    if name[0] == "r":
        # ngspice 39 itself replaces a resistance of exactly zero by 1 mohm
        value = (value or 1e-3) / multiplier
    else:
        value = value * multiplier if name[0] == "c" else value / multiplier
    return Element(name, (_node(words[1]), _node(words[2])), value)


def _read_device(name: str, words: list[str], models: Mapping[str, Model]) -> Device:
    place = next((k for k in range(3, len(words)) if words[k].lower() in models), None)
    if place is None:
        raise LinearisationError(name.upper(), "its model is not in the listing")
    model = models[words[place].lower()]
    rest, parameters = _split([name, *words[place + 1 :]])
    numbers = [word for word in rest[1:] if word.lower() != "off"]
    if numbers:
        parameters = {"area": spice_number(numbers[0]), **parameters}
    return Device(name, tuple(_node(word) for word in words[1:place]), model, parameters)


def _read_behavioural(name: str, line: str) -> Behavioural:
    words = line.split(None, 3)
    match = re.match(r"([iv])\s*=\s*(.*)$", words[3], re.IGNORECASE)
    if match is None:
        raise LinearisationError(name.upper(), f"cannot read its line {line!r}")
    text, options = _split_options(name, match[2])
    multiplier = options.pop("m", 1.0)
    if multiplier != 1.0:
        if match[1].lower() == "v" or options.get("reciprocm", 0.0) != 0.0:
            raise LinearisationError(name.upper(), "its parameter m is not known to the envelope solver")
        text = f"{multiplier!r}*({text})"
    for option in ("tc1", "tc2"):
        if options.get(option, 0.0) != 0.0:
            raise LinearisationError(name.upper(), f"its parameter {option} is not known to the envelope solver")
    try:
        law = parse_expression(text)
    except ExpressionError as error:
        raise LinearisationError(name.upper(), str(error)) from error
    return Behavioural(name, (_node(words[1]), _node(words[2])), match[1].lower(), law)


def _split_options(name: str, text: str) -> tuple[str, dict[str, float]]:
    """Cut off the options after an expression; ngspice appends some to what it makes of behavioural R, C and L."""
    match = _OPTION.search(text)
    return (text, {}) if match is None else (text[: match.start()], _assignments(text[match.start() :], name.upper()))


def _read_line(name: str, words: list[str]) -> Line:
    plain, values = _split(words)
    impedance, delay = values.get("z0", 50.0), values.get("td")
    if delay is None and "f" in values:
        delay = values.get("nl", 0.25) / values["f"]
    if delay is None or len(plain) != 5 or not impedance > 0.0:
        raise LinearisationError(name.upper(), "a line needs four nodes, z0, and td or f")
    first, second, third, fourth = map(_node, plain[1:])
    return Line(name, (first, second, third, fourth), impedance, delay)
