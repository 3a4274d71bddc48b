"""What the figures are counted from: levels, bands and bandwidths, and the instants of the command."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from transim.errors import DesignError, MeasurementError
from transim.quantities import format_quantity

__all__ = ["Definitions", "Timing"]


@dataclass(frozen=True)
class Definitions:
    """Definitions that a figure depends on and that must be stated beside it.

    Parameters
    ----------
    basis : {"voltage", "power"}
        Whether 10 % and 90 % are shares of the RF voltage (-20 and -0.915 dB) or of the RF power
        (-10 and -0.458 dB).
    reference : {"static", "end_of_pulse"}
        The full-on level: |S21| of the static on state, or of the envelope at the end of the interval
        in which the RF passes. The other level is zero in both cases.
    settle_band : float
        Half width of the band around the static on level [dB].
    phase_band : float
        Half width of the band around the static on-state phase [deg].
    video_bandwidth : float or None
        -3 dB frequency of a single pole that the leakage passes before it is measured [Hz]; None: no filter.
    resolution_bandwidth : float
        Bandwidth of the receiver that `video_inband` is stated for [Hz].
    isolation_level : float
        Attenuation that counts as off [dB].

    Raises
    ------
    DesignError
        If a value is outside its range; `key` is the name of the definition.
    """

    basis: Literal["voltage", "power"] = "voltage"
    reference: Literal["static", "end_of_pulse"] = "static"
    settle_band: float = 0.5
    phase_band: float = 2.0
    video_bandwidth: float | None = None
    resolution_bandwidth: float = 1e6
    isolation_level: float = 20.0

    def __post_init__(self) -> None:
        for key, choices in (("basis", ("voltage", "power")), ("reference", ("static", "end_of_pulse"))):
            if getattr(self, key) not in choices:
                found = str(getattr(self, key))
                raise DesignError("unknown choice", key=key, expected=" or ".join(choices), found=found)
        ranges = (
            ("settle_band", "dB", math.inf),
            ("phase_band", "deg", 180.0),
            ("video_bandwidth", "Hz", math.inf),
            ("resolution_bandwidth", "Hz", math.inf),
            ("isolation_level", "dB", math.inf),
        )
        for key, unit, high in ranges:
            value = getattr(self, key)
            if value is None and key == "video_bandwidth":
                continue
            if not (isinstance(value, int | float) and math.isfinite(value) and 0.0 < value < high):
                top = "" if math.isinf(high) else f" and below {format_quantity(high, unit)}"
                raise DesignError(
                    "value out of range", key=key, expected=f"above 0 {unit}{top}", found=f"{value} {unit}"
                )


@dataclass(frozen=True)
class Timing:
    """Instants of the judged cycle, on the time axis of the waveforms.

    Parameters
    ----------
    on_edge, off_edge : float
        50 % points of the command edge that lets the RF pass and of the one that blocks it [s]; either
        may come first.
    edge : float
        Length of a command edge, 0 to 100 % [s].
    start, stop : float
        The judged cycle [s].
    period : float
        Time between two pulses of the command [s].

    Raises
    ------
    MeasurementError
        If the instants are not finite or not in order.
    """

    on_edge: float
    off_edge: float
    edge: float
    start: float
    stop: float
    period: float

    def __post_init__(self) -> None:
        for name in ("on_edge", "off_edge", "edge", "start", "stop", "period"):
            if not math.isfinite(getattr(self, name)):
                raise MeasurementError(f"timing: {name} is not a finite time")
        if self.stop <= self.start:
            raise MeasurementError("timing: the judged cycle stops before it starts")
        if self.edge < 0.0 or self.period <= 0.0:
            raise MeasurementError("timing: the command edge is negative or the period is not positive")
        if self.on_edge == self.off_edge:
            raise MeasurementError("timing: the command's two edges are at the same time")

    def on_window(self) -> tuple[float, float]:
        """Return the interval of the on edge [s].

        Returns
        -------
        tuple of float
            From the begin of the command edge that lets the RF pass to the begin of the next one that
            blocks it, or to the end of the cycle.

        Raises
        ------
        MeasurementError
            If the edge lies outside the judged cycle.
        """
        return self._window(self.on_edge, self.off_edge, "on")

    def off_window(self) -> tuple[float, float]:
        """Return the interval of the off edge [s], the counterpart of `on_window`.

        Returns
        -------
        tuple of float
            From the begin of the command edge that blocks the RF to the begin of the next one that lets
            it pass, or to the end of the cycle.

        Raises
        ------
        MeasurementError
            If the edge lies outside the judged cycle.
        """
        return self._window(self.off_edge, self.on_edge, "off")

    def _window(self, edge: float, other: float, name: str) -> tuple[float, float]:
        # A window ends where the other edge begins: half of its video spike comes before its 50 % point.
        begin = max(self.start, edge - self.edge / 2.0)
        end = min(self.stop, other - self.edge / 2.0) if other > edge else self.stop
        if not self.start <= edge <= self.stop or end <= begin:
            span = f"{format_quantity(self.start, 's')} to {format_quantity(self.stop, 's')}"
            at = format_quantity(edge, "s")
            raise MeasurementError(
                f"no {name} interval: the {name} edge is at {at}, the cycle is {span}",
                span=(self.start, self.stop),
            )
        return begin, end
