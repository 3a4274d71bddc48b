"""The design: what the user asks for, validated and frozen; floats in the SI unit of each field."""

from __future__ import annotations

import math
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field, InstanceOf, ValidationInfo, field_validator

from transim.design.command import Command
from transim.design.fields import Choice, Count, Flag, Line, Quantity, Series
from transim.design.frozen import Frozen
from transim.design.ratings import DriverRatings, JunctionRatings
from transim.errors import DesignError
from transim.measure.definitions import Definitions
from transim.measure.limits import Limit
from transim.parts.part import Part
from transim.quantities import format_quantity

__all__ = [
    "Carrier",
    "Control",
    "Design",
    "Driver",
    "Environment",
    "Junction",
    "Measure",
    "Numerics",
    "Source",
    "Static",
    "Switch",
]

_STANDARD = Definitions()


class _Table(BaseModel):
    model_config = ConfigDict(frozen=True, extra="forbid")


class Control(_Table):
    """The logic command that everything is timed from.

    Parameters
    ----------
    low, high : float
        Levels [V]; the command is "on" while it is high.
    period : float
        From one pulse to the next [s].
    on_for : float
        From the 50 % point of the rising edge to that of the falling edge [s], less than `period`.
    edge : float
        Duration of an edge from 0 to 100 % [s], no longer than `on_for` and the pause.
    pulses : int
        How many pulses are simulated; the last is judged.
    record : Command or None
        The command as recorded, where it comes from a file; the other fields are then those of its judged pulse,
        the last complete one.
    """

    low: Annotated[float, Quantity("V", -1e3, 1e3)] = Field(description="level of the command that is off")
    high: Annotated[float, Quantity("V", -1e3, 1e3)] = Field(
        description="level of the command that is on, above low"
    )
    period: Annotated[float, Quantity("s", 0.0, 1e3, True)] = Field(description="from one pulse to the next")
    on_for: Annotated[float, Quantity("s", 0.0, 1e3, True)] = Field(
        description="high time, from 50 % to 50 % of the edges"
    )
    edge: Annotated[float, Quantity("s", 0.0, 1e3, True)] = Field(
        description="duration of each edge, 0 to 100 %"
    )
    pulses: Annotated[int, Count(1, 1000)] = Field(
        default=1, description="pulses in the train; the last is judged"
    )
    record: InstanceOf[Command] | None = Field(
        default=None, description="file with a recorded command (time in s, volts) in place of all but period"
    )

    @field_validator("high")
    @classmethod
    def _high_above_low(cls, high: float, info: ValidationInfo) -> float:
        low = info.data.get("low")
        if low is not None and high <= low:
            raise DesignError(
                "the high level must be above the low level",
                expected=f"more than {format_quantity(low, 'V')}",
                found=format_quantity(high, "V"),
            )
        return high

    @field_validator("on_for")
    @classmethod
    def _on_for_within_period(cls, on_for: float, info: ValidationInfo) -> float:
        period = info.data.get("period")
        if period is not None and on_for >= period:
            raise DesignError(
                "the command must be off for a part of the period",
                expected=f"less than the period of {format_quantity(period, 's')}",
                found=format_quantity(on_for, "s"),
            )
        return on_for

    @field_validator("edge")
    @classmethod
    def _edge_within_pulse(cls, edge: float, info: ValidationInfo) -> float:
        on_for, period = info.data.get("on_for"), info.data.get("period")
        if on_for is not None and edge > on_for:
            raise DesignError(
                "the edge is longer than the pulse",
                expected=f"no more than on_for, {format_quantity(on_for, 's')}",
                found=format_quantity(edge, "s"),
            )
        if on_for is not None and period is not None and edge > (period - on_for) * (1.0 + 1e-9):
            raise DesignError(
                "the edge is longer than the pause between two pulses",
                expected=f"no more than period - on_for, {format_quantity(period - on_for, 's')}",
                found=format_quantity(edge, "s"),
            )
        return edge


class Carrier(_Table):
    """The RF signal.

    Parameters
    ----------
    frequency : tuple of float
        Carriers, each simulated [Hz].
    level : tuple of float
        Available power of the source, each simulated where the carrier is resolved [dBm].
    impedance : float
        Of source and loads, and reference of the S-parameters [ohm].
    """

    frequency: Annotated[tuple[float, ...], Series(Quantity("Hz", 0.0, 1e12, True))] = Field(
        description="one frequency or an array of them"
    )
    level: Annotated[tuple[float, ...], Series(Quantity("dBm", -200.0, 80.0))] = Field(
        default=(-10.0,), description="available power of the RF source, one level or an array of them"
    )
    impedance: Annotated[float, Quantity("ohm", 0.0, 1e5, True)] = Field(
        default=50.0, description="of the RF source and of every load"
    )


class Junction(_Table):
    """A junction as the design sets it.

    Parameters
    ----------
    name : str
        Name of its table in the design file.
    part : Part
        The part that it is.
    values : mapping of str to float
        Every parameter of the part, in its unit.
    model : str or None
        A `.model` card that replaces the part's own.
    ratings : JunctionRatings
        What it stands at most.
    """

    name: str
    part: InstanceOf[Part]
    values: Annotated[Mapping[str, float], Frozen()]
    model: str | None = None
    ratings: JunctionRatings = JunctionRatings()


class Switch(_Table):
    """The RF path and its junctions.

    Parameters
    ----------
    path : Part
        The part that the path is.
    values : mapping of str to float
        Every parameter of the path, in its unit.
    junctions : mapping of str to Junction
        The junction in each slot of the path.
    """

    path: InstanceOf[Part]
    values: Annotated[Mapping[str, float], Frozen()]
    junctions: Annotated[Mapping[str, Junction], Frozen()]


class Driver(_Table):
    """A driver as the design sets it.

    Parameters
    ----------
    name : str
        Name of its table in the design file.
    part : Part
        The part that it is.
    values : mapping of str to float
        Every supply and parameter of the part, in its unit.
    model : str or None
        A `.model` card that replaces the part's own.
    ratings : DriverRatings
        What it stands at most.
    """

    name: str
    part: InstanceOf[Part]
    values: Annotated[Mapping[str, float], Frozen()]
    model: str | None = None
    ratings: DriverRatings = DriverRatings()


class Measure(_Table):
    """The table `[measure]`: definitions that the metrics use.

    Parameters
    ----------
    basis, reference, settle_band, phase_band, video_bandwidth, resolution_bandwidth, isolation_level
        As in `transim.measure.definitions.Definitions`.
    shortest : bool
        Whether shortest usable pulse and gap are looked for.
    """

    basis: Annotated[Literal["voltage", "power"], Choice(("voltage", "power"))] = Field(
        default=_STANDARD.basis, description="10 and 90 % of the RF voltage, or of its power"
    )
    reference: Annotated[Literal["static", "end_of_pulse"], Choice(("static", "end_of_pulse"))] = Field(
        default=_STANDARD.reference, description="full level: the static on state, or the end of the pulse"
    )
    settle_band: Annotated[float, Quantity("dB", 0.0, 20.0, True)] = Field(
        default=_STANDARD.settle_band, description="half width of the band in which the level has settled"
    )
    phase_band: Annotated[float, Quantity("deg", 0.0, 90.0, True)] = Field(
        default=_STANDARD.phase_band, description="half width of the band in which the phase has settled"
    )
    video_bandwidth: Annotated[float | None, Quantity("Hz", 0.0, 1e12, True)] = Field(
        default=_STANDARD.video_bandwidth, description="of the instrument that sees the video leakage"
    )
    resolution_bandwidth: Annotated[float, Quantity("Hz", 0.0, 1e12, True)] = Field(
        default=_STANDARD.resolution_bandwidth, description="for video_inband"
    )
    isolation_level: Annotated[float, Quantity("dB", 0.0, 300.0, True)] = Field(
        default=_STANDARD.isolation_level, description="what counts as off where isolation has no limit"
    )
    shortest: Annotated[bool, Flag()] = Field(
        default=False, description="true: look for shortest_pulse and shortest_gap too, by bisection"
    )

    def definitions(self) -> Definitions:
        """Return the definitions for the metrics.

        Returns
        -------
        Definitions
            With the values of this table.
        """
        return Definitions(**{name: getattr(self, name) for name in type(self).model_fields if name != "shortest"})


class Environment(_Table):
    """Surroundings of the circuit.

    Parameters
    ----------
    temperature : tuple of float
        Temperatures, each simulated [degC].
    """

    temperature: Annotated[tuple[float, ...], Series(Quantity("degC", -273.15, 500.0, True))] = Field(
        default=(25.0,), description="one temperature or an array of them"
    )


class Numerics(_Table):
    """How finely the circuit is simulated.

    Parameters
    ----------
    reltol : float
        Relative tolerance of ngspice.
    steps : int
        The longest time step is ``on_for / steps``.
    carrier_points : int
        Time steps in a period of the carrier, where the carrier is resolved.
    timeout : float
        Longest duration of one run of ngspice [s].
    solution : {"auto", "frozen", "ringing"}
        Solution of the envelope.
    """

    reltol: Annotated[float, Quantity("1", 1e-8, 1e-2)] = Field(
        default=1e-4, description="relative tolerance of ngspice"
    )
    steps: Annotated[int, Count(20, 1_000_000)] = Field(
        default=400, description="the longest time step is on_for / steps"
    )
    carrier_points: Annotated[int, Count(8, 10_000)] = Field(
        default=40, description="time steps in a carrier period, where the carrier is resolved"
    )
    timeout: Annotated[float, Quantity("s", 0.0, 1e6, True)] = Field(
        default=60.0, description="longest duration of one run of ngspice"
    )
    solution: Annotated[Literal["auto", "frozen", "ringing"], Choice(("auto", "frozen", "ringing"))] = Field(
        default="auto", description="envelope without or with the network's ringing at the carrier"
    )


class Static(_Table):
    """The table `[static]`: the settled states against frequency and against the holding current.

    Parameters
    ----------
    start, stop : float
        Ends of the frequency range [Hz]; keys `from` and `to`.
    points : int
        Points in a decade, evenly spaced over the logarithm; both ends are among them.
    bias_sweep : tuple of float
        Holding currents into the bias entry in place of the driver [A]; empty: none.
    """

    start: Annotated[float, Quantity("Hz", 0.0, 1e12, True)] = Field(
        alias="from", description="lowest frequency of the sweep"
    )
    stop: Annotated[float, Quantity("Hz", 0.0, 1e12, True)] = Field(
        alias="to", description="highest frequency of the sweep, above from"
    )
    points: Annotated[int, Count(1, 1000)] = Field(
        default=20, validate_default=True, description="points per decade, as ngspice's .ac dec counts them"
    )
    bias_sweep: Annotated[tuple[float, ...], Series(Quantity("A", -1e3, 1e3))] = Field(
        default=(), description="holding currents into the bias entry in place of the driver, one or an array of them"
    )

    @field_validator("stop")
    @classmethod
    def _stop_above_start(cls, stop: float, info: ValidationInfo) -> float:
        start = info.data.get("start")
        if start is not None and stop <= start:
            raise DesignError(
                "the sweep must end above its lowest frequency",
                expected=f"more than {format_quantity(start, 'Hz')}",
                found=format_quantity(stop, "Hz"),
            )
        return stop

    @field_validator("points")
    @classmethod
    def _one_step_at_least(cls, points: int, info: ValidationInfo) -> int:
        start, stop = info.data.get("start"), info.data.get("stop")
        # with less than one step in the range ngspice never ends
        if start is not None and stop is not None and points * math.log10(stop / start) < 1.0:
            raise DesignError(
                "the range from .. to is narrower than one step",
                expected=f"at least {math.ceil(1.0 / math.log10(stop / start))} points a decade, or a wider range",
                found=str(points),
            )
        return points


class Source(_Table):
    """Where a design comes from.

    Parameters
    ----------
    path : Path
        The design file.
    text : str
        Its text.
    """

    path: Path
    text: str


class Design(_Table):
    """Everything that one design file asks for.

    Parameters
    ----------
    title : str
        One line.
    control : Control
        The command.
    carrier : Carrier
        The RF signal.
    switch : Switch
        The RF path with its junctions.
    drivers : tuple of Driver
        Drivers, each simulated; at least one, of different names.
    limits : tuple of Limit
        What the metrics may be.
    definitions : Definitions
        Definitions that the metrics use.
    environment : Environment
        Temperatures.
    numerics : Numerics
        How finely the circuit is simulated.
    static : Static or None
        Frequencies and currents at which the settled states are swept; None: they are not.
    shortest : bool
        Whether shortest usable pulse and gap are looked for.
    source : Source
        Where the design comes from.
    """

    title: Annotated[str, Line(200)]
    control: Control
    carrier: Carrier
    switch: Switch
    drivers: tuple[Driver, ...] = Field(min_length=1)
    limits: tuple[InstanceOf[Limit], ...] = ()
    definitions: InstanceOf[Definitions] = _STANDARD
    environment: Environment = Environment()
    numerics: Numerics = Numerics()
    static: Static | None = None
    shortest: bool = False
    source: Source
