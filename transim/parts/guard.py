"""What may stand in a netlist from elsewhere: circuit elements and the cards that describe them, nothing that acts.

ngspice runs commands from a deck (``.control`` blocks, comment lines that begin with ``*#``), reads files
(``.include``, ``.lib``, sources with a file) and writes them. A part file or a model card is only data, so its text
is checked line by line against a list of what is allowed, before it gets near a deck.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from pathlib import Path

from transim.errors import NetlistError

__all__ = ["ELEMENTS", "MODELS", "PERMITTED", "check_card", "check_lines"]

#: Dot cards that describe a circuit.
PERMITTED = (
    ".subckt", ".ends", ".model", ".param", ".func", ".ic", ".nodeset", ".if", ".elseif", ".else", ".endif",
)  # fmt: skip
#: First letters of elements: those of SPICE without code models (A) and compiled models (N).
ELEMENTS = "bcdefghijklmqrstvwx"
#: Kinds of model, in lower case.
MODELS = (
    "r", "c", "l", "d", "npn", "pnp", "njf", "pjf", "nmf", "pmf", "nmos", "pmos", "vdmos", "vdmosn", "vdmosp",
    "sw", "csw",
)  # fmt: skip

#: What the cards do that a user of a foreign netlist is most likely to meet.
_ACTS = {
    ".control": "runs commands of ngspice", ".endc": "runs commands of ngspice", ".exec": "runs commands of ngspice",
    ".include": "reads another file", ".inc": "reads another file", ".incl": "reads another file",
    ".lib": "reads another file", ".endl": "reads another file", ".hdl": "loads a compiled model",
    ".csdf": "writes a file", ".probe": "chooses what is written", ".save": "chooses what is written",
    ".print": "chooses what is written", ".plot": "chooses what is written", ".width": "chooses what is written",
    ".options": "changes the simulation of the whole circuit", ".option": "changes the simulation of the whole circuit",
    ".opt": "changes the simulation of the whole circuit", ".temp": "changes the simulation of the whole circuit",
    ".global": "connects to the circuit around it", ".csparam": "hands values to commands",
    ".tran": "starts an analysis", ".ac": "starts an analysis", ".dc": "starts an analysis",
    ".op": "starts an analysis", ".noise": "starts an analysis", ".meas": "starts an analysis",
    ".measure": "starts an analysis",
    ".end": "ends the deck", ".title": "belongs to a deck",
}  # fmt: skip
#: Words that are commands of ngspice which act on files; no element is called so by chance.
_COMMANDS = frozenset({"shell", "write", "wrdata", "wrnodev", "wrs2p", "source", "codemodel", "snsave"})
_COMMAND_COMMENT = re.compile(r"\*\s*(?:#|ng_)", re.IGNORECASE)
_FILE = re.compile(r"(?:^|[\s(,])(?:\w*file(?:name)?\s*=|pwlfile\b)", re.IGNORECASE)
_NO_SPICE = re.compile(r"[^\t\x20-\x7e]|[\"`\\]")


def check_lines(lines: Sequence[str], *, file: Path, first_line: int = 1) -> None:
    """Refuse lines that could mean more to ngspice than they seem to say.

    Parameters
    ----------
    lines : sequence of str
        Lines of a SPICE text as they stand in the file, comments included.
    file : Path
        Where they come from, for errors.
    first_line : int
        Number of the first one.

    Raises
    ------
    NetlistError
        At a comment that ngspice runs as a command, a parameter that names a file, and characters that quote,
        continue a line or are not ASCII outside comments.
    """
    for number, line in enumerate(lines, start=first_line):
        text = line.strip(" \t")
        complaint = None
        if text.startswith("*"):
            if _COMMAND_COMMENT.match(text):
                complaint = "ngspice runs a comment that begins so as a command; begin it with a letter"
        elif odd := _NO_SPICE.search(text):
            complaint = f"the character {odd[0]!r} cannot stand in a card; use plain ASCII without quotes"
        elif named := _FILE.search(text):
            complaint = f'"{named[0].strip(" (,")}" names a file, and a netlist may not read or write one'
        if complaint is not None:
            raise NetlistError(f'{complaint} (found "{_shortened(text)}")', file=file, line=number)


def check_card(text: str, *, file: Path, line: int) -> None:
    """Refuse a card that does not describe a circuit.

    Parameters
    ----------
    text : str
        The card, continuation lines joined.
    file : Path
        Where it comes from, for errors.
    line : int
        Its line.

    Raises
    ------
    NetlistError
        If it is an unknown dot card, an element of a letter or a model of a kind that is not allowed.
    """
    words = text.split()
    keyword = words[0].lower()
    complaint = None
    if keyword.startswith("."):
        if keyword not in PERMITTED:
            act = f" ({_ACTS[keyword]})" if keyword in _ACTS else ""
            complaint = f"{_shortened(keyword)} cannot stand in a part file{act}; permitted are {', '.join(PERMITTED)}"
        elif keyword == ".model":
            complaint = _model_complaint(text)
    elif keyword[0] not in ELEMENTS:
        kind = {"a": "a code model", "n": "a compiled model"}.get(keyword[0], "no element of a circuit")
        letters = " ".join(ELEMENTS.upper())
        complaint = f'"{_shortened(words[0])}" is {kind}, which is not allowed here; elements begin with {letters}'
    elif keyword[0] == "x" and len(re.sub(r"\s*=.*", "", text).split()) < (3 if "=" in text else 2):
        complaint = f'"{_shortened(text)}" calls no subcircuit: X... nodes NAME name=value ...'
    elif keyword in _COMMANDS:
        complaint = f'"{words[0]}" is a command of ngspice, and a netlist only describes a circuit'
    if complaint is not None:
        raise NetlistError(complaint, file=file, line=line)


def _model_complaint(text: str) -> str | None:
    fields = text.replace("(", " ").split()
    if len(fields) < 3:
        return "a .model card has a name and a kind: .model NAME KIND(...)"
    if fields[2].lower() not in MODELS:
        known = ", ".join(MODELS).upper()
        return f'a model of kind "{_shortened(fields[2])}" is not allowed here; known kinds are {known}'
    rest = text.split(None, 2)[2][len(fields[2]) :].strip()
    if rest.startswith("(") and (after := _after_parentheses(rest)):
        return f'nothing may follow the parentheses of a .model card, found "{_shortened(after)}"'
    return None


def _after_parentheses(text: str) -> str:
    """Return what follows the parenthesis that closes the first one."""
    depth = 0
    for place, character in enumerate(text):
        depth += {"(": 1, ")": -1}.get(character, 0)
        if depth == 0:
            return text[place + 1 :].strip()
    return ""


def _shortened(text: str) -> str:
    return text if len(text) <= 40 else f"{text[:40]}..."
