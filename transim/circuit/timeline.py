"""When the command switches: the times that decks and metrics share."""

from __future__ import annotations

from dataclasses import dataclass

from transim.design.model import Design
from transim.measure.definitions import Timing

__all__ = ["Timeline", "timeline_of"]

#: Longest stretch that is simulated after a single pulse, in multiples of its length; later nothing moves any more.
_LONGEST = 20.0


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
    """

    lead: float
    edge: float
    on_for: float
    period: float
    pulses: int
    stop: float

    @property
    def rising(self) -> float:
        """50 % point of the judged pulse's rising edge [s]."""
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
        One period of the last pulse, or 20 pulse lengths where the period is longer still.
    """
    control = design.control
    lead = max(control.on_for / 50.0 + control.edge, settle)
    last = min(control.period, _LONGEST * control.on_for)
    stop = lead + (control.pulses - 1) * control.period + last - control.edge / 2.0
    return Timeline(lead, control.edge, control.on_for, control.period, control.pulses, stop + overrun)
