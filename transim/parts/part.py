"""What a part file describes: a junction, a path or a driver."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from transim.quantities import format_range

__all__ = ["ROLES", "ModelSlot", "Parameter", "Part", "Probe", "Slot", "Throw"]

#: Roles of a part, and the folder in which the parts of a role stand.
ROLES: Mapping[str, str] = MappingProxyType({"junction": "junctions", "path": "paths", "driver": "drivers"})


@dataclass(frozen=True)
class Parameter:
    """A value that the user of a part may set.

    Parameters
    ----------
    name : str
        Name in the subcircuit, and key in a design file.
    unit : str
        Its unit, "1" for a plain number.
    default : float
        Value where the design says nothing, in `unit`.
    low, high : float
        Permitted range in `unit`; infinite where an end is open.
    low_open : bool
        Whether `low` itself is excluded.
    meaning : str
        One line of explanation.
    """

    name: str
    unit: str
    default: float
    low: float
    high: float
    low_open: bool
    meaning: str

    @property
    def range(self) -> str:
        """Permitted range in engineering notation."""
        return format_range(self.unit, self.low, self.high, self.low_open)

    def admits(self, value: float) -> bool:
        """Tell whether a value is finite and within the range.

        Parameters
        ----------
        value : float
            Value in `unit`.

        Returns
        -------
        bool
            True within the range.
        """
        above = value > self.low if self.low_open else value >= self.low
        return math.isfinite(value) and above and value <= self.high


@dataclass(frozen=True)
class Slot:
    """A place in a path that a junction fills.

    Parameters
    ----------
    name : str
        Name of the subcircuit that the path calls there.
    terminals : tuple of str
        Terminals that the junction must have, in order.
    meaning : str
        One line of explanation.
    """

    name: str
    terminals: tuple[str, ...]
    meaning: str


@dataclass(frozen=True)
class Throw:
    """One way of the RF through a path, which the command opens and closes.

    Parameters
    ----------
    name : str
        Name in results; of a path with a single way the port that the RF leaves.
    through : tuple of str
        Port that the RF enters, port that it leaves.
    passes_high : bool
        True if RF passes while the command is high.
    bias : str
        The bias entry whose driver opens it.
    """

    name: str
    through: tuple[str, str]
    passes_high: bool
    bias: str


@dataclass(frozen=True)
class Probe:
    """A quantity inside a part, as a weighted sum of vectors that ngspice saves.

    Parameters
    ----------
    quantity : str
        For example ``charge``, ``current``, ``reverse``; a part may have several of one quantity.
    unit : str
        Unit of the sum.
    terms : tuple of (float, str)
        Factor and vector: ``v(node)``, ``i(source)`` or ``@device[parameter]``, with the names of the
        part's own subcircuit, in lower case.
    """

    quantity: str
    unit: str
    terms: tuple[tuple[float, str], ...]


@dataclass(frozen=True)
class ModelSlot:
    """A place for a published `.model` card.

    Parameters
    ----------
    kinds : tuple of str
        Permitted kinds of device, for example ``("NPN", "PNP")``.
    name : str
        Name that the subcircuit uses for the card.
    parameters : tuple of str
        Parameters of the part that only its own card uses: another card leaves them without effect.
    companion : ModelSlot or None
        A second place, for a card of another kind that may stand in the same file.
    """

    kinds: tuple[str, ...]
    name: str
    parameters: tuple[str, ...] = ()
    companion: ModelSlot | None = None

    @property
    def places(self) -> tuple[ModelSlot, ...]:
        """The place itself and its companion."""
        return (self,) if self.companion is None else (self, *self.companion.places)


@dataclass(frozen=True)
class Part:
    """A part file, read and checked.

    Parameters
    ----------
    name, role : str
        Its name, and ``junction``, ``path`` or ``driver``.
    file : Path
        Where it was read.
    terminals : tuple of str
        Terminals of the subcircuit, in order.
    summary : str
        One line.
    sources, notes : tuple of str
        Publications of the equations; remarks for the user.
    parameters, supplies : tuple of Parameter
        Values that may be set; supplies are DC sources at the terminal of the same name.
    ports, bias : tuple of str
        Of a path: RF ports, and bias entries, each fed by a driver of its own.
    throws : tuple of Throw
        Of a path: its ways for the RF, each judged.
    inverted : tuple of str
        Of a path: bias entries whose driver gets the inverted command.
    slots : tuple of Slot
        Of a path: the places for junctions.
    probes : tuple of Probe
        Quantities that can be looked at.
    model : ModelSlot or None
        The place for a published `.model` card.
    reserved : tuple of str
        Parameters of the subcircuit that the program sets by itself (``control_low``, ``control_high``).
    body : str
        SPICE text without the header.
    """

    name: str
    role: str
    file: Path
    terminals: tuple[str, ...]
    summary: str
    sources: tuple[str, ...]
    notes: tuple[str, ...]
    parameters: tuple[Parameter, ...]
    supplies: tuple[Parameter, ...]
    ports: tuple[str, ...]
    bias: tuple[str, ...]
    throws: tuple[Throw, ...]
    inverted: tuple[str, ...]
    slots: tuple[Slot, ...]
    probes: tuple[Probe, ...]
    model: ModelSlot | None
    reserved: tuple[str, ...]
    body: str

    def forward(self, throw: Throw) -> bool:
        """Tell whether a throw passes RF while the driver of its bias entry pushes forward current.

        Parameters
        ----------
        throw : Throw
            One of the path's.
        """
        return throw.passes_high != (throw.bias in self.inverted)

    @property
    def settings(self) -> dict[str, Parameter]:
        """Everything that a design file may set, supplies first, by name."""
        return {parameter.name: parameter for parameter in (*self.supplies, *self.parameters)}

    @property
    def outputs(self) -> tuple[str, ...]:
        """Terminals of a driver that go to a bias entry; empty for another role."""
        if self.role != "driver":
            return ()
        taken = {"ctl", *(supply.name for supply in self.supplies)}
        return tuple(terminal for terminal in self.terminals if terminal not in taken)
