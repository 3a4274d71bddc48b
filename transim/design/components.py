"""The tables of a design file that name parts: `[switch]`, `[junction.NAME]` and `[driver.NAME]`."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from pathlib import Path

from transim.design.faults import Faults
from transim.design.fields import Line, Quantity, shown
from transim.design.locate import KeyPath
from transim.design.model import Driver, Junction, Switch
from transim.design.own import names_plain_file, read_driver_circuit, read_path_circuit
from transim.design.ratings import read_driver_ratings, read_junction_ratings
from transim.errors import DesignError, NetlistError, TopologyError
from transim.parts.cards import read_model_cards
from transim.parts.catalogue import Catalogue
from transim.parts.foreign import read_foreign_junction
from transim.parts.header import read_part
from transim.parts.nearest import nearest_name
from transim.parts.part import Part

__all__ = ["Components"]

_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]{0,39}")
_TEXT = Line(200)
#: Value of the key `part` for a subcircuit from a file without a header.
_FOREIGN = "subcircuit"


class Components:
    """Reads the tables that name parts, adding what is wrong to the faults of the file.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    catalogue : Catalogue
        Parts that may be named.
    folder : Path
        Folder of the design file; part files and model files are relative to it.
    """

    def __init__(self, faults: Faults, catalogue: Catalogue, folder: Path) -> None:
        self._faults = faults
        self._catalogue = catalogue
        self._folder = folder

    def switch(self, raw_switch: object, raw_junctions: object) -> Switch | None:
        """Read the RF path and its junctions.

        Parameters
        ----------
        raw_switch, raw_junctions : object
            The tables `[switch]`, None where the file has none, and `[junction]`.

        Returns
        -------
        Switch or None
            None, with errors added, if something in them is wrong.
        """
        before = len(self._faults.errors)
        tables = self._named_tables("junction", raw_junctions)
        junctions = {name: self._junction(name, table) for name, table in tables.items()}
        table = None if raw_switch is None else self._faults.table(("switch",), raw_switch)
        if table is None:
            return None
        if names_plain_file(self._folder, table, "path"):
            self._refuse_unused(tables, set())
            return read_path_circuit(self._faults, self._folder, table)
        path = self._part("path", ("switch", "path"), table)
        if path is None:
            used = {value for value in table.values() if isinstance(value, str)}
            self._refuse_unused(tables, used)
            return None
        filled = self._fill_slots(path, table, tables)
        self._refuse_unused(tables, set(filled.values()))
        keys = {"path", "junction", *(slot.name for slot in path.slots)} if path.slots else {"path"}
        values = self._values(path, ("switch",), table, keys)
        chosen = {slot: junctions.get(name) for slot, name in filled.items()}
        for slot in path.slots:
            self._check_terminals(slot.name, slot.terminals, chosen.get(slot.name), table)
        if len(self._faults.errors) > before:
            return None
        return Switch(path=path, values=values, junctions={slot: j for slot, j in chosen.items() if j})

    def drivers(self, raw: object) -> tuple[Driver, ...]:
        """Read the drivers.

        Parameters
        ----------
        raw : object
            The table `[driver]`.

        Returns
        -------
        tuple of Driver
            Those without errors.
        """
        tables = self._named_tables("driver", raw)
        if not tables:
            self._faults.adopt(
                ("driver",), DesignError("no driver is given", expected="a table [driver.NAME] with a part")
            )
        drivers = []
        for name, table in tables.items():
            path = ("driver", name)
            if names_plain_file(self._folder, table, "part"):
                own = read_driver_circuit(self._faults, self._folder, name, table)
                drivers += [] if own is None else [own]
                continue
            part = self._part("driver", (*path, "part"), table)
            if part is not None:
                values = self._values(part, path, table, {"part", "model", "ratings"})
                model = self._model(part, path, table)
                ratings = read_driver_ratings(self._faults, path, table, part)
                drivers.append(Driver(name=name, part=part, values=values, model=model, ratings=ratings))
        return tuple(drivers)

    def _junction(self, name: str, table: Mapping[str, object]) -> Junction | None:
        path = ("junction", name)
        if table.get("part") == _FOREIGN:
            part, keys = self._foreign(name, table), {"part", "file", "name", "terminals", "ratings"}
        else:
            part, keys = self._part("junction", (*path, "part"), table), {"part", "model", "ratings"}
        if part is None:
            return None
        values = self._values(part, path, table, keys)
        ratings = read_junction_ratings(self._faults, path, table, part)
        return Junction(name=name, part=part, values=values, model=self._model(part, path, table), ratings=ratings)

    def _foreign(self, name: str, table: Mapping[str, object]) -> Part | None:
        """Return the junction that a subcircuit without a header makes."""
        path = ("junction", name)
        texts = {}
        for key, wanted in (("file", "the file of the subcircuit"), ("name", "the name of the subcircuit")):
            if key not in table:
                self._faults.missing((*path, key), wanted)
            else:
                texts[key] = self._faults.value((*path, key), table[key], _TEXT)
        raw = table.get("terminals", ["a", "k"])
        if not isinstance(raw, list) or not all(isinstance(item, str) for item in raw):
            self._faults.adopt(
                (*path, "terminals"),
                DesignError(
                    "the terminals say what each node of the subcircuit is, in its order",
                    expected='for example ["a", "k"] or ["c", "b", "e"]',
                    found=shown(raw),
                ),
            )
            return None
        file, subcircuit = texts.get("file"), texts.get("name")
        if file is None or subcircuit is None:
            return None
        try:
            return read_foreign_junction(self._folder / file, subcircuit, raw, f"{_FOREIGN}_{name.lower()}")
        except NetlistError as exc:
            self._faults.adopt((*path, "file"), DesignError(f"the subcircuit cannot be used: {exc}"))
            return None

    def _named_tables(self, kind: str, raw: object) -> dict[str, dict[str, object]]:
        """Return the tables `[kind.NAME]`, refusing names that cannot stand in a deck."""
        outer = self._faults.table((kind,), raw)
        tables: dict[str, dict[str, object]] = {}
        folded: dict[str, str] = {}
        for name, value in (outer or {}).items():
            path = (kind, name)
            if not isinstance(value, dict):
                self._faults.adopt(
                    path,
                    DesignError(
                        f"a {kind} has a table with a name of its own",
                        expected=f"[{kind}.NAME]",
                        found=shown(value),
                    ),
                )
                continue
            if _NAME.fullmatch(name) is None:
                self._faults.adopt(
                    path,
                    DesignError(
                        f"the name cannot be used for a {kind}",
                        expected="a letter, then letters, digits and _, at most 40 characters",
                        found=shown(name),
                    ),
                )
            elif name.casefold() in folded:
                self._faults.adopt(
                    path,
                    DesignError(
                        f"the name differs from {folded[name.casefold()]} only in upper and lower case,"
                        " which a deck does not tell apart",
                        found=shown(name),
                    ),
                )
            folded.setdefault(name.casefold(), name)
            tables[name] = value
        return tables

    def _part(self, role: str, path: KeyPath, table: Mapping[str, object]) -> Part | None:
        """Return the part that a table names, by name or by a file that ends in .cir."""
        key = str(path[-1])
        if key not in table:
            self._faults.missing(
                path, f"a {role} part: {', '.join(self._catalogue.names(role))}, or a file *.cir"
            )
            return None
        name = self._faults.value(path, table[key], _TEXT)
        if name is None:
            return None
        try:
            if not name.endswith(".cir"):
                return self._catalogue.find(role, name)
            part = read_part(self._folder / name)
            if part.role != role:
                raise DesignError(f"the part is a {part.role}", expected=f"a {role}", found=shown(name))
        except DesignError as exc:
            self._faults.adopt(path, exc)
        except NetlistError as exc:
            self._faults.adopt(path, DesignError(f"the part file cannot be used: {exc}"))
        else:
            return part
        return None

    def _values(
        self, part: Part, path: KeyPath, table: Mapping[str, object], others: set[str]
    ) -> dict[str, float]:
        """Return every parameter and supply of a part, from the table or by default."""
        settings = part.settings
        if part.model is None:
            others = others - {"model"}
        values = {name: parameter.default for name, parameter in settings.items()}
        for key, raw in table.items():
            if key in settings:
                value = self._faults.value((*path, key), raw, Quantity.of(settings[key]))
                if value is not None:
                    values[key] = value
            elif key not in others:
                self._faults.unknown(
                    (*path, key), [*sorted(others), *settings], f"the part {part.name} has no such key"
                )
        return values

    def _model(self, part: Part, path: KeyPath, table: Mapping[str, object]) -> str | None:
        """Return the `.model` cards of the file that the key `model` names, one a line."""
        if part.model is None or "model" not in table:
            return None
        for key in part.model.parameters:
            if key in table:
                self._faults.adopt(
                    (*path, key),
                    DesignError("the card of the key model replaces this parameter; remove one of the two"),
                )
        name = self._faults.value((*path, "model"), table["model"], _TEXT)
        if name is None:
            return None
        try:
            return read_model_cards(self._folder / name, {place.name: place.kinds for place in part.model.places})
        except NetlistError as exc:
            self._faults.adopt((*path, "model"), DesignError(f"the model file cannot be used: {exc}"))
            return None

    def _fill_slots(
        self, part: Part, table: Mapping[str, object], tables: Mapping[str, object]
    ) -> dict[str, str]:
        """Return the name of the junction for each slot of a path, and refuse names without a table."""
        keys = {slot.name: slot.name if slot.name in table else "junction" for slot in part.slots}
        names: dict[str, str] = {}
        for key in sorted(set(keys.values())):
            path = ("switch", key)
            if key not in table:
                self._faults.missing(path, 'the name of a [junction.NAME] table, for example "pin"')
                continue
            name = self._faults.value(path, table[key], _TEXT)
            if name is None:
                continue
            if name not in tables:
                self._faults.adopt(
                    path,
                    DesignError(
                        "there is no table of this junction",
                        expected=f"a table [junction.{name}]"
                        + (f", or one of {', '.join(tables)}" if tables else ""),
                        found=shown(name),
                        nearest=nearest_name(name, tables),
                    ),
                )
                # A mistyped name is one fault, not two: the table that was meant counts as used.
                name = nearest_name(name, tables) or name
            names[key] = name
        if "junction" in table and part.slots and "junction" not in keys.values():
            self._faults.adopt(
                ("switch", "junction"),
                DesignError(f"the key fills no slot: {', '.join(keys)} have junctions of their own"),
            )
        return {slot: names[key] for slot, key in keys.items() if key in names}

    def _refuse_unused(self, tables: Mapping[str, object], used: set[str]) -> None:
        for name in tables:
            if name not in used:
                self._faults.adopt(
                    ("junction", name),
                    DesignError("this junction is not used; name it in [switch] or remove its table"),
                )

    def _check_terminals(
        self, slot: str, terminals: Sequence[str], junction: Junction | None, table: Mapping[str, object]
    ) -> None:
        if junction is not None and junction.part.terminals != tuple(terminals):
            self._faults.adopt(
                ("switch", slot if slot in table else "junction"),
                TopologyError(
                    f"the junction does not fit the slot {slot}",
                    expected=f"a part with the terminals {' '.join(terminals)}",
                    found=f"{junction.part.name} with the terminals {' '.join(junction.part.terminals)}",
                ),
            )
