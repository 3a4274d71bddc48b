"""Sampled waveforms, taken as straight lines between samples that need not be evenly spaced."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Literal, TypeVar, cast

import numpy as np
from numpy.typing import NDArray

from transim.errors import MeasurementError
from transim.measure.instants import Instants
from transim.measure.pole import single_pole
from transim.measure.spectrum import fourier_integral
from transim.quantities import format_quantity

__all__ = ["Waveform"]

Real = NDArray[np.float64]
Samples = NDArray[np.float64] | NDArray[np.complex128]
_Found = TypeVar("_Found")

#: An instant may lie this share of the span outside it: engines round their last time point.
END_ROUNDING = 1e-9


@dataclass(frozen=True, eq=False)
class Waveform:
    """A quantity against time, linear between its samples.

    Parameters
    ----------
    time : ndarray, shape (n,)
        Instants, strictly increasing, at least two [s].
    value : ndarray, shape (n,)
        Real or complex samples [`unit`]. Samples that are not finite are kept, and every computation on
        them raises.
    unit : str
        Unit of `value`.

    Raises
    ------
    MeasurementError
        If the shapes do not fit or time does not increase.

    Examples
    --------
    >>> ramp = Waveform([0.0, 4.0, 5.0], [0.0, 2.0, 2.0], "V")
    >>> ramp.crossings(0.5, "rising").tolist()
    [1.0]
    >>> ramp.integral()
    6.0
    """

    time: Real
    value: Samples
    unit: str
    _instants: Instants = field(init=False, repr=False)
    #: What was computed before: metrics ask for the same few intervals and extremes again and again.
    _found: dict[object, Any] = field(init=False, repr=False)

    def __post_init__(self) -> None:
        known = Instants.known(self.time)
        time = np.array(self.time, dtype=np.float64) if known is None else known.time
        value = np.array(self.value, dtype=np.complex128 if np.iscomplexobj(self.value) else np.float64)
        if time.ndim != 1 or value.shape != time.shape or time.size < 2:
            raise MeasurementError(
                f"a waveform needs two or more times and as many values: found {time.shape} and {value.shape}"
            )
        instants = known or Instants(time)
        value.setflags(write=False)
        object.__setattr__(self, "time", instants.time)
        object.__setattr__(self, "value", value)
        object.__setattr__(self, "_instants", instants)
        object.__setattr__(self, "_found", {})

    def at(self, instant: float) -> complex:
        """Return the value at one instant, linear between samples.

        Parameters
        ----------
        instant : float
            The instant [s].

        Returns
        -------
        complex
            The value [`unit`]; its imaginary part is zero for a real waveform.

        Raises
        ------
        MeasurementError
            If the instant is outside the waveform or a sample is not finite.
        """
        self._inside(instant, instant)
        return complex(np.interp(instant, self.time, self._finite()))

    def between(self, start: float, stop: float) -> Waveform:
        """Cut out an interval; its two ends are interpolated.

        Parameters
        ----------
        start, stop : float
            The interval [s].

        Returns
        -------
        Waveform
            The part from `start` to `stop`.

        Raises
        ------
        MeasurementError
            If the interval is empty or leaves the waveform, or a sample is not finite.
        """
        if (start, stop) in self._found:
            return cast("Waveform", self._found[start, stop])
        if not start < stop:
            raise MeasurementError(f"empty interval at {format_quantity(start, 's')}", span=(start, stop))
        self._inside(start, stop)
        value = self._finite()
        cut = self._instants.between(start, stop)
        ends = cut.instants.time[[0, -1]]
        after = cut.first + cut.instants.time.size - 2
        # each end between its two neighbours alone: the same value, without a look at all samples
        begin = np.interp(ends[:1], self.time[cut.first - 1 : cut.first + 1], value[cut.first - 1 : cut.first + 1])
        end = np.interp(ends[1:], self.time[after - 1 : after + 1], value[after - 1 : after + 1])
        joined = cast("Samples", np.concatenate((begin, value[cut.first : after], end)))
        found = Waveform(cut.instants.time, joined, self.unit)
        self._found[start, stop] = found
        return found

    def magnitude(self) -> Waveform:
        """Return the magnitude of the samples.

        Returns
        -------
        Waveform
            Real waveform on the same instants.

        Raises
        ------
        MeasurementError
            If a sample is not finite.
        """
        return self._once("magnitude", lambda: Waveform(self.time, np.abs(self._finite()), self.unit))

    def extremes(self) -> tuple[float, float]:
        """Return the smallest and the largest value.

        Returns
        -------
        tuple of float
            Lowest and highest sample [`unit`].

        Raises
        ------
        MeasurementError
            If the waveform is complex or a sample is not finite.
        """
        return self._once("extremes", lambda: (float(self._real().min()), float(self._real().max())))

    def peak(self) -> tuple[float, float]:
        """Return instant and value of the sample of largest magnitude, the first if there are several.

        Returns
        -------
        tuple of float
            Instant [s] and signed value [`unit`].

        Raises
        ------
        MeasurementError
            If the waveform is complex or a sample is not finite.
        """
        value = self._real()
        index = int(np.argmax(np.abs(value)))
        return float(self.time[index]), float(value[index])

    def crossings(self, level: float, direction: Literal["rising", "falling"]) -> Real:
        """Return the instants at which the waveform passes a level in one direction.

        Parameters
        ----------
        level : float
            The level [`unit`].
        direction : {"rising", "falling"}
            Which crossings.

        Returns
        -------
        ndarray, shape (k,)
            Instants in increasing order [s], by linear interpolation between samples.

        Raises
        ------
        MeasurementError
            If the waveform is complex or a sample is not finite.

        Notes
        -----
        Rising and falling crossings alternate: a waveform that only touches the level does not cross it.
        Where it stays on the level and then goes through, the instant is the first on the level; a
        waveform that ends on the level has crossed it.
        """
        sign = 1.0 if direction == "rising" else -1.0
        distance = sign * (self._real() - level)
        away = np.flatnonzero(distance)
        if not away.size:
            return np.empty(0)
        below = distance[away] < 0.0
        through = np.append(below[:-1] & ~below[1:], below[-1] and away[-1] < distance.size - 1)
        first = away[through]
        share = distance[first] / (distance[first] - distance[first + 1])
        return np.asarray(self.time[first] + share * (self.time[first + 1] - self.time[first]))

    def last_entry(self, low: float, high: float) -> float | None:
        """Return the instant from which on the waveform stays between two levels.

        Parameters
        ----------
        low, high : float
            The band, both levels included [`unit`].

        Returns
        -------
        float or None
            Instant of the last entry [s], by linear interpolation; None if it never leaves the band.

        Raises
        ------
        MeasurementError
            If it ends outside the band, is complex, or a sample is not finite.
        """
        value = self._real()
        outside = np.flatnonzero((value < low) | (value > high))
        if not outside.size:
            return None
        last = int(outside[-1])
        if last == value.size - 1:
            end = float(value[last])
            raise MeasurementError(f"ends outside the band, at {end:.4g} {self.unit}", level=end)
        edge = low if value[last] < low else high
        share = (value[last] - edge) / (value[last] - value[last + 1])
        return float(self.time[last] + share * (self.time[last + 1] - self.time[last]))

    def integral(self) -> float:
        """Return the integral over the whole waveform, exact for straight lines.

        Returns
        -------
        float
            The integral [`unit` s].

        Raises
        ------
        MeasurementError
            If the waveform is complex or a sample is not finite.
        """
        return self._once("integral", self._integral)

    def _integral(self) -> float:
        value = self._real()
        return math.fsum((self._instants.steps * (value[:-1] + value[1:]) / 2.0).tolist())

    def square_integral(self) -> float:
        """Return the integral of the square over the whole waveform, exact for straight lines.

        Returns
        -------
        float
            The integral [`unit`^2 s].

        Raises
        ------
        MeasurementError
            If the waveform is complex or a sample is not finite.
        """
        value = self._real()
        first, second = value[:-1], value[1:]
        return math.fsum((self._instants.steps * (first * first + first * second + second * second) / 3.0).tolist())

    def fourier(self, frequency: float) -> complex:
        """Return the Fourier integral at one frequency, exact for straight lines.

        Parameters
        ----------
        frequency : float
            The frequency f [Hz].

        Returns
        -------
        complex
            Integral of value(t) exp(-2j pi f t) dt over the waveform, zero outside it [`unit` s].

        Raises
        ------
        MeasurementError
            If a sample is not finite.

        Notes
        -----
        See `transim.measure.spectrum`.
        """
        return fourier_integral(self.time, self._finite(), frequency)

    def lowpass(self, bandwidth: float) -> Waveform:
        """Pass the waveform through one pole, exactly for straight lines.

        Parameters
        ----------
        bandwidth : float
            -3 dB frequency of the pole [Hz].

        Returns
        -------
        Waveform
            The response, settled at the first sample. It has every instant of the input, each extreme
            of the response, and as many instants between as a chord error of 1e-5 of the range needs.

        Raises
        ------
        MeasurementError
            If the bandwidth is not positive, the waveform is complex or a sample is not finite.

        Notes
        -----
        See `transim.measure.pole`.
        """
        if not (math.isfinite(bandwidth) and bandwidth > 0.0):
            raise MeasurementError(f"the bandwidth of a low-pass must be above 0 Hz, found {bandwidth} Hz")
        return self._once(
            ("lowpass", bandwidth), lambda: Waveform(*single_pole(self.time, self._real(), bandwidth), self.unit)
        )

    def _once(self, name: object, compute: Callable[[], _Found]) -> _Found:
        """Return what was computed before, or compute it; samples never change."""
        if name not in self._found:
            self._found[name] = compute()
        return cast("_Found", self._found[name])

    def _finite(self) -> Samples:
        return self._once("finite", self._checked)

    def _checked(self) -> Samples:
        finite = np.isfinite(self.value)
        if not finite.all():
            bad = np.flatnonzero(~finite)
            at = format_quantity(float(self.time[bad[0]]), "s")
            raise MeasurementError(f"the sample at {at} is not a finite number")
        return self.value

    def _real(self) -> Real:
        value = self._finite()
        if np.iscomplexobj(value):
            raise MeasurementError("a complex waveform has no order: take its magnitude first")
        return np.asarray(value, dtype=np.float64)

    def _inside(self, start: float, stop: float) -> None:
        first, last = float(self.time[0]), float(self.time[-1])
        margin = END_ROUNDING * (last - first)
        if not (first - margin <= start and stop <= last + margin):
            covered = f"{format_quantity(first, 's')} to {format_quantity(last, 's')}"
            wanted = f"{format_quantity(start, 's')} to {format_quantity(stop, 's')}"
            raise MeasurementError(f"the waveform covers {covered}, not {wanted}", span=(start, stop))
