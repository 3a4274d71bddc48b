"""Command `measure`: the figures of an oscilloscope record."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

from transim.commands.console import Console
from transim.errors import DesignError, MeasurementError, QuantityError
from transim.quantities import parse_quantity

if TYPE_CHECKING:
    from transim.bench.cycle import Cycle
    from transim.bench.records import Table
    from transim.bench.setup import Setup
    from transim.bench.uncertainty import Estimate
    from transim.design.model import Design

__all__ = ["MeasureRequest", "measure_record"]


@dataclass(frozen=True)
class MeasureRequest:
    """Which record, and how it was taken; quantities as the user wrote them.

    Attributes
    ----------
    file : Path
        The record.
    command, rf, time : str or None
        Columns.
    leakage : sequence of str
        ``PORT=COLUMN`` or ``COLUMN``.
    detector : str
        ``carrier``, ``linear``, ``square`` or ``log``.
    interval, slope, zero, through, carrier, impedance, period : str or None
        Quantities.
    passes : str or None
        ``high`` or ``low``: the command while RF passes.
    pulse : int or None
        Which one is judged.
    design_file : Path or None
        Brings definitions, limits, impedance and carrier.
    """

    file: Path
    command: str
    rf: str | None = None
    leakage: Sequence[str] = ()
    time: str | None = None
    interval: str | None = None
    detector: str = "carrier"
    slope: str | None = None
    zero: str | None = None
    through: str | None = None
    carrier: str | None = None
    impedance: str | None = None
    period: str | None = None
    passes: str | None = None
    pulse: int | None = None
    design_file: Path | None = None


def measure_record(console: Console, request: MeasureRequest) -> int:
    """Measure a record and write its figures.

    Parameters
    ----------
    console : Console
        Where they go.
    request : MeasureRequest
        What is measured.

    Returns
    -------
    int
        Exit status: 0 all limits met or none set, 1 one missed, 4 one undefined.

    Raises
    ------
    RecordError
        If the file or a column cannot be used.
    DesignError
        If an option or the design cannot be used.
    MeasurementError
        If the command or the RF does not switch.
    """
    from transim.bench.channels import Columns, read_channels
    from transim.bench.cycle import Cycle
    from transim.bench.records import read_table
    from transim.bench.uncertainty import measure_cycle
    from transim.commands.run import EXIT
    from transim.design.toml import read_design
    from transim.measure import judge, verdict
    from transim.report.measurement import measurement_document, measurement_lines

    design = None if request.design_file is None else read_design(request.design_file)
    if request.rf is None and not request.leakage:
        raise DesignError("nothing to measure: name a column with --rf, --leakage or both", key="measure")
    table = read_table(request.file)
    setup = _setup(request, design, table)
    interval = _quantity("--interval", request.interval, "s")
    columns = Columns(request.command, request.rf, _ports(request.leakage), request.time, interval)
    channels = read_channels(table, columns)
    try:
        cycle = Cycle(channels, setup)
        estimates = _absolute(cycle, measure_cycle(cycle))
    except MeasurementError as error:
        raise MeasurementError(f"{request.file}: {error.message}") from None
    limits = () if design is None else design.limits
    judgements = judge({name: found.figure for name, found in estimates.items()}, limits)
    outcome = verdict(judgements)
    console.write(measurement_lines(table, cycle, estimates, judgements, outcome))
    console.document(measurement_document(table, cycle, estimates, judgements, outcome))
    return EXIT[outcome]


def _setup(request: MeasureRequest, design: Design | None, table: Table) -> Setup:
    from transim.bench.detectors import Detector
    from transim.bench.setup import Setup
    from transim.measure import Definitions

    slope = _quantity("--slope", request.slope, "V", positive=False)
    unit = None if request.rf is None else table.headings[table.index(request.rf, "--rf")].unit
    if request.rf is not None:
        _check_detector(request, slope, unit, table)
    carrier = _quantity("--carrier", request.carrier, "Hz")
    impedance = _quantity("--impedance", request.impedance, "ohm")
    if design is not None:
        if carrier is None and len(design.carrier.frequency) == 1:
            carrier = design.carrier.frequency[0]
        impedance = impedance or design.carrier.impedance
    return Setup(
        detector=Detector(
            request.detector,  # type: ignore[arg-type]
            zero=_quantity("--zero", request.zero, "V", positive=False) or 0.0,
            slope=1.0 if slope is None else slope,
        ),
        definitions=Definitions() if design is None else design.definitions,
        carrier=carrier,
        impedance=impedance or 50.0,
        passes_high=None if request.passes is None else request.passes == "high",
        through=_quantity("--through", request.through, "V", positive=False),
        pulse=request.pulse,
        period=_quantity("--period", request.period, "s"),
    )


def _check_detector(request: MeasureRequest, slope: float | None, unit: str | None, table: Table) -> None:
    if unit in ("dB", "dBm") and request.detector != "log":
        raise table.refuse(f"--rf: column {request.rf} is in {unit}: add --detector log", header=True)
    if request.detector == "log" and slope is None and unit not in ("dB", "dBm"):
        raise DesignError(
            "a logarithmic detector needs its slope", key="--slope", expected='volts per dB, such as "25 mV"'
        )
    if slope is not None and request.detector != "log":
        raise DesignError(f"only --detector log has a slope in volts per dB, not {request.detector}", key="--slope")
    if slope == 0.0:
        raise DesignError("a detector of slope 0 shows nothing", key="--slope")
    if request.zero is not None and request.detector not in ("linear", "square"):
        raise DesignError(f"only a linear or square-law detector has a zero, not {request.detector}", key="--zero")


def _quantity(option: str, text: str | None, unit: str, *, positive: bool = True) -> float | None:
    if text is None:
        return None
    try:
        value = parse_quantity(text, unit)
    except QuantityError as error:
        raise QuantityError(error.message, key=option, expected=error.expected, found=error.found) from None
    if positive and value <= 0.0:
        raise DesignError("must be above 0", key=option, found=text)
    return value


def _ports(entries: Sequence[str]) -> dict[str, str]:
    ports: dict[str, str] = {}
    for entry in entries:
        port, equals, column = entry.partition("=")
        port, column = (port, column) if equals else (f"p{len(ports) + 1}", entry)
        if port in ports:
            raise DesignError(f"two columns for port {port}", key="--leakage")
        ports[port] = column
    return ports


def _absolute(cycle: Cycle, estimates: dict[str, Estimate]) -> dict[str, Estimate]:
    """Take away what a record without its reference cannot say."""
    from transim.bench.uncertainty import Estimate

    found = dict(estimates)

    def drop(name: str, note: str) -> None:
        figure = replace(estimates[name].figure, value=None, note=note)
        found[name] = Estimate(figure, None, {})

    if cycle.levels is not None and cycle.setup.through is None:
        wanted = "give what the RF trace reads with a straight connection by --through"
        drop("insertion_loss", f"the record is relative to its own on level; {wanted}")
        ratio = estimates["isolation"].figure.value
        known = "" if ratio is None else f"off is {ratio:.2f} dB below on; "
        drop("isolation", f"{known}{wanted}")
        settling = estimates["off_settling"]
        if settling.figure.value is not None:
            note = "counted from the on level, as the record has no through level"
            found["off_settling"] = replace(settling, figure=replace(settling.figure, note=note))
    if "video_inband" in found and estimates["video_inband"].figure.value is not None:
        if cycle.carrier is None:
            drop("video_inband", "the carrier is not known; give it with --carrier")
        elif cycle.period is None:
            drop("video_inband", "the repetition is not known from one pulse; give it with --period")
    return found


