"""Parameters to vary as a command line spells them, and the study tables of a design with them in place."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping, Sequence
from typing import Any, TypeVar

from transim.design.axes import STEPS
from transim.design.faults import Faults
from transim.design.model import Design
from transim.design.parameters import parameters_of
from transim.design.studies import Spread, Sweep, Tune, read_spread, read_sweep, read_tune
from transim.design.tolerances import DISTRIBUTIONS
from transim.errors import DesignError

__all__ = ["check_studies", "study_of"]

_READERS = {"sweep": read_sweep, "tune": read_tune, "spread": read_spread}
_RANGE = re.compile(r"(?P<low>.+?)\s*\.\.\s*(?P<high>.+)")
_STEPS = re.compile(r"(?P<steps>[A-Za-z]+[0-9]*)(?:\s+(?P<points>[0-9]+))?")
_EXAMPLES = {
    "sweep": '"driver.fast.speedup_cap = 100 pF .. 10 nF, E12", or "control.edge = 1 ns, 2 ns, 5 ns"',
    "tune": '"driver.fast.speedup_cap = 100 pF .. 10 nF, E24"',
    "spread": '"driver.fast.speedup_cap = 5 %", or "junction.hp7.lifetime = 0.8 us .. 1.5 us, normal"',
}

S = TypeVar("S", Sweep, Tune, Spread)


def check_studies(faults: Faults, document: Mapping[str, object], design: Design) -> None:
    """Check the study tables of a design file.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    document : mapping
        The file.
    design : Design
        What the other tables make.
    """
    for kind, read in _READERS.items():
        if kind in document:
            read(faults, document[kind], design)


def study_of(
    design: Design, kind: type[S], varied: Sequence[str] = (), settings: Mapping[str, object] | None = None
) -> S:
    """Return a study of a design: the table of its file, with what a command line changes.

    Parameters
    ----------
    design : Design
        The design.
    kind : type
        ``Sweep``, ``Tune`` or ``Spread``.
    varied : sequence of str
        Parameters as ``NAME = FROM .. TO, STEPS``, ``NAME = VALUE, VALUE`` or ``NAME = TOLERANCE``; they take the
        place of all that the file varies.
    settings : mapping or None
        Other keys of the table that are set; None as a value leaves the file's own.

    Returns
    -------
    Sweep, Tune or Spread

    Raises
    ------
    InvalidDesign
        With all that is wrong.
    """
    name = kind.__name__.lower()
    text = design.source.text
    raw = dict(tomllib.loads(text).get(name, {})) if text else {}
    changes = {key: value for key, value in (settings or {}).items() if value not in (None, ())}
    # places in the file would mislead where the command line decides
    faults = Faults(design.source.path, "" if varied else text)
    if varied:
        known = {parameter: kind.unit for parameter, kind in parameters_of(design).items()}
        raw["vary"] = {}
        for entry in varied:
            parameter, _, what = (part.strip() for part in entry.partition("="))
            if not what:
                faults.adopt(
                    (name, "vary"),
                    DesignError(
                        "--vary needs a parameter and its values", expected=_EXAMPLES[name], found=f'"{entry}"'
                    ),
                )
                continue
            raw["vary"][parameter] = _entry(name, what, known.get(parameter, "1") == "1")
        faults.report()
    raw |= changes
    if raw.get("points") == "corners" and "trials" not in changes:
        raw.pop("trials", None)
    found = _READERS[name](faults, raw, design)
    faults.report()
    assert isinstance(found, kind)
    return found


def _entry(kind: str, text: str, plain: bool) -> dict[str, Any]:
    """Translate one entry to what a design file would hold."""
    pieces = [piece.strip() for piece in text.split(",")]
    value = _plain if plain else str
    match = _RANGE.fullmatch(pieces[0])
    last = _STEPS.fullmatch(pieces[-1]) if len(pieces) > 1 else None
    if kind == "spread":
        found: dict[str, Any] = (
            {"from": value(match["low"]), "to": value(match["high"])}
            if match is not None
            else {"tolerance": pieces[0] if "%" in pieces[0] else value(pieces[0])}
        )
        rest = pieces[1:]
        if rest:
            found["distribution"] = rest[0] if rest[0] in DISTRIBUTIONS or len(rest) == 1 else ", ".join(rest)
        return found
    if match is None:
        return {"values": [value(piece) for piece in pieces]}
    found = {"from": value(match["low"]), "to": value(match["high"])}
    if last is not None:
        found["steps"] = last["steps"]
        if last["points"]:
            found["points"] = int(last["points"])
    elif len(pieces) > 1:
        found["steps"] = ", ".join(pieces[1:])
    elif kind == "sweep":
        found["steps"] = STEPS[0]
    return found


def _plain(text: str) -> object:
    try:
        return float(text)
    except ValueError:
        return text
