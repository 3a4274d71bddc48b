"""The tables `ratings` of junctions and drivers: what a component stands at most."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, TypeVar

from pydantic import BaseModel, ConfigDict, Field

from transim.design.faults import Faults
from transim.design.fields import Quantity
from transim.design.locate import KeyPath
from transim.errors import DesignError
from transim.parts.part import Part

__all__ = ["DriverRatings", "JunctionRatings", "read_driver_ratings", "read_junction_ratings"]

_VOLTAGE = Quantity("V", 0.0, 1e6, True)
_CURRENT = Quantity("A", 0.0, 1e6, True)
_POWER = Quantity("W", 0.0, 1e6, True)


class _Ratings(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")

    @property
    def stated(self) -> dict[str, float]:
        """Ratings that are stated, in their units."""
        return {key: value for key, value in self if value is not None}

    @classmethod
    def unit(cls, key: str) -> str:
        """Return the unit of a rating."""
        return next(entry.unit for entry in cls.model_fields[key].metadata if isinstance(entry, Quantity))


class JunctionRatings(_Ratings):
    """Maximum ratings of a junction; what is None is not checked.

    Parameters
    ----------
    reverse_voltage : float or None
        Largest reverse voltage at any instant [V].
    forward_current_mean, forward_current_peak : float or None
        Forward current into the anode, of a transistor through its base: mean over the period, and at any
        instant [A].
    dissipation : float or None
        Mean power over the period [W].
    """

    reverse_voltage: Annotated[float | None, _VOLTAGE] = Field(default=None, description="at any instant")
    forward_current_mean: Annotated[float | None, _CURRENT] = Field(default=None, description="over the period")
    forward_current_peak: Annotated[float | None, _CURRENT] = Field(default=None, description="at any instant")
    dissipation: Annotated[float | None, _POWER] = Field(default=None, description="over the period")


class DriverRatings(_Ratings):
    """Maximum ratings of a driver; what is None is not checked.

    Parameters
    ----------
    output_current : float or None
        Largest output current of either direction at any instant [A].
    dissipation : float or None
        Mean power that stays in the driver over the period [W].
    supply_current : float or None
        Largest current of any supply at any instant [A].
    """

    output_current: Annotated[float | None, _CURRENT] = Field(default=None, description="at any instant")
    dissipation: Annotated[float | None, _POWER] = Field(default=None, description="over the period")
    supply_current: Annotated[float | None, _CURRENT] = Field(default=None, description="at any instant")


def read_junction_ratings(faults: Faults, path: KeyPath, table: Mapping[str, object], part: Part) -> JunctionRatings:
    """Read the ratings of a junction.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    path : tuple of str
        Key of the junction's table.
    table : mapping
        The junction's table.
    part : Part
        What it is.

    Returns
    -------
    JunctionRatings
        Without any rating where the table has none or is wrong.
    """
    ratings = _read(faults, path, table, JunctionRatings)
    if ratings.reverse_voltage is not None and not any(probe.quantity == "reverse" for probe in part.probes):
        _refuse(faults, path, "reverse_voltage", f"the part {part.name} has no probe of its reverse voltage")
    return ratings


def read_driver_ratings(faults: Faults, path: KeyPath, table: Mapping[str, object], part: Part) -> DriverRatings:
    """Read the ratings of a driver.

    Parameters
    ----------
    faults : Faults
        Where errors go.
    path : tuple of str
        Key of the driver's table.
    table : mapping
        The driver's table.
    part : Part
        What it is.

    Returns
    -------
    DriverRatings
        Without any rating where the table has none or is wrong.
    """
    ratings = _read(faults, path, table, DriverRatings)
    for key in ("dissipation", "supply_current"):
        if key in ratings.stated and not part.supplies:
            _refuse(faults, path, key, f"the part {part.name} has no supply, so that this cannot be known")
    return ratings


_Model = TypeVar("_Model", bound=_Ratings)


def _read(faults: Faults, path: KeyPath, table: Mapping[str, object], model: type[_Model]) -> _Model:
    if "ratings" not in table:
        return model()
    place = (*path, "ratings")
    raw = faults.table(place, table["ratings"])
    return (None if raw is None else faults.model(model, place, raw)) or model()


def _refuse(faults: Faults, path: KeyPath, key: str, message: str) -> None:
    faults.adopt((*path, "ratings", key), DesignError(f"{message}; remove the rating"))
