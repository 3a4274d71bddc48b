"""Where a result is less sure than it looks: waveforms without bound, coarse steps, states that have not settled."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from transim.envelope.junction import Array
from transim.errors import MeasurementError
from transim.measure.levels import on_envelope
from transim.measure.metrics import Figure
from transim.measure.record import Record
from transim.quantities import format_quantity

__all__ = ["FEWEST_PERIODS", "FEWEST_STEPS", "LARGEST", "numerical_notes", "unbounded"]

#: No node or current of a switch comes near this [V, A]; a waveform that passes it has run away.
LARGEST = 1e6
#: With its breakpoints at both ends ngspice 39 takes five steps or more in a resolved edge, however short it is.
FEWEST_STEPS = 4
#: An envelope is a thing of several periods: a transition of fewer is no change of level of a carrier.
FEWEST_PERIODS = 2.0
_TRANSITIONS = {"rise_time": "rise from 10 to 90 %", "fall_time": "fall from 90 to 10 %"}


def unbounded(vectors: Mapping[str, Array]) -> tuple[str, ...]:
    """Return what makes a run unfit to be judged: a waveform outside of any subcircuit that runs away.

    Parameters
    ----------
    vectors : mapping of str to ndarray, shape (n,)
        Of the run without RF; nodes inside parts may be scaled, and are left out.

    Returns
    -------
    tuple of str
        One sentence for the first such waveform, or none.
    """
    time = vectors["time"]
    for name, values in vectors.items():
        if not name.startswith(("v(", "i(")) or "." in name:
            continue
        beyond = np.flatnonzero(~(np.abs(values) <= LARGEST))
        if beyond.size:
            unit = "V" if name.startswith("v") else "A"
            return (
                f"{name} passes {format_quantity(LARGEST, unit)} at {format_quantity(float(time[beyond[0]]), 's')} and "
                f"reaches {np.max(np.abs(values)):.3g} {unit}: the circuit runs away, or a value has a wrong unit",
            )
    return ()


def numerical_notes(record: Record, figures: Mapping[str, Figure], time: Array, numerics_steps: int) -> tuple[str, ...]:
    """Return what limits the figures of a record, in sentences.

    Parameters
    ----------
    record : Record
        The cycle.
    figures : mapping of str to Figure
        What was measured on it.
    time : ndarray, shape (n,)
        Instants of the run without RF [s].
    numerics_steps : int
        Steps of the design in a pulse, at least.

    Returns
    -------
    tuple of str
        Empty where nothing has to be said.
    """
    notes = (_coarse(record, time, numerics_steps), _unsettled(record), *_few_periods(record, figures))
    return tuple(note for note in notes if note is not None)


def _coarse(record: Record, time: Array, steps: int) -> str | None:
    timing = record.timing
    counts = []
    for centre in (timing.on_edge, timing.off_edge):
        # a breakpoint at the very end of an edge counts
        ends = (centre - 0.501 * timing.edge, centre + 0.501 * timing.edge)
        counts.append(int(np.count_nonzero((time >= ends[0]) & (time <= ends[1]))))
    if min(counts) >= FEWEST_STEPS:
        return None
    return (
        f"the command's edge of {format_quantity(timing.edge, 's')} has {min(counts)} time steps, and at least "
        f"{FEWEST_STEPS} are wanted; raise numerics.steps above {steps}, or give the command a longer edge"
    )


def _unsettled(record: Record) -> str | None:
    if record.static_on is None or record.static_on == 0:
        return None
    try:
        last = abs(complex(on_envelope(record).value[-1]))
    except MeasurementError:
        return None
    if not 0.0 < last < math.inf:
        return None
    away, band = 20.0 * math.log10(last / abs(record.static_on)), record.definitions.settle_band
    if abs(away) <= band:
        return None
    other = "; levels count from the static on state" if record.definitions.reference == "static" else ""
    return (
        f"the on state has not settled by the end of its interval: the RF is {format_quantity(abs(away), 'dB', 3)} "
        f"{'above' if away > 0.0 else 'below'} its static level, and {format_quantity(band, 'dB')} counts as settled"
        f"{other}; let the interval be longer to see the settled state"
    )


def _few_periods(record: Record, figures: Mapping[str, Figure]) -> list[str]:
    notes = []
    for name, words in _TRANSITIONS.items():
        figure = figures.get(name)
        if figure is None or figure.value is None or figure.value * record.carrier >= FEWEST_PERIODS:
            continue
        periods = figure.value * record.carrier
        notes.append(
            f"the {words} takes {format_quantity(figure.value, 's')}, {periods:.2g} periods of the carrier, and "
            f"an envelope needs at least {FEWEST_PERIODS:g}: {name} and the times at this edge depend on the carrier's "
            "phase"
        )
    return notes
