"""Junction parameters from tables of single measurements, by closed forms.

Storage time of a p-i-n diode (its terminal current falls when the stored charge at the junction is gone):
``ts = lifetime ln[(1 + IF/IR) / (1 + TM/lifetime)]``, derived from P. O. Lauritzen, C. L. Ma, IEEE Trans. Power
Electron. 6(2), 188-191, 1991, for a step of current.

Storage time of a saturated transistor: ``ts = tau_s ln[(IB1 + IB2) / (IC/BF + IB2)]`` with
``tau_s = [BF (1 + BR) TF + BR (1 + BF) TR] / (1 + BF + BR)``, J. L. Moll, Proc. IRE 42, 1954 (from memory).

Loss and isolation of one junction in series with a line: ``20 log10 |1 + Z/(2 Z0)|``; forward
``Z = Rs + W^2/(mobility lifetime I)``, J. F. White, Microwave Semiconductor Engineering, 1982; reverse
``Z = Rs + 1/(1/Ri + j w C)``.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import numpy.typing as npt

from transim.bench.records import Table, read_table
from transim.errors import RecordError

__all__ = ["TABLES", "Law", "PointTable", "read_points"]

Array = npt.NDArray[np.float64]
Values = Mapping[str, float]


@dataclass(frozen=True)
class Law:
    """A closed form, and the table that it is held against.

    Attributes
    ----------
    title : str
        What is measured.
    columns : tuple of (str, str)
        Meaning and unit of each column, the measured one last.
    parameters : tuple of str
        What is fitted unless others are named.
    function : callable
        Takes the columns before the last, the junction's values and the impedance [ohm]; returns the last.
    relative : bool
        Whether the scatter goes with the value.
    """

    title: str
    columns: tuple[tuple[str, str], ...]
    parameters: tuple[str, ...]
    function: Callable[[Array, Values, float], Array]
    relative: bool


@dataclass(frozen=True)
class PointTable:
    """A table of measurements.

    Attributes
    ----------
    file : Path
        Where it was read.
    law : Law
        What it is compared with.
    given : ndarray, shape (k, n)
        Columns before the last, in SI units.
    value : ndarray, shape (n,)
        The measured one.
    sigma : ndarray or None
        Its standard uncertainty, where the table has a further column.
    """

    file: Path
    law: Law
    given: Array
    value: Array
    sigma: Array | None

    def residuals(self, values: Values, impedance: float) -> Array:
        """Return measured less computed.

        Parameters
        ----------
        values : mapping of str to float
            Values of the junction.
        impedance : float
            Of the line [ohm].

        Returns
        -------
        ndarray, shape (n,)
            In standard uncertainties; where none are given, relative, or in dB.
        """
        difference = self.value - self.law.function(self.given, values, impedance)
        if self.sigma is not None:
            return difference / self.sigma
        return difference / np.abs(self.value) if self.law.relative else difference


def _diode_storage(given: Array, values: Values, _impedance: float) -> Array:
    forward, reverse = given
    lifetime = values["lifetime"]
    return np.asarray(lifetime * np.log((1.0 + forward / reverse) / (1.0 + values["transit_time"] / lifetime)))


def _transistor_storage(given: Array, values: Values, _impedance: float) -> Array:
    first, second, collector = given
    gain, back = values["forward_gain"], values["reverse_gain"]
    charge = gain * (1.0 + back) * values["forward_transit_time"] + back * (1.0 + gain) * values["reverse_transit_time"]
    return np.asarray(charge / (1.0 + gain + back) * np.log((first + second) / (collector / gain + second)))


def _loss(given: Array, values: Values, impedance: float) -> Array:
    charge = values["lifetime"] * given[0]
    resistance = values["series_resistance"] + values["width"] ** 2 / (values["mobility"] * charge)
    return np.asarray(20.0 * np.log10(1.0 + resistance / (2.0 * impedance)))


def _isolation(given: Array, values: Values, impedance: float) -> Array:
    admittance = 1.0 / values["intrinsic_resistance"] + 2j * np.pi * given[0] * values["capacitance"]
    through = 1.0 + (values["series_resistance"] + 1.0 / admittance) / (2.0 * impedance)
    return np.asarray(20.0 * np.log10(np.abs(through)))


#: Tables by junction part and kind.
TABLES: Mapping[str, Mapping[str, Law]] = {
    "pin_lumped": {
        "storage": Law(
            "storage time",
            (("forward current", "A"), ("reverse current", "A"), ("storage time", "s")),
            ("lifetime",),
            _diode_storage,
            True,
        ),
        "loss": Law(
            "loss of one junction in series with the line",
            (("forward current", "A"), ("loss", "dB")),
            ("width", "series_resistance"),
            _loss,
            False,
        ),
        "isolation": Law(
            "isolation of one junction in series with the line",
            (("frequency", "Hz"), ("isolation", "dB")),
            ("capacitance",),
            _isolation,
            False,
        ),
    },
    "bjt_pair": {
        "storage": Law(
            "storage time",
            (
                ("forward base current", "A"),
                ("reverse base current", "A"),
                ("collector current", "A"),
                ("storage time", "s"),
            ),
            ("reverse_transit_time",),
            _transistor_storage,
            True,
        ),
    },
}


def read_points(file: Path, law: Law) -> PointTable:
    """Read a table of measurements.

    Parameters
    ----------
    file : Path
        Columns in the order of the law, in the units of its header or else in SI units; one column more is the
        standard uncertainty of the measured one.
    law : Law
        What it is compared with.

    Returns
    -------
    PointTable
        Its columns.

    Raises
    ------
    RecordError
        If columns are missing, have another unit, or a number is not above 0.
    """
    table = read_table(file)
    wanted = len(law.columns)
    names = ", ".join(f"{name} [{unit}]" for name, unit in law.columns)
    if len(table.names) not in (wanted, wanted + 1):
        raise table.refuse(
            f"{len(table.names)} columns; {law.title} needs {names}, and perhaps its standard uncertainty", header=True
        )
    for (name, unit), heading in zip(law.columns, table.headings, strict=False):
        if heading.unit not in (None, unit):
            raise table.refuse(
                f"column {heading.name} is in {heading.unit}; {name} in {unit} is wanted here", header=True
            )
    data = table.columns(list(range(len(table.names))))
    _positive(table, data)
    sigma = data[wanted] if data.shape[0] > wanted else None
    return PointTable(file, law, data[: wanted - 1], data[wanted - 1], sigma)


def _positive(table: Table, data: Array) -> None:
    bad = np.argwhere(data <= 0.0)
    if bad.size:
        column, row = (int(k) for k in bad[0])
        raise RecordError(
            f"column {table.names[column]}: row {row + 1} of the numbers is not above 0; currents and losses are given "
            "as magnitudes",
            file=table.file,
            line=table.first + row + 1,
        )
