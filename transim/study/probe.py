"""A carrier-resolved look at the turn-on alone: whether the RF, at its stated level, changes the time that it needs.

Nothing in the small-signal solution foretells this: on the p-i-n example on_time departs by 5 % anywhere between
7 dBm and 29 dBm, by driver and carrier, because the RF shifts the first charges of the two junctions apart. A run
that ends soon after the turn-on costs a fraction of a whole carrier analysis, so it is measured.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from transim.circuit.decks import Tone, carrier_deck
from transim.circuit.netlist import ThrowPlace
from transim.engine.ngspice import discard_kept
from transim.engine.rawfile import Plot
from transim.envelope.carrier import extract_envelope
from transim.errors import EngineError
from transim.measure.rf import RfStress
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity
from transim.study.case import Case
from transim.study.decks import carrier_timeline
from transim.study.stress import amplitude_of

__all__ = ["TurnOnProbe"]

#: RF across a conducting junction, in N Vt, below which no departure was ever seen (the least was 1.3).
_WORTHWHILE = 0.5
#: A departure by more than this share is said.
_DEPARTURE = 0.05
#: The probe runs on to this multiple of the small-signal time; a later turn-on is said to be later than that.
_LONGEST = 1.5
#: A run that takes longer costs more than it tells [s].
_SECONDS = 5.0
#: More carrier periods than this are not probed.
_PERIODS = 3000.0


class TurnOnProbe:
    """Probes of one case at one carrier; the run without RF serves all levels.

    Parameters
    ----------
    case : Case
        The circuit.
    throw : ThrowPlace
        The way of the RF.
    frequency : float
        Carrier [Hz].
    level_90 : float
        |S| at 90 % of the on level.
    on_time : float
        By the envelope analysis, of the mean over the carrier period [s].
    """

    def __init__(self, case: Case, throw: ThrowPlace, frequency: float, level_90: float, on_time: float) -> None:
        self._case = case
        self._throw = throw
        self._frequency = frequency
        self._level = level_90
        self._on_time = on_time
        self._quiet: Plot | None = None

    def warnings(self, stress: RfStress) -> tuple[str, ...]:
        """Return what is to be said of the turn-on at a level; empty where the envelope analysis holds.

        Parameters
        ----------
        stress : RfStress
            At the level.
        """
        if stress.modulation is None or stress.modulation < _WORTHWHILE:
            return ()
        level = format_quantity(stress.level, "dBm")
        if self._on_time * self._frequency > _PERIODS:
            return (
                f"at {level} the RF across a conducting junction reaches {stress.modulation:.2g} N Vt during a "
                "transition; whether that moves on_time, the carrier analysis tells",
            )
        try:
            found = self._measure(stress.level)
        except EngineError as error:
            # the envelope analysis stands without its probe
            discard_kept(error)
            reason = error.message.splitlines()[0]
            return (f"at {level} the RF may move its turn-on, and a probe of it failed ({reason})",)
        small = format_quantity(self._on_time, "s")
        if found is None:
            return (
                f"at {level} the RF itself delays its turn-on: on_time is more than {_LONGEST:g} times the "
                f"small-signal {small}; use --analysis carrier",
            )
        share = found / self._on_time - 1.0
        if abs(share) <= _DEPARTURE:
            return ()
        return (
            f"at {level} the RF itself moves its turn-on: on_time is {format_quantity(found, 's')}, {share:+.1%} "
            f"against the small-signal {small}; use --analysis carrier",
        )

    def _measure(self, level: float) -> float | None:
        """Return on_time at a level [s], or None where the run ends before."""
        case, frequency = self._case, self._frequency
        design, netlist = case.design, case.netlist
        whole = carrier_timeline(design, frequency)
        on_edge = whole.timing(self._throw.passes_high).on_edge
        timeline = replace(whole, stop=on_edge + _LONGEST * self._on_time + 4.0 / frequency)
        amplitude = amplitude_of(level, design.carrier.impedance)
        first, second = self._throw.through
        name = f"_{self._throw.name}" if self._throw.name else ""
        group = f"probe_{format_quantity(frequency, 'Hz', 12)}_{level:g}dBm{name}".replace(" ", "")
        plots = []
        for size, phase in ((amplitude, 0.0), (amplitude, 90.0), (0.0, 0.0)):
            if size == 0.0 and self._quiet is not None:
                plots.append(self._quiet)
                continue
            tone = Tone(frequency, size, phase, first)
            deck = carrier_deck(netlist, design.control, timeline, design.numerics, case.origin, tone)
            plots.append(case.run(replace(deck, group=group), longest=_SECONDS).plots[0])
        self._quiet = plots[2]
        node = f"v({netlist.ports[second].node})"
        runs = [(np.real(plot["time"]), np.real(plot[node])) for plot in plots]
        time, envelope = extract_envelope((runs[0], runs[1], runs[2]), frequency, design.numerics.carrier_points)
        rising = Waveform(time, np.abs(2.0 * envelope / amplitude), "1").crossings(self._level, "rising")
        after = rising[rising > on_edge]
        return float(after[0] - on_edge) if after.size else None
