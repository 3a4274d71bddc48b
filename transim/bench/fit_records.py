"""Junction parameters from recorded RF envelopes: the design is simulated until it gives the record."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.bench.measured import Measured
from transim.circuit.timeline import timeline_of
from transim.design.model import Design, Driver
from transim.design.parameters import changed_design
from transim.engine.ngspice import Engine
from transim.errors import MeasurementError, RecordError
from transim.measure.definitions import Timing
from transim.measure.waveform import Waveform
from transim.study.simulate import simulate

__all__ = ["Comparison", "compare_records"]

Array = npt.NDArray[np.float64]

#: What a simulation is trusted to, as a share of the on level, and for a logarithmic detector in dB.
_MODEL, _MODEL_DB = 0.003, 0.05
#: Mean magnitude of pure noise over the standard deviation of a component, squared.
_RICE = np.pi / 2.0


@dataclass(frozen=True)
class Comparison:
    """A record and the driver that the switch was driven by.

    Attributes
    ----------
    measured : Measured
        The record.
    driver : Driver
        Of the design.
    """

    measured: Measured
    driver: Driver


def compare_records(
    design: Design, junction: str, comparisons: Sequence[Comparison], engine: Engine
) -> Callable[[Mapping[str, float]], list[tuple[Array, Array]]]:
    """Prepare the comparison of records with simulations.

    Parameters
    ----------
    design : Design
        What was built.
    junction : str
        The junction whose parameters change.
    comparisons : sequence of Comparison
        The records.
    engine : Engine
        ngspice.

    Returns
    -------
    callable
        Takes values of the junction by name; returns, for each record, instants [s] and measured less simulated
        output of the detector in standard deviations: those of the cells, and 0.3 % of the on level for what the
        simulation itself is trusted to. A record without a through level is scaled to fit.

    Raises
    ------
    RecordError
        If a record has no RF trace, or its carrier is neither known nor the design's only one.
    """
    cases = [_prepare(design, one) for one in comparisons]

    def compare(values: Mapping[str, float]) -> list[tuple[Array, Array]]:
        results = []
        for one, (own, carrier) in zip(comparisons, cases, strict=True):
            changed = changed_design(own, {f"junction.{junction}.{name}": value for name, value in values.items()})
            temperature = own.environment.temperature[0]
            case = simulate(changed, one.driver, temperature, engine, ("envelope",), checks="start")
            timing = timeline_of(changed).timing(one.measured.passes_high)
            place = _throw_place(own, one.measured)
            envelope = case.throws[place].envelopes["envelope", carrier].magnitude()
            results.append(_difference(one.measured, envelope, timing))
        return results

    return compare


def _prepare(design: Design, one: Comparison) -> tuple[Design, float]:
    """Return the design with the record's own carrier and pulse."""
    measured = one.measured
    if measured.levels is None or measured.time.size < 8:
        raise RecordError("there is no RF trace in this record; measure it with --rf", file=measured.file)
    carriers = design.carrier.frequency
    carrier = measured.carrier or (carriers[0] if len(carriers) == 1 else None)
    if carrier is None:
        raise RecordError(
            "the carrier of this record is not known and the design has several; measure it with --carrier",
            file=measured.file,
        )
    _throw_place(design, measured)
    control = design.control
    timing = measured.timing
    first, second = sorted((timing.on_edge, timing.off_edge))
    if second <= timing.stop:
        on_for = second - first
        period = max(control.period, on_for + 2.0 * control.edge, timing.stop - first)
        control = control.model_copy(update={"on_for": on_for, "period": period, "record": None})
    own = design.model_copy(
        update={"control": control, "carrier": design.carrier.model_copy(update={"frequency": (carrier,)})}
    )
    return own, carrier


def _throw_place(design: Design, measured: Measured) -> int:
    """Return the place of the first throw that passes RF in the same state of the command as the record."""
    path = design.switch.path
    found = [place for place, throw in enumerate(path.throws) if throw.passes_high == measured.passes_high]
    if not found:
        words = ("low", "high") if measured.passes_high else ("high", "low")
        raise RecordError(
            f"the path {path.name} passes RF while the command is {words[0]}, in the record it passes "
            f"while the command is {words[1]}",
            file=measured.file,
        )
    return found[0]


def _difference(measured: Measured, envelope: Waveform, timing: Timing) -> tuple[Array, Array]:
    times, places = [], []
    recorded = measured.timing
    for own, simulated in ((_window(recorded, on=True), _window(timing, on=True)),
                           (_window(recorded, on=False), _window(timing, on=False))):  # fmt: skip
        if own is None or simulated is None:
            continue
        shift = simulated[0] - own[0]
        inside = (measured.time >= own[1]) & (measured.time <= min(own[2], simulated[2] - shift))
        times.append(np.flatnonzero(inside))
        places.append(measured.time[inside] + shift)
    chosen = np.concatenate(times) if times else np.empty(0, dtype=int)
    if chosen.size < 8:
        raise MeasurementError(
            f"{measured.file}: only {chosen.size} cells of the record lie in the simulated cycle; check on_for and edge"
        )
    ratio = np.interp(np.concatenate(places), envelope.time, np.asarray(envelope.value, dtype=float))
    value, sigma = measured.value[chosen], measured.sigma[chosen]
    return measured.time[chosen], _weighted(measured, ratio, value, sigma)


def _weighted(measured: Measured, ratio: Array, value: Array, sigma: Array) -> Array:
    detector = measured.detector
    levels = measured.levels
    full = measured.through if measured.through is not None else (levels.on if levels else 1.0)
    trusted = abs(detector.slope) * _MODEL_DB if detector.kind == "log" else _MODEL * abs(full - detector.zero)
    weight = 1.0 / np.hypot(sigma, trusted)
    model = detector.output(np.maximum(ratio, 1e-6), full)
    if measured.through is None:
        if detector.kind == "log":
            model = model + np.average(value - model, weights=weight**2)
        else:
            clear = (model - detector.zero) * weight
            model = detector.zero + (model - detector.zero) * float(
                clear @ ((value - detector.zero) * weight) / (clear @ clear)
            )
    if detector.kind == "carrier":
        # the magnitude of a phasor in noise is not zero where the phasor is
        model = np.sqrt(model**2 + _RICE * sigma**2)
    return np.asarray((value - model) * weight)


def _window(timing: Timing, *, on: bool) -> tuple[float, float, float] | None:
    """Return 50 % point, begin and end of the interval of an edge; None where it is not in the cycle."""
    try:
        begin, end = timing.on_window() if on else timing.off_window()
    except MeasurementError:
        return None
    return (timing.on_edge if on else timing.off_edge), begin, end


