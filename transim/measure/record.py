"""One judged switching cycle as waveforms, whether simulated or measured."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

from transim.errors import MeasurementError
from transim.measure.definitions import Definitions, Timing
from transim.measure.rating import Rating
from transim.measure.rf import LargeSignal, RfStress
from transim.measure.usable import Shortest
from transim.measure.waveform import Waveform

__all__ = ["Record"]

_WAVEFORMS = (
    "video", "junction_charge", "junction_reverse", "junction_current", "junction_power", "supply_current",
    "junction_conduction", "junction_fed", "other_charge", "other_throws",
)  # fmt: skip


@dataclass(frozen=True, eq=False, kw_only=True)
class Record:
    """Everything that the figures of one cycle are taken from.

    What is None or empty was not recorded: the figures that need it are undefined.

    Parameters
    ----------
    timing : Timing
        Instants of the command, on the time axis of every waveform.
    definitions : Definitions
        What the figures are counted from.
    carrier : float
        Carrier frequency [Hz].
    impedance : float
        Impedance that every RF port is terminated with [ohm].
    biased_passes : bool
        True if the RF passes while the junctions are forward biased, False if it passes while they are not.
    envelope : Waveform or None
        Complex S21 of the judged port pair against time [1]; its magnitude alone where no phase is known.
    static_on, static_off : complex or None
        S21 of the settled states [1].
    match_on, match_off : complex or None
        S11 of the settled states [1].
    video : mapping of str to Waveform
        Voltage at each RF port with the RF off [V].
    drive_current : Waveform or None
        Current out of the driver that opens this way of the RF, positive when it sources [A].
    driver_voltage : Waveform or None
        Voltage at the output of the driver [V].
    supply_power : Waveform or None
        Power that all supplies together deliver [W].
    junction_charge : mapping of str to Waveform
        Stored charge of each junction, positive when forward biased [C].
    junction_reverse : mapping of str to Waveform
        Voltage across each junction, positive when reverse biased [V].
    junction_current : mapping of str to Waveform
        Current into the anode of each junction, of a transistor through its base, positive when forward [A].
    junction_power : mapping of str to Waveform
        Power into each junction [W].
    junction_conduction : mapping of str to Waveform
        Current that conducts through each junction and changes its stored charge, without that of its parallel
        capacitance, positive when forward [A].
    junction_fed : mapping of str to float
        Junctions that the driver's current meets first: +1 where forward current comes out of the driver, -1 where
        it goes into it.
    other_charge : mapping of str to Waveform
        Charge on each capacitance that the driver's current reaches before a junction, and what has left through
        resistances past the junctions; positive when it came out of the driver [C].
    driver_output_power : Waveform or None
        Power out of the driver, of all of them where the path has several bias entries [W].
    other_throws : mapping of str to Waveform
        |S| of every other way of the RF through the path, as a share of its own settled on state [1].
    supply_current : mapping of str to Waveform
        Current out of each supply [A].
    ratings : tuple of Rating
        Maximum ratings, each with the waveform that it applies to.
    stress : RfStress or None
        RF voltages and currents in the junctions at the stated level.
    shortest : Shortest or None
        Shortest usable pulse and gap, where they were asked for.
    large : LargeSignal or None
        What carrier-resolved runs show beside the envelope.

    Raises
    ------
    MeasurementError
        If carrier or impedance is not a finite positive number.
    """

    timing: Timing
    definitions: Definitions
    carrier: float
    impedance: float
    biased_passes: bool
    envelope: Waveform | None = None
    static_on: complex | None = None
    static_off: complex | None = None
    match_on: complex | None = None
    match_off: complex | None = None
    video: Mapping[str, Waveform] = field(default_factory=dict)
    drive_current: Waveform | None = None
    driver_voltage: Waveform | None = None
    supply_power: Waveform | None = None
    junction_charge: Mapping[str, Waveform] = field(default_factory=dict)
    junction_reverse: Mapping[str, Waveform] = field(default_factory=dict)
    junction_current: Mapping[str, Waveform] = field(default_factory=dict)
    junction_power: Mapping[str, Waveform] = field(default_factory=dict)
    junction_conduction: Mapping[str, Waveform] = field(default_factory=dict)
    junction_fed: Mapping[str, float] = field(default_factory=dict)
    other_charge: Mapping[str, Waveform] = field(default_factory=dict)
    driver_output_power: Waveform | None = None
    other_throws: Mapping[str, Waveform] = field(default_factory=dict)
    supply_current: Mapping[str, Waveform] = field(default_factory=dict)
    ratings: tuple[Rating, ...] = ()
    stress: RfStress | None = None
    shortest: Shortest | None = None
    large: LargeSignal | None = None

    def __post_init__(self) -> None:
        for name in ("carrier", "impedance"):
            value = getattr(self, name)
            if not (math.isfinite(value) and value > 0.0):
                raise MeasurementError(f"{name} must be a finite positive number, found {value}")
        for name in _WAVEFORMS:
            object.__setattr__(self, name, MappingProxyType(dict(getattr(self, name))))
