"""Reading a design file: all its errors are reported together, each with file, line, column and key."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Mapping
from pathlib import Path
from typing import Any, NoReturn

from transim.design.components import Components
from transim.design.faults import Faults
from transim.design.fields import Line
from transim.design.limits import Unitful, read_limits
from transim.design.model import Carrier, Control, Design, Environment, Measure, Numerics, Source, Static
from transim.design.recorded import read_recorded_control
from transim.design.starting import starting_design
from transim.errors import DesignError, InvalidDesign, NetlistError
from transim.parts.catalogue import Catalogue, load_catalogue

__all__ = ["read_design", "starting_design"]

#: What may stand at the top level of a design file.
TOP_LEVEL = (
    "title", "parts", "control", "carrier", "switch", "junction", "driver", "limits", "measure",
    "environment", "numerics", "static", "sweep", "tune", "spread",
)  # fmt: skip
_REQUIRED = {
    "control": "a table [control] with low, high, period, on_for and edge",
    "carrier": "a table [carrier] with frequency",
    "switch": "a table [switch] with path and junction",
}
_LARGEST_FILE = 1_000_000
_PLACE = re.compile(r"(?P<message>.*?) \(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)")


def read_design(
    path: Path | str, *, catalogue: Catalogue | None = None, metrics: Mapping[str, Unitful] | None = None
) -> Design:
    """Read and check a design file.

    Parameters
    ----------
    path : Path or str
        The design file.
    catalogue : Catalogue or None
        Parts that it may name, beside those of its own key `parts`; None: the shipped ones.
    metrics : mapping of str to object with unit, or None
        Metrics that it may limit; None: all that transim extracts.

    Returns
    -------
    Design
        The design, frozen.

    Raises
    ------
    InvalidDesign
        With all the errors of the file.
    """
    file = Path(path)
    text = _read_text(file)
    document = _parse(file, text)
    faults = Faults(file, text)
    for key in document:
        if key not in TOP_LEVEL:
            faults.unknown((key,), TOP_LEVEL)
    for key, expected in _REQUIRED.items():
        if key not in document:
            faults.missing((key,), expected, "table")
    # Without a title the design is named after its file, which must serve as a title then.
    title = faults.value(("title",), document.get("title", file.stem[:200]), Line(200))
    components = Components(faults, _catalogue(faults, document, catalogue, file), file.parent)
    tables = {
        name: read_recorded_control(faults, table, file.parent)
        if name == "control" and "record" in table
        else faults.model(model, (name,), table)
        for name, model in (
            ("control", Control),
            ("carrier", Carrier),
            ("measure", Measure),
            ("environment", Environment),
            ("numerics", Numerics),
            ("static", Static),
        )
        if (name in document or name not in (*_REQUIRED, "static"))
        and (table := faults.table((name,), document.get(name, {}))) is not None
    }
    switch = components.switch(document.get("switch"), document.get("junction", {}))
    drivers = components.drivers(document.get("driver", {}))
    limits = read_limits(faults, document.get("limits", {}), _known_metrics() if metrics is None else metrics)
    faults.report()
    measure = tables.pop("measure")
    design = Design.model_validate(
        {
            **tables,
            "title": title,
            "switch": switch,
            "drivers": drivers,
            "limits": limits,
            "definitions": measure.definitions() if isinstance(measure, Measure) else None,
            "shortest": isinstance(measure, Measure) and measure.shortest,
            "source": Source(path=file, text=text),
        }
    )
    from transim.design.vary import check_studies

    check_studies(faults, document, design)
    faults.report()
    return design


def _known_metrics() -> Mapping[str, Unitful]:
    from transim.measure.metrics import METRICS

    return METRICS


def _refuse(file: Path, message: str, **context: Any) -> NoReturn:
    raise InvalidDesign([DesignError(message, file=file, **context)])


def _read_text(file: Path) -> str:
    """Return the text of a design file."""
    expected = "a design file (TOML, UTF-8)"
    try:
        if not file.exists():
            _refuse(file, "the design file does not exist", expected=expected)
        if file.is_dir():
            _refuse(file, "this is a folder", expected=expected)
        if not file.is_file():
            _refuse(file, "this is no ordinary file", expected=expected)
        content = file.read_bytes() if file.stat().st_size <= _LARGEST_FILE else None
    except OSError as exc:
        _refuse(file, f"the design file cannot be read: {exc.strerror}", expected=expected)
    if content is None:
        _refuse(file, "the design file is larger than 1 MB", expected=expected)
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as exc:
        before = content[: exc.start]
        column = len(before[before.rfind(b"\n") + 1 :].decode("utf-8-sig", "replace")) + 1
        _refuse(
            file,
            "the design file is not UTF-8 text",
            line=before.count(b"\n") + 1,
            column=column,
            found=f"the byte 0x{content[exc.start]:02x}",
        )


def _parse(file: Path, text: str) -> dict[str, Any]:
    """Return the TOML document."""
    try:
        return tomllib.loads(text)
    except RecursionError:
        _refuse(file, "the file nests its values too deeply")
    except ValueError as exc:
        match = _PLACE.fullmatch(str(exc))
        if match is None:
            _refuse(file, f"the file is no valid TOML: {exc}")
        lines = text.split("\n")
        _refuse(
            file,
            f"the file is no valid TOML: {match['message'][:1].lower()}{match['message'][1:]}",
            line=int(match["line"] or len(lines)),
            column=int(match["column"] or len(lines[-1]) + 1),
        )


def _catalogue(
    faults: Faults, document: Mapping[str, object], catalogue: Catalogue | None, file: Path
) -> Catalogue:
    """Return the parts that the file may name, its own folder of parts first."""
    known = load_catalogue() if catalogue is None else catalogue
    if "parts" not in document:
        return known
    folder = faults.value(("parts",), document["parts"], Line(200))
    if folder is None:
        return known
    try:
        return Catalogue([file.parent / folder, *known.folders])
    except DesignError as exc:
        faults.adopt(("parts",), exc)
    except NetlistError as exc:
        faults.adopt(("parts",), DesignError(f"the folder of parts cannot be used: {exc}"))
    return known
