"""A simulated result held against a measured record, figure by figure and along the envelope."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.bench.measured import Measured
from transim.errors import MeasurementError, RecordError
from transim.measure.definitions import Definitions, Timing
from transim.measure.metrics import METRICS, Figure
from transim.measure.waveform import Waveform

__all__ = ["Difference", "Overlay", "check_definitions", "differences", "overlay", "same_carrier"]

Array = npt.NDArray[np.float64]

#: Carriers count as the same within this share.
_SAME_CARRIER = 0.01


@dataclass(frozen=True)
class Difference:
    """One figure, simulated and measured.

    Attributes
    ----------
    metric : str
        Its name.
    simulated, measured : float
        In the metric's unit.
    uncertainty : float
        Standard uncertainty of the measured one.
    ratio : float
        Simulated less measured, in standard uncertainties.
    """

    metric: str
    simulated: float
    measured: float
    uncertainty: float
    ratio: float


@dataclass(frozen=True)
class Overlay:
    """The RF of one edge, simulated and measured, on one time axis.

    Attributes
    ----------
    edge : str
        ``on`` or ``off``.
    time : ndarray, shape (n,)
        From the 50 % point of the command's edge [s]; one instant a cell of the record.
    measured, simulated : ndarray, shape (n,)
        RF voltage: S21 where the record has a through level, else as a share of the on level.
    """

    edge: str
    time: Array
    measured: Array
    simulated: Array


def check_definitions(measured: Measured, definitions: Definitions) -> None:
    """Refuse a record that was measured by other definitions.

    Parameters
    ----------
    measured : Measured
        The record.
    definitions : Definitions
        Of the design.

    Raises
    ------
    RecordError
        If a definition differs; names it.
    """
    for name in Definitions.__dataclass_fields__:
        here, there = getattr(definitions, name), getattr(measured.definitions, name)
        if here != there:
            raise RecordError(
                f"measured with {name} {there}, the design has {here}; measure the record again with --design",
                file=measured.file,
            )


def same_carrier(measured: Measured, carrier: float) -> bool:
    """Tell whether a record was taken at a carrier.

    Parameters
    ----------
    measured : Measured
        The record.
    carrier : float
        [Hz].

    Returns
    -------
    bool
        True within 1 %, and where the record's carrier is not known.
    """
    return measured.carrier is None or abs(measured.carrier - carrier) <= _SAME_CARRIER * carrier


def differences(measured: Measured, figures: Mapping[str, Figure]) -> tuple[Difference, ...]:
    """Compare figures.

    Parameters
    ----------
    measured : Measured
        The record.
    figures : mapping of str to Figure
        Simulated, by metric.

    Returns
    -------
    tuple of Difference
        For every metric that both have and count alike, with an uncertainty above 0.
    """
    found = []
    for name in METRICS:
        reading, figure = measured.readings.get(name), figures.get(name)
        if reading is None or figure is None or reading.value is None or figure.value is None:
            continue
        # a note says that the record counts it from another level
        if reading.uncertainty and reading.note is None:
            ratio = (figure.value - reading.value) / reading.uncertainty
            found.append(Difference(name, figure.value, reading.value, reading.uncertainty, ratio))
    return tuple(found)


def overlay(measured: Measured, envelope: Waveform, timing: Timing, static_on: float) -> tuple[Overlay, ...]:
    """Bring record and simulation onto one time axis.

    Parameters
    ----------
    measured : Measured
        The record.
    envelope : Waveform
        Simulated S21 against time.
    timing : Timing
        Of the simulation.
    static_on : float
        Simulated |S21| of the static on state.

    Returns
    -------
    tuple of Overlay
        One for each edge that both hold.
    """
    if measured.levels is None:
        return ()
    through = measured.through is not None
    full = measured.through if measured.through is not None else measured.levels.on
    ratio = measured.detector.ratio(measured.value, full)
    size = np.abs(envelope.value) / (1.0 if through else static_on)
    found = []
    for edge in ("on", "off"):
        try:
            windows = [getattr(each, f"{edge}_window")() for each in (measured.timing, timing)]
        except MeasurementError:
            continue
        zero, other = (getattr(each, f"{edge}_edge") for each in (measured.timing, timing))
        time = measured.time - zero
        inside = (time >= windows[0][0] - zero) & (time <= min(windows[0][1] - zero, windows[1][1] - other))
        simulated = np.interp(time[inside] + other, envelope.time, size)
        found.append(Overlay(edge, time[inside], ratio[inside], simulated))
    return tuple(found)
