"""Means over the command's period, and how they change with the switching rate."""

from __future__ import annotations

from dataclasses import dataclass

from transim.errors import MeasurementError
from transim.measure.definitions import Timing
from transim.measure.waveform import Waveform

__all__ = ["RateLaw", "duty_cycle", "period_mean", "rate_law", "settling_after"]


@dataclass(frozen=True)
class RateLaw:
    """Mean of a quantity as function of the switching rate, at a fixed duty cycle.

    Parameters
    ----------
    duty : float
        Share of the period in which the RF passes, between 0 and 1.
    settled_on, settled_off : float
        The quantity at the end of the interval in which the RF passes, and of the other [`unit`].
    edge_on, edge_off : float
        Integral of what it exceeds these by, from the begin of each edge on [`unit` s].
    unit : str
        Unit of the quantity.

    Notes
    -----
    mean(f) = duty settled_on + (1 - duty) settled_off + f (edge_on + edge_off). Exact at the period that the
    law was taken at; at another one it holds while the quantity settles in both intervals.
    """

    duty: float
    settled_on: float
    settled_off: float
    edge_on: float
    edge_off: float
    unit: str

    @property
    def idle(self) -> float:
        """Limit of the mean for a switching rate towards zero [`unit`]."""
        return self.duty * self.settled_on + (1.0 - self.duty) * self.settled_off

    @property
    def slope(self) -> float:
        """Integral that one whole cycle adds: for a power, the energy of both edges [`unit` s]."""
        return self.edge_on + self.edge_off

    def at(self, rate: float) -> float:
        """Return the mean at a switching rate.

        Parameters
        ----------
        rate : float
            Cycles a second [Hz].

        Returns
        -------
        float
            The mean [`unit`].
        """
        return self.idle + rate * self.slope


def duty_cycle(timing: Timing) -> float:
    """Return the share of the period in which the RF passes.

    Parameters
    ----------
    timing : Timing
        Of a cycle; its edges are less than one period apart.

    Returns
    -------
    float
        Between 0 and 1, from 50 % point to 50 % point.

    Raises
    ------
    MeasurementError
        If the edges are a period or more apart.
    """
    apart = timing.off_edge - timing.on_edge
    if abs(apart) >= timing.period:
        raise MeasurementError("no duty cycle: the command's edges are a period or more apart")
    return (apart if apart > 0.0 else apart + timing.period) / timing.period


def period_mean(wave: Waveform, timing: Timing) -> float:
    """Return the mean over one period of the command.

    Parameters
    ----------
    wave : Waveform
        A quantity that covers the judged cycle.
    timing : Timing
        Of the cycle.

    Returns
    -------
    float
        Mean over the last period of the cycle [unit of `wave`]. Where the cycle is shorter than the period,
        the value at its end is held for the rest.

    Raises
    ------
    MeasurementError
        If the waveform does not cover the cycle, is complex or a sample is not finite.
    """
    start = max(timing.start, timing.stop - timing.period)
    cycle = wave.between(start, timing.stop)
    rest = max(0.0, timing.period - (timing.stop - start))
    return (cycle.integral() + rest * float(cycle.value[-1].real)) / (timing.stop - start + rest)


def rate_law(wave: Waveform, timing: Timing) -> RateLaw:
    """Split the mean of a quantity into its settled values and what each edge adds.

    Parameters
    ----------
    wave : Waveform
        A quantity that covers the judged cycle, settled at the end of both intervals.
    timing : Timing
        Of the cycle.

    Returns
    -------
    RateLaw

    Raises
    ------
    MeasurementError
        If an edge lies outside the cycle, the waveform does not cover it, is complex or not finite.
    """
    settled, extra = [], []
    for begin, end in (timing.on_window(), timing.off_window()):
        window = wave.between(begin, end)
        last = float(window.value[-1].real)
        settled.append(last)
        extra.append(window.integral() - last * (end - begin))
    return RateLaw(
        duty=duty_cycle(timing),
        settled_on=settled[0],
        settled_off=settled[1],
        edge_on=extra[0],
        edge_off=extra[1],
        unit=wave.unit,
    )


def settling_after(wave: Waveform, timing: Timing, share: float) -> tuple[float, float]:
    """Return how long a quantity takes to settle after each edge.

    Parameters
    ----------
    wave : Waveform
        A quantity that covers the judged cycle.
    timing : Timing
        Of the cycle.
    share : float
        Half width of the band around the value at the end of each interval, as a share of the larger of both.

    Returns
    -------
    tuple of float
        Time from the 50 % point of the edge that lets the RF pass, and of the other, to the last entry into the
        band; 0 if it never leaves the band [s].

    Raises
    ------
    MeasurementError
        If an edge lies outside the cycle, the waveform does not cover it, is complex or not finite.
    """
    windows = [wave.between(*window) for window in (timing.on_window(), timing.off_window())]
    ends = [float(window.value[-1].real) for window in windows]
    band = share * max(map(abs, ends))
    entries = [window.last_entry(end - band, end + band) for window, end in zip(windows, ends, strict=True)]
    edges = (timing.on_edge, timing.off_edge)
    on, off = (
        0.0 if entry is None else max(0.0, entry - edge) for entry, edge in zip(entries, edges, strict=True)
    )
    return on, off
