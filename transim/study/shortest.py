"""Shortest usable pulse and gap of a case, by bisection of the command with video run and envelope."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace

import numpy as np

from transim.circuit.elements import Circuit
from transim.circuit.netlist import ThrowPlace
from transim.envelope.linearise import saved_vectors
from transim.envelope.method import solve_envelope
from transim.envelope.stationary import Complex
from transim.errors import EngineError, MeasurementError
from transim.measure.definitions import Timing
from transim.measure.pulse import off_time, on_time
from transim.measure.record import Record
from transim.measure.settling import on_settling
from transim.measure.usable import Shortest, Usable
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity
from transim.study.case import Case
from transim.study.linearised import linearised_case
from transim.study.records import record_of

__all__ = ["find_shortest", "wants_shortest"]

#: Bisection ends where the bracket is narrower than this share of it.
_NARROW = 0.01
#: An on time that departs by this share from that after a long gap is not the same.
_SAME = 0.05
#: Longer intervals than this multiple of the pulse are not tried: nothing moves any more.
_LONGEST = 20.0
#: Time steps that the shorter interval of a trial gets, while that makes the step no finer than half.
_STEPS, _FINER = 200, 2

#: Returns why an interval is not usable; None where it is.
_Trial = Callable[[float], str | None]


def wants_shortest(case: Case) -> bool:
    """Tell whether the design asks for shortest pulse and gap, or limits one of them.

    Parameters
    ----------
    case : Case
        With the design.
    """
    design = case.design
    return design.shortest or any(limit.metric in ("shortest_pulse", "shortest_gap") for limit in design.limits)


def find_shortest(case: Case, throw: ThrowPlace, circuit: Circuit, states: Complex) -> Shortest:
    """Find shortest usable pulse and gap of a throw.

    Parameters
    ----------
    case : Case
        One driver at one temperature; its decks are not added to.
    throw : ThrowPlace
        The way of the RF.
    circuit : Circuit
        The flattened circuit.
    states : ndarray, shape (2, f, p, p)
        S in the settled states, command low first.

    Returns
    -------
    Shortest
        Each the shortest of all intervals tried that was usable; monotone behaviour is taken for granted.
    """
    if case.design.control.record is not None:
        none = Usable(None, 0.0, "the command is recorded: there is no pulse or gap to shorten")
        return Shortest(none, none)
    trials = _Trials(case, throw, circuit, states)
    control = case.design.control
    high, low = control.on_for, min(control.period - control.on_for, _LONGEST * control.on_for)
    pulse, gap = (high, low) if throw.passes_high else (low, high)
    return Shortest(
        _bisect(trials.pulse, control.edge, pulse, "pulse"), _bisect(trials.gap, control.edge, gap, "gap")
    )


def _bisect(trial: _Trial, shortest: float, longest: float, name: str) -> Usable:
    """Halve, in ratio, between an interval that is usable and one that is not."""
    try:
        reason = trial(longest)
        if reason is not None:
            return Usable(None, 0.0, f"not even a {name} of {format_quantity(longest, 's')} is usable: {reason}")
        low, high = shortest, longest
        while high > low * (1.0 + _NARROW):
            middle = math.sqrt(low * high)
            found = trial(middle)
            if found is None:
                high = middle
            else:
                low, reason = middle, found
        if reason is None and (reason := trial(shortest)) is None:
            return Usable(shortest, 0.0, "as short as the command's edges allow")
    except EngineError as error:
        return Usable(None, 0.0, f"a trial failed: {error.message.splitlines()[0]}")
    return Usable(high, high - low, f"in a shorter one: {reason}")


class _Trials:
    """Runs of one case with other pulses and gaps."""

    def __init__(self, case: Case, throw: ThrowPlace, circuit: Circuit, states: Complex) -> None:
        self._case, self._throw, self._circuit, self._states = case, throw, circuit, states
        self._passes = throw.passes_high
        self._reference: list[float] | None = None

    def pulse(self, length: float) -> str | None:
        """Tell why RF cannot use a pulse, from a state in which it was blocked for long."""
        control = self._case.design.control
        if self._passes:
            records = self._run(length, length, 1)
            timing = _timing(records[0].timing, on=0.0, off=length)
        else:
            records = self._run(control.on_for, length, 2)
            timing = _timing(records[0].timing, on=control.on_for, off=control.on_for + length)
        for record in records:
            judged = replace(record, timing=timing)
            try:
                on_time(judged)
                on_settling(judged)
            except MeasurementError as error:
                return _at(record, error.message)
        return None

    def gap(self, length: float) -> str | None:
        """Tell why RF cannot use a gap."""
        control = self._case.design.control
        if self._passes:
            records = self._run(control.on_for, length, 2)
            first = _timing(records[0].timing, on=0.0, off=control.on_for)
            timing = _timing(records[0].timing, on=control.on_for + length, off=control.on_for)
        else:
            records = self._run(length, min(control.period - control.on_for, _LONGEST * control.on_for), 1)
            first = timing = _timing(records[0].timing, on=length, off=0.0)
        for place, record in enumerate(records):
            judged = replace(record, timing=timing)
            try:
                off_time(judged)
                after = on_time(judged)
                usual = on_time(replace(record, timing=first)) if self._passes else self._usual(records, first)[place]
            except MeasurementError as error:
                return _at(record, error.message)
            if abs(after - usual) > _SAME * abs(usual):
                change = 100.0 * (after / usual - 1.0)
                return _at(record, f"on_time after it changes by {change:+.1f} %, to {format_quantity(after, 's')}")
        return None

    def _usual(self, records: list[Record], timing: Timing) -> list[float]:
        """Return on_time of each carrier after the first gap that is tried, the longest."""
        if self._reference is None:
            self._reference = [on_time(replace(record, timing=timing)) for record in records]
        return self._reference

    def _run(self, high: float, low: float, pulses: int) -> list[Record]:
        """Return a record for each carrier of a train; its timing is that of the first pulse's rise."""
        base = self._case
        design, frequencies = base.design, base.design.carrier.frequency
        control = design.control.model_copy(
            update={"on_for": high, "period": high + max(low, design.control.edge), "pulses": pulses}
        )
        usual = design.numerics.steps
        steps = min(max(usual, math.ceil(_STEPS * high / min(high, low))), _FINER * usual)
        numerics = design.numerics.model_copy(update={"steps": steps})
        case = Case(
            design.model_copy(update={"control": control, "numerics": numerics}),
            base.driver,
            base.temperature,
            base.engine,
        )
        case.circuit = self._circuit
        video = case.video(saved_vectors(self._circuit))
        base.seconds += case.seconds
        vectors = {name: np.real(video.data[:, k]) for k, name in enumerate(video.names)}
        ports = case.netlist.ports
        network = linearised_case(case, self._circuit, vectors).network
        pairs = [throw.through for throw in case.netlist.throws]
        solution = solve_envelope(network, ports, frequencies, pairs, design.numerics.solution)
        throw = next(one for one in case.netlist.throws if one.name == self._throw.name)
        lead, stop = case.timeline.lead, case.timeline.stop
        records = []
        for k, frequency in enumerate(frequencies):
            envelopes = [Waveform(solution.time, solution.s[k, :, second, first], "1") for first, second in pairs]
            record = record_of(case, throw, frequency, envelopes, self._states[:, k], vectors)
            timing = Timing(lead, lead + high, control.edge, 0.0, stop, control.period)
            records.append(replace(record, timing=timing))
        return records


def _timing(base: Timing, *, on: float, off: float) -> Timing:
    """Return a cycle with its edges at these times after the first rise of the command."""
    return replace(base, on_edge=base.on_edge + on, off_edge=base.on_edge + off)


def _at(record: Record, reason: str) -> str:
    return f"at {format_quantity(record.carrier, 'Hz', 12)} {reason}"
