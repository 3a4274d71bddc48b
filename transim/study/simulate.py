"""One driver of a design at one temperature: its decks run, its waveforms measured, its limits judged."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from contextlib import suppress
from dataclasses import replace
from typing import Literal

import numpy as np

from transim.circuit.elements import Circuit
from transim.circuit.netlist import ThrowPlace
from transim.design.model import Design, Driver
from transim.engine.ngspice import Engine
from transim.envelope.junction import Array
from transim.envelope.linearise import saved_vectors
from transim.envelope.method import Envelope, solve_envelope
from transim.envelope.stationary import Complex, largest_difference
from transim.errors import MeasurementError
from transim.measure.account import ChargeAccount, charge_account
from transim.measure.budget import Budget, time_budget
from transim.measure.levels import full_on, voltage_share
from transim.measure.limits import judge, judge_ratings
from transim.measure.metrics import extract
from transim.measure.pulse import on_time
from transim.measure.rate import rate_study
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity
from transim.study.averaging import averaged_time, averaging_notes
from transim.study.carrier import run_carrier
from transim.study.case import Case
from transim.study.holdoff import HoldOffProbe
from transim.study.linearised import linearised_case
from transim.study.probe import TurnOnProbe
from transim.study.records import record_of
from transim.study.result import CaseRun, Result, ThrowRun
from transim.study.settled import run_static_sweeps
from transim.study.shortest import find_shortest, wants_shortest
from transim.study.soundness import numerical_notes, unbounded
from transim.study.stress import StressSolution, small_signal_warnings
from transim.study.together import run_together

__all__ = ["simulate"]

#: Largest difference between the envelope and ngspice's own AC analysis [dB].
_TOLERATED = 0.05
_CHECKS = {
    "check_start": "before the first edge",
    "check_rise": "half way on the command's rising edge",
    "check_end": "at the end of the pulse",
    "check_fall": "half way on the command's falling edge",
}


def simulate(
    design: Design,
    driver: Driver,
    temperature: float,
    engine: Engine,
    analyses: Sequence[str],
    *,
    checks: Literal["all", "start"] = "all",
) -> CaseRun:
    """Simulate one driver at one temperature and all carriers.

    Parameters
    ----------
    design : Design
        The design.
    driver : Driver
        One of its drivers.
    temperature : float
        [degC].
    engine : Engine
        ngspice.
    analyses : sequence of str
        ``envelope``, ``carrier`` or both.
    checks : {"all", "start"}
        Biases at which the envelope is compared with ngspice's AC analysis: ``all`` four of them, or only the
        ``start``, which needs no deck of its own. With ``start``, figures and verdicts are all that a result has.

    Returns
    -------
    CaseRun

    Raises
    ------
    EngineError
        If a deck fails.
    LinearisationError
        If the envelope analysis is asked for and an element has no small-signal form.
    """
    case = Case(design, driver, temperature, engine)
    case.lean = checks == "start"
    if case.lean:
        circuit, states, video = run_together(case)
    else:
        circuit, states = case.static()
        video = case.video(saved_vectors(circuit) if "envelope" in analyses else ())
    vectors = case.vectors
    if wants_shortest(case):
        case.shortest = {
            throw.name: find_shortest(case, throw, circuit, states) for throw in case.netlist.throws
        }
    results: list[Result] = []
    found = [_Envelopes() for _ in case.netlist.throws]
    if "envelope" in analyses:
        _envelope(case, circuit, states, vectors, results, found, checks=checks)
    if "carrier" in analyses:
        _carrier(case, states, vectors, results, found)
    carriers, levels = design.carrier.frequency, design.carrier.level
    throws = [throw.name for throw in case.netlist.throws]
    results.sort(
        key=lambda r: (
            carriers.index(r.carrier), levels.index(r.level), throws.index(r.throw), analyses.index(r.analysis)
        )
    )  # fmt: skip
    sweeps = run_static_sweeps(case)
    results = [replace(result, retries=tuple(case.retries)) for result in results]
    return CaseRun(
        driver=driver.name,
        temperature=temperature,
        results=tuple(results),
        decks=tuple(case.decks),
        video=video,
        throws=tuple(
            ThrowRun(
                name,
                envelopes.at_first(levels[0]),
                envelopes.resolved,
                sweeps[k] if sweeps else None,
                case.shortest.get(name),
            )
            for k, (name, envelopes) in enumerate(zip(throws, found, strict=True))
        ),
        engine_seconds=case.seconds,
    )


class _Envelopes:
    """Envelopes of one throw, as they are found."""

    def __init__(self) -> None:
        self.small: dict[float, Waveform] = {}
        self.resolved: dict[tuple[float, float], Waveform] = {}

    def at_first(self, level: float) -> dict[tuple[str, float], Waveform]:
        """Return all by analysis and carrier, the resolved ones at a level [dBm]."""
        resolved = {("carrier", f): wave for (f, at), wave in self.resolved.items() if at == level}
        return {("envelope", f): wave for f, wave in self.small.items()} | resolved


def _envelope(
    case: Case,
    circuit: Circuit,
    states: Complex,
    vectors: Mapping[str, Array],
    results: list[Result],
    found: Sequence[_Envelopes],
    *,
    checks: str,
) -> None:
    design, netlist = case.design, case.netlist
    frequencies = design.carrier.frequency
    linearised = linearised_case(case, circuit, vectors)
    network = linearised.network
    pairs = [throw.through for throw in netlist.throws]
    solution = solve_envelope(network, netlist.ports, frequencies, pairs, design.numerics.solution)
    points = _check_points(case, solution)
    judged = points if checks == "all" else {}
    references = {name: case.check(name, circuit, vectors, point) for name, point in judged.items()}
    # before the first edge the bias is ngspice's own operating point
    points["check_start"], references["check_start"] = 0, states[0]
    for k, frequency in enumerate(frequencies):
        waveforms = [Waveform(solution.time, solution.s[k, :, second, first], "1") for first, second in pairs]
        differences = {
            name: largest_difference(references[name][k], solution.frozen[k, points[name]]) for name in references
        }
        method = f"{solution.methods[k]}: {solution.reasons[k]}"
        for throw, waveform, envelopes in zip(netlist.throws, waveforms, found, strict=True):
            envelopes.small[frequency] = waveform
            first, second = throw.through
            through = solution.frozen[k, :, second, first]
            ends = (through, points["check_end"])
            stress = StressSolution(case, throw, network, vectors, ends, frequency, solution.reduction)
            probe: TurnOnProbe | None = None
            for level in design.carrier.level:
                at_level = stress.at(level)
                record = record_of(case, throw, frequency, waveforms, states[:, k], vectors, at_level)
                result = _result(case, throw, record, "envelope", method, differences)
                warnings = small_signal_warnings(at_level, frequency)
                time = result.figures["on_time"].value if "on_time" in result.figures else None
                # studies leave the probes out, as they do the checks
                if checks == "all":
                    warnings = (*warnings, *HoldOffProbe(case, throw, frequency, record).warnings(at_level))
                if checks == "all" and time is not None and record.static_on is not None:
                    level_90 = voltage_share(record, 90) * full_on(record)
                    # a resolved carrier shows the mean over its period: like is compared with like
                    seen = averaged_time(record, on_time, _averaged(method)) or time
                    probe = probe or TurnOnProbe(case, throw, frequency, level_90, seen)
                    warnings = (*probe.warnings(at_level), *warnings)
                results.append(replace(result, warnings=warnings, notes=(*result.notes, *linearised.notes)))


def _check_points(case: Case, solution: Envelope) -> dict[str, int]:
    """Return the points of the video run at which ngspice linearises too: half way on both edges, end of the pulse."""
    timeline, time = case.timeline, solution.time
    pairs = [throw.through for throw in case.netlist.throws]
    levels = [np.abs(s[:, second, first]) for s in solution.frozen for first, second in pairs]
    halves = [np.flatnonzero(np.diff(level > 0.5 * level.max())) for level in levels]
    points = {}
    for name, start, stop in (
        ("check_rise", timeline.rising, timeline.falling),
        ("check_fall", timeline.falling, timeline.stop),
    ):
        # of the carriers and throws the first that goes half way in this interval
        inside = (some[(time[some] > start) & (time[some] < stop)] for some in halves)
        found = next((some for some in inside if some.size), None)
        if found is not None:
            points[name] = int(found[0])
    # the command begins to fall half an edge before its 50 % point
    points["check_end"] = int(np.searchsorted(time, timeline.falling - timeline.edge / 2.0, side="right")) - 1
    return points


def _carrier(
    case: Case,
    states: Complex,
    vectors: Mapping[str, Array],
    results: list[Result],
    found: Sequence[_Envelopes],
) -> None:
    points = case.design.numerics.carrier_points
    method = f"quadrature of two runs with {points} points a period, less one without RF"
    for k, frequency in enumerate(case.design.carrier.frequency):
        quiet = None
        for level in case.design.carrier.level:
            runs, quiet = run_carrier(case, frequency, level, quiet)
            waveforms = [run.envelope for run in runs]
            for throw, run, envelopes in zip(case.netlist.throws, runs, found, strict=True):
                envelopes.resolved[frequency, level] = run.envelope
                record = record_of(case, throw, frequency, waveforms, states[:, k], vectors, run.large)
                results.append(_result(case, throw, record, "carrier", method, {}))


def _result(
    case: Case,
    throw: ThrowPlace,
    record: Record,
    analysis: str,
    method: str,
    differences: Mapping[str, float],
) -> Result:
    figures = extract(record)
    faults = tuple(
        f"{_CHECKS[name]}, the envelope differs by {format_quantity(difference, 'dB')} from ngspice's AC analysis at "
        f"the same bias; at most {format_quantity(_TOLERATED, 'dB')} is sound"
        for name, difference in differences.items()
        if not difference <= _TOLERATED
    )
    faults += unbounded(case.vectors)
    result = Result(
        driver=case.origin.driver,
        carrier=record.carrier,
        temperature=case.temperature,
        analysis=analysis,
        figures=figures,
        judgements=judge(figures, case.design.limits),
        method=method,
        faults=faults,
        check=max(differences.values()) if differences else None,
        checked=tuple(_CHECKS[name] for name in differences),
        level=(record.stress or record.large).level,  # type: ignore[union-attr]
        ratings=judge_ratings(record),
        throw=throw.name,
    )
    return result if case.lean else _with_accounts(case, throw, record, result)


def _with_accounts(case: Case, throw: ThrowPlace, record: Record, result: Result) -> Result:
    """Add what only the report of a single run shows."""
    budgets, accounts = _edges(record)
    first = case.timeline.first_timing(throw.passes_high)
    notes = numerical_notes(record, result.figures, case.vectors["time"], case.design.numerics.steps)
    if result.analysis == "envelope":
        notes += averaging_notes(record, result.figures, _averaged(result.method))
    return replace(
        result,
        rates=rate_study(record),
        notes=notes,
        budget=budgets,
        charge=accounts,
        first_pulse=None if first is None else extract(replace(record, timing=first)),
    )


def _averaged(method: str) -> int:
    """Return how often a method has averaged the envelope over one carrier period."""
    return 1 if method.startswith("ringing") else 0


def _edges(record: Record) -> tuple[dict[str, Budget], dict[str, ChargeAccount]]:
    """Return where time and charge of both edges go, as far as they are defined."""
    budgets: dict[str, Budget] = {}
    accounts: dict[str, ChargeAccount] = {}
    for edge in ("on", "off"):
        with suppress(MeasurementError):
            budget = time_budget(record, "on" if edge == "on" else "off")
            budgets[budget.metric] = budget
            accounts[budget.metric] = charge_account(record, budget)
    return budgets, accounts
