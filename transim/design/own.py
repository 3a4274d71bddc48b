"""The keys of a path or driver that is a plain SPICE file: which of its nodes are what."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from transim.design.faults import Faults
from transim.design.fields import Choice, Line, Quantity, shown
from transim.design.locate import KeyPath
from transim.design.model import Driver, Junction, Switch
from transim.design.ratings import read_driver_ratings
from transim.errors import DesignError, NetlistError
from transim.parts.header import read_role
from transim.parts.own import OWN_PATH, OwnDriver, OwnPath, read_own_driver, read_own_path
from transim.parts.part import Part

__all__ = ["DRIVER_KEYS", "PATH_KEYS", "names_plain_file", "read_driver_circuit", "read_path_circuit"]

#: Keys of `[switch]` and of `[driver.NAME]` where the part is a plain SPICE file.
PATH_KEYS = ("path", "ports", "bias", "through", "passes", "inverted", "ground", "subcircuit")
DRIVER_KEYS = ("part", "control", "output", "supplies", "ground", "subcircuit", "ratings")
#: A key that none but a plain file needs.
_TELLING = ("ports", "bias", "passes", "control", "output", "supplies")
_NODE = Line(60)
_VOLTAGE = Quantity("V", -1e4, 1e4)


def names_plain_file(folder: Path, table: Mapping[str, object], key: str) -> bool:
    """Tell whether a table means a SPICE file without a header.

    Parameters
    ----------
    folder : Path
        Folder of the design file.
    table : mapping
        `[switch]` or `[driver.NAME]`.
    key : str
        ``path`` or ``part``.

    Returns
    -------
    bool
        False too where the file cannot be read and no key tells, so that the usual reader can say what is wrong.
    """
    name = table.get(key)
    if not isinstance(name, str) or "." not in name:
        return False
    try:
        return read_role(folder / name) is None
    except NetlistError:
        return any(telling in table for telling in _TELLING)


class _Table:
    """One table and its faults."""

    def __init__(self, faults: Faults, path: KeyPath, table: Mapping[str, object], keys: tuple[str, ...]) -> None:
        self.faults, self.path, self.table = faults, path, table
        self.before = len(faults.errors)
        for key in table:
            if key not in keys:
                faults.unknown((*path, key), keys, "a plain SPICE file has no such key")

    @property
    def faulty(self) -> bool:
        return len(self.faults.errors) > self.before

    def nodes(self, key: str, wanted: str, least: int, most: int) -> tuple[str, ...]:
        """Return an array of node names; a single text stands for an array of one."""
        if key not in self.table:
            if least:
                self.faults.missing((*self.path, key), wanted)
            return ()
        raw = self.table[key]
        items = [raw] if isinstance(raw, str | int) else raw
        if not isinstance(items, list) or not least <= len(items) <= most:
            error = DesignError("names of nodes are wanted", expected=wanted, found=shown(raw))
            self.faults.adopt((*self.path, key), error)
            return ()
        # a node may have a number for a name
        texts = [str(item) if isinstance(item, int) and not isinstance(item, bool) else item for item in items]
        places = [(*self.path, key) if isinstance(raw, str | int) else (*self.path, key, k) for k in range(len(texts))]
        names = [self.faults.value(place, text, _NODE) for place, text in zip(places, texts, strict=True)]
        for name in names:
            if name is not None and (not name.strip() or any(c in name for c in " \t(),=;$'\"{}")):
                error = DesignError("this is no name of a node", expected=wanted, found=shown(name))
                self.faults.adopt((*self.path, key), error)
        return tuple(name for name in names if name is not None)

    def text(self, key: str) -> str | None:
        return self.faults.value((*self.path, key), self.table[key], Line(200)) if key in self.table else None

    def adopt(self, key: str, error: NetlistError) -> None:
        self.faults.adopt((*self.path, key), DesignError(f"the SPICE file cannot be used: {error}"))


def read_path_circuit(faults: Faults, folder: Path, table: Mapping[str, object]) -> Switch | None:
    """Read `[switch]` where the path is a plain SPICE file.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    folder : Path
        Folder of the design file.
    table : mapping
        The table.

    Returns
    -------
    Switch or None
        With a junction for each diode and transistor; None, with errors added, if something is wrong.
    """
    keys = _Table(faults, ("switch",), table, PATH_KEYS)
    wanted = 'the nodes of the RF ports, for example ["rfin", "rfout"]; the file has no header'
    ports = keys.nodes("ports", wanted, 2, 20)
    bias = keys.nodes("bias", 'the node that the driver feeds, for example "vb", or an array of them', 1, 20)
    passes: str | None = None
    if "passes" not in table:
        faults.missing(("switch", "passes"), '"high" or "low": the command at which RF passes')
    else:
        passes = faults.value(("switch", "passes"), table["passes"], Choice(("high", "low")))
    through = _through(keys, ports)
    inverted = keys.nodes("inverted", "bias entries whose driver gets the inverted command", 0, 20)
    if set(inverted) - set(bias):
        error = DesignError("these are no bias entries", expected=f"some of {', '.join(bias)}")
        faults.adopt(("switch", "inverted"), error)
    ground = keys.nodes("ground", "nodes that are connected to ground", 0, 50)
    subcircuit = keys.text("subcircuit")
    file = keys.text("path")
    if keys.faulty or file is None or passes is None or through is None:
        return None
    named = OwnPath(ports, bias, through, passes == "high", inverted, ground, subcircuit)
    try:
        part, found = read_own_path(folder / file, named, OWN_PATH)
    except NetlistError as exc:
        keys.adopt("path", exc)
        return None
    junctions = {
        junction.slot.name: Junction(name=junction.name, part=junction.part, values={}, model=junction.card)
        for junction in found
    }
    return Switch(path=part, values={}, junctions=junctions)


def _through(keys: _Table, ports: tuple[str, ...]) -> tuple[str, str] | None:
    """Return the judged pair; that of a path with two ports need not be named."""
    if "through" not in keys.table:
        if len(ports) > 2:
            keys.faults.missing(("switch", "through"), f"two of the ports {', '.join(ports)}, from and to")
        return (ports[0], ports[1]) if len(ports) == 2 else None
    pair = keys.nodes("through", "the two ports whose transmission is judged, from and to", 2, 2)
    if len(pair) != 2:
        return None
    if ports and (pair[0] == pair[1] or set(pair) - set(ports)):
        keys.faults.adopt(
            ("switch", "through"),
            DesignError(
                "the judged pair is two different ports", expected=f"two of {', '.join(ports)}", found=", ".join(pair)
            ),
        )
        return None
    return pair[0], pair[1]


def read_driver_circuit(faults: Faults, folder: Path, name: str, table: Mapping[str, object]) -> Driver | None:
    """Read `[driver.NAME]` where the driver is a plain SPICE file.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    folder : Path
        Folder of the design file.
    name : str
        Name of the driver.
    table : mapping
        The table.

    Returns
    -------
    Driver or None
        None, with errors added, if something is wrong.
    """
    path = ("driver", name)
    keys = _Table(faults, path, table, DRIVER_KEYS)
    control = keys.nodes("control", 'the node of the command, for example "in"; the file has no header', 1, 1)
    output = keys.nodes("output", 'the node that feeds the bias entry, for example "out"', 1, 1)
    ground = keys.nodes("ground", "nodes that are connected to ground", 0, 50)
    subcircuit = keys.text("subcircuit")
    supplies: dict[str, float] = {}
    raw = faults.table((*path, "supplies"), table.get("supplies", {})) or {}
    for node, volts in raw.items():
        value = faults.value((*path, "supplies", node), volts, _VOLTAGE)
        if value is not None:
            supplies[node] = value
    file = keys.text("part")
    if keys.faulty or file is None:
        return None
    try:
        part: Part = read_own_driver(
            folder / file, OwnDriver(control[0], output[0], supplies, ground, subcircuit), f"own_{name.lower()}"
        )
    except NetlistError as exc:
        keys.adopt("part", exc)
        return None
    ratings = read_driver_ratings(faults, path, table, part)
    values = {parameter.name: parameter.default for parameter in part.supplies}
    return Driver(name=name, part=part, values=values, ratings=ratings)
