"""When the command switches: the times that decks and metrics share."""

from __future__ import annotations

from dataclasses import dataclass

from transim.design.command import Command
from transim.design.model import Control, Design
from transim.measure.definitions import Timing

__all__ = ["Timeline", "timeline_of"]

#: Longest stretch that is simulated after a single pulse, in multiples of its length; later nothing moves any more.
_LONGEST = 20.0
#: Share of its duration by which a run ends early.
_EARLY = 1e-9


@dataclass(frozen=True)
class Timeline:
    """Times of the logic command [s], from the start of a deck.

    Attributes
    ----------
    lead : float
        50 % point of the first rising edge.
    edge : float
        0 to 100 % duration of each edge.
    on_for : float
        Command high, between 50 % points.
    period : float
        From one rising edge to the next.
    pulses : int
        How many; the last is judged.
    stop : float
        End of the run.
    command : tuple of (float, float)
        Instants and volts of a recorded command; empty where the pulses repeat evenly.
    marks : tuple of (float, float)
        50 % points of each of its complete pulses, rise and fall.
    """

    lead: float
    edge: float
    on_for: float
    period: float
    pulses: int
    stop: float
    command: tuple[tuple[float, float], ...] = ()
    marks: tuple[tuple[float, float], ...] = ()

    @property
    def rising(self) -> float:
        """50 % point of the judged pulse's rising edge [s]."""
        if self.marks:
            return self.marks[-1][0]
        return self.lead + (self.pulses - 1) * self.period

    @property
    def falling(self) -> float:
        """50 % point of the judged pulse's falling edge [s]."""
        return self.rising + self.on_for

    def timing(self, passes_when_high: bool) -> Timing:
        """Return the times as metrics want them.

        Parameters
        ----------
        passes_when_high : bool
            Whether RF passes while the command is high.
        """
        on, off = (self.rising, self.falling) if passes_when_high else (self.falling, self.rising)
        return Timing(
            on_edge=on,
            off_edge=off,
            edge=self.edge,
            start=self.rising - self.lead if self.pulses == 1 else self.rising - self.edge,
            stop=self.stop,
            period=self.period,
        )

    def first_timing(self, passes_when_high: bool) -> Timing | None:
        """Return the times of the first pulse of a train.

        Parameters
        ----------
        passes_when_high : bool
            Whether RF passes while the command is high.

        Returns
        -------
        Timing or None
            Up to the begin of the second pulse; None where there is one pulse only.
        """
        if self.pulses == 1:
            return None
        rise, fall = self.marks[0] if self.marks else (self.lead, self.lead + self.on_for)
        second = self.marks[1][0] if self.marks else self.lead + self.period
        on, off = (rise, fall) if passes_when_high else (fall, rise)
        return Timing(
            on_edge=on, off_edge=off, edge=self.edge, start=0.0, stop=second - self.edge / 2.0, period=second - rise
        )


def timeline_of(design: Design, *, settle: float = 0.0, overrun: float = 0.0) -> Timeline:
    """Lay out a design's command in time.

    Parameters
    ----------
    design : Design
        With its control table.
    settle : float
        Shortest time before the first edge [s], for carriers that have to settle first.
    overrun : float
        Time to run on after the judged cycle [s].

    Returns
    -------
    Timeline
        One period of the last pulse, or 20 pulse lengths where the period is longer still; of a recorded command up
        to its next rise, if that comes earlier.
    """
    control = design.control
    if control.record is not None:
        return _recorded(control, control.record, settle, overrun)
    lead = max(control.on_for / 50.0 + control.edge, settle)
    last = min(control.period, _LONGEST * control.on_for)
    stop = lead + (control.pulses - 1) * control.period + last - control.edge / 2.0
    return Timeline(lead, control.edge, control.on_for, control.period, control.pulses, _ended(stop + overrun))


def _ended(stop: float) -> float:
    """Return the end of a run, a little early: rounding must not leave the begin of the next edge in it."""
    return stop * (1.0 - _EARLY)


def _recorded(control: Control, record: Command, settle: float, overrun: float) -> Timeline:
    """Lay out a recorded command: moved so that it begins in the deck, with time before its first edge."""
    first = record.pulses[0][0]
    lead = max(control.on_for / 50.0 + control.edge, settle, first - record.time[0])
    shift = lead - first
    rise = record.pulses[-1][0] + shift
    last = min(control.period, _LONGEST * control.on_for)
    if record.next_rise is not None:
        last = min(last, record.next_rise + shift - rise)
    return Timeline(
        lead=lead,
        edge=control.edge,
        on_for=control.on_for,
        period=control.period,
        pulses=control.pulses,
        stop=_ended(rise + last - control.edge / 2.0 + overrun),
        command=tuple((time + shift, volts) for time, volts in zip(record.time, record.volts, strict=True)),
        marks=tuple((start + shift, end + shift) for start, end in record.pulses),
    )
