"""A plain SPICE file of a user: title, what belongs to a simulation and not to the circuit, and the circuit's cards."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from transim.errors import NetlistError
from transim.parts.cards import Card, joined_cards, read_netlist_text
from transim.parts.guard import check_card, check_lines
from transim.parts.nodes import GROUND, least_nodes, nodes_of, reads_as_element

__all__ = ["PlainFile", "read_plain"]

#: Cards that say how to simulate; the design says that, so they are left out.
_LEFT_OUT = {
    **dict.fromkeys((".title", ".end"), ""),
    **dict.fromkeys(
        (".op", ".tran", ".ac", ".dc", ".noise", ".tf", ".sens", ".pz", ".disto", ".four", ".fft", ".meas", ".measure"),
        "the program runs analyses of its own",
    ),
    **dict.fromkeys((".print", ".plot", ".save", ".probe", ".width"), "the program chooses what is written"),
    **dict.fromkeys((".options", ".option", ".opt"), "the tolerances are those of [numerics]"),
    ".temp": "the temperature is that of [environment]",
}
#: Commands that neither change the circuit nor touch files; a block of others is refused.
_HARMLESS = frozenset(
    (
        "run", "op", "tran", "ac", "dc", "noise", "tf", "sens", "pz", "disto", "plot", "print", "iplot", "asciiplot",
        "listing", "display", "show", "showmod", "echo", "meas", "fft", "linearize", "setplot", "settype", "destroy",
        "quit", "exit", "rusage", "spec", "version",
    )
)
_NAME = re.compile(r"[^\s=(){},'\"]+")
_REDIRECTION = re.compile(r"[<>|`;&$]")
_EXCITATION = re.compile(r"(?i)\s+ac(?:\s+[-+.\d][\w.+-]*){0,2}(?=\s|$)")


@dataclass(frozen=True)
class PlainFile:
    """The circuit of a SPICE file that knows nothing of this program.

    Parameters
    ----------
    file : Path
        Where it was read.
    cards : tuple of Card
        Elements, models, parameters and subcircuits, checked; nothing that acts.
    notes : tuple of str
        What was left out, and why.
    """

    file: Path
    cards: tuple[Card, ...]
    notes: tuple[str, ...]


def read_plain(path: Path) -> PlainFile:
    """Read the circuit of a SPICE file.

    Parameters
    ----------
    path : Path
        The file. Its first line is a title unless it reads as an element whose nodes the rest of the file has too.

    Returns
    -------
    PlainFile
        Its cards. Analyses, output cards, options and control blocks of harmless commands are left out, and so is
        what excites a source in an AC analysis, with a note each.

    Raises
    ------
    NetlistError
        With file and line: if the file cannot be read, holds anything that is no circuit and acts, or has a first
        line that may be a title or an element.
    """
    lines = read_netlist_text(path).split("\n")
    notes: list[str] = []
    lines = _without_control(lines, path, notes)
    lines = _without_end(lines, path)
    lines = _without_title(lines, path, notes)
    check_lines(lines, file=path)
    cards = []
    left: dict[str, str] = {}
    for card in joined_cards("\n".join(lines), file=path):
        keyword = card.text.split()[0].lower()
        if keyword in _LEFT_OUT:
            if _LEFT_OUT[keyword]:
                left.setdefault(keyword, _LEFT_OUT[keyword])
            continue
        _check_element(card, path)
        check_card(card.text, file=path, line=card.line)
        cards.append(_quiet(card, notes))
    notes += [f"the card {keyword} is left out: {reason}" for keyword, reason in left.items()]
    if not cards:
        raise NetlistError("the file has no circuit", file=path, line=1)
    return PlainFile(path, tuple(cards), tuple(dict.fromkeys(notes)))


def _check_element(card: Card, path: Path) -> None:
    """Refuse an element whose card ends before its nodes do, or that has no name."""
    name = card.text.split()[0]
    if name.startswith("."):
        return
    if name[0].isalpha() and (not _NAME.fullmatch(name) or len(nodes_of(card.text)) < least_nodes(name[0])):
        raise NetlistError(
            f'this is no whole card of an element: "{card.text[:40]}"; name, nodes and value are wanted',
            file=path,
            line=card.line,
        )


def _without_control(lines: Sequence[str], path: Path, notes: list[str]) -> list[str]:
    """Blank out the control blocks, each command of which has to be harmless."""
    kept: list[str] = []
    inside = 0
    for number, line in enumerate(lines, start=1):
        words = line.lower().split()
        keyword = words[0] if words else ""
        if inside and keyword == ".endc":
            inside = 0
            kept.append("")
        elif inside:
            if keyword and not keyword.startswith("*") and (keyword not in _HARMLESS or _REDIRECTION.search(line)):
                raise NetlistError(
                    f'a control block may hold commands that only analyse or show, found "{line.strip()[:40]}"; '
                    "remove the block",
                    file=path,
                    line=number,
                )
            if keyword.startswith("*"):
                check_lines([line], file=path, first_line=number)
            kept.append("")
        elif keyword == ".control":
            inside = number
            kept.append("")
            notes.append("a .control block is left out: the program runs analyses of its own")
        else:
            kept.append(line)
    if inside:
        raise NetlistError("this .control has no .endc", file=path, line=inside)
    return kept


def _without_end(lines: list[str], path: Path) -> list[str]:
    """Cut the lines at `.end`, after which only comments may follow."""
    for place, line in enumerate(lines):
        if line.split()[:1] and line.split()[0].lower() == ".end":
            for number, rest in enumerate(lines[place + 1 :], start=place + 2):
                if rest.strip() and not rest.lstrip().startswith("*"):
                    raise NetlistError("nothing of a circuit may follow .end", file=path, line=number)
            return lines[:place]
    return lines


def _without_title(lines: list[str], path: Path, notes: list[str]) -> list[str]:
    """Blank out a first line that is a title.

    SPICE takes every first line for one; a file that was cut out of another has none.
    """
    first = lines[0].strip() if lines else ""
    if not first or first[0] in "*.+":
        return lines
    rest = ["", *lines[1:]]
    if not reads_as_element(first):
        return rest
    known = set(GROUND)
    for card in joined_cards("\n".join(rest), file=path):
        known.update(nodes_of(card.text))
    found = [node for node in nodes_of(first) if node not in GROUND]
    share = sum(node in known for node in found)
    if share == len(found):
        return lines
    if share == 0:
        notes.append(f'the first line is taken for a title: "{first[:40]}"')
        return rest
    raise NetlistError(
        f'the first line, "{first[:40]}", may be a title or an element; begin a title with *, or put an empty line '
        "before an element",
        file=path,
        line=1,
    )


def _quiet(card: Card, notes: list[str]) -> Card:
    """Return a source without what an AC analysis would excite it with."""
    if card.text[0].lower() not in "vi":
        return card
    head = card.text.split()[:3]
    rest = card.text.split(None, 3)[3] if len(card.text.split(None, 3)) > 3 else ""
    silent = _EXCITATION.sub("", f" {rest}").strip()
    if silent == rest.strip():
        return card
    notes.append(f"{head[0]} has its AC value left out: RF enters at the ports only")
    return Card(card.line, " ".join([*head, silent or "0"]))
