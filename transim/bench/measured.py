"""The document of a measured record: written by `measure`, read by `fit` and by `run --beside`."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from transim.bench.cycle import Cycle
from transim.bench.detectors import KINDS, Detector
from transim.bench.setup import Levels
from transim.bench.uncertainty import Estimate
from transim.errors import RecordError
from transim.measure.definitions import Definitions, Timing
from transim.measure.metrics import METRICS

__all__ = ["Measured", "Reading", "read_measured", "record_document"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Reading:
    """A measured figure.

    Attributes
    ----------
    value : float or None
        In the metric's unit.
    uncertainty : float or None
        Standard uncertainty.
    note : str or None
        Why there is no value.
    """

    value: float | None
    uncertainty: float | None
    note: str | None


@dataclass(frozen=True)
class Measured:
    """A measured record, as `measure` left it.

    Attributes
    ----------
    file : Path
        The document.
    readings : mapping of str to Reading
        By metric.
    definitions : Definitions
        That they were taken with.
    timing : Timing
        Of the judged cycle.
    passes_high : bool
        Whether RF passes while the command is high.
    carrier : float or None
        [Hz].
    detector : Detector
        What the RF trace is.
    through : float or None
        What it reads with a straight connection in place of the switch.
    levels : Levels or None
        Its settled levels; None where no RF was recorded.
    time, value, sigma : ndarray, shape (n,)
        The RF trace in cells, with the standard deviation of each [s, V, V].
    """

    file: Path
    readings: Mapping[str, Reading]
    definitions: Definitions
    timing: Timing
    passes_high: bool
    carrier: float | None
    detector: Detector
    through: float | None
    levels: Levels | None
    time: Array
    value: Array
    sigma: Array


def record_document(cycle: Cycle, estimates: Mapping[str, Estimate]) -> dict[str, Any]:
    """Return what a document says about the record itself.

    Parameters
    ----------
    cycle : Cycle
        The record.
    estimates : mapping of str to Estimate
        Its figures.

    Returns
    -------
    dict
        In SI units: detector, levels, timing, and the RF trace in cells.
    """
    setup, levels = cycle.setup, cycle.levels
    timing = cycle.timing(np.asarray(cycle.smooth()["command"], dtype=float))
    document: dict[str, Any] = {
        "detector": asdict(setup.detector),
        "through": setup.through,
        "levels": None if levels is None else asdict(levels),
        "timing": asdict(timing),
        "pulse": cycle.pulse,
        "pulses": cycle.pulses,
        "passes_high": cycle.passes_high,
        "impedance": setup.impedance,
        "contributions": {name: dict(estimate.parts) for name, estimate in estimates.items() if estimate.parts},
        "trace": None,
    }
    trace = cycle.traces.get("rf")
    if trace is not None:
        size = np.abs(trace.value) if np.iscomplexobj(trace.value) else trace.value
        document["trace"] = {
            name: [float(f"{number:.9g}") for number in column]
            for name, column in (("time", trace.time), ("value", size), ("sigma", trace.sigma))
        }
    return document


def read_measured(file: Path) -> Measured:
    """Read the document of `measure`.

    Parameters
    ----------
    file : Path
        What ``transim measure ... --json FILE`` wrote.

    Returns
    -------
    Measured
        The record.

    Raises
    ------
    RecordError
        If it cannot be read or is no such document.
    """
    try:
        document = json.loads(file.read_text(encoding="utf-8"))
    except OSError as error:
        raise RecordError(f"cannot be read: {error.strerror}", file=file) from None
    except (UnicodeDecodeError, json.JSONDecodeError) as error:
        line = getattr(error, "lineno", None)
        raise RecordError(f"no JSON document; {_ADVICE}", file=file, line=line) from None
    try:
        return _measured(file, document)
    except (KeyError, TypeError, ValueError, IndexError) as error:
        raise RecordError(f"no document of measure ({type(error).__name__}: {error}); {_ADVICE}", file=file) from None


_ADVICE = "write one with: transim measure RECORD.csv --command COLUMN --rf COLUMN --json FILE"


def _measured(file: Path, document: Any) -> Measured:
    record, result = document["record"], document["results"][0]
    levels, trace = record["levels"], record["trace"] or {"time": [], "value": [], "sigma": []}
    detector = Detector(**record["detector"])
    if detector.kind not in KINDS:
        raise ValueError(f"detector {detector.kind}")
    time, value, sigma = (np.array(trace[name], dtype=float) for name in ("time", "value", "sigma"))
    if not time.size == value.size == sigma.size:
        raise ValueError("columns of the trace differ in length")
    readings = {}
    for name, entry in result["metrics"].items():
        if name in METRICS:
            numbers = (entry["value"], entry["uncertainty"])
            if any(number is not None and not math.isfinite(number) for number in numbers):
                raise ValueError(f"{name} is not finite")
            readings[name] = Reading(*numbers, entry["note"])
    return Measured(
        file=file,
        readings=readings,
        definitions=Definitions(**document["definitions"]),
        timing=Timing(**record["timing"]),
        passes_high=bool(record["passes_high"]),
        carrier=result["carrier"],
        detector=detector,
        through=record["through"],
        levels=None if levels is None else Levels(**levels),
        time=time,
        value=value,
        sigma=sigma,
    )
