"""Command `fit`: junction parameters from measurements."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from transim.commands.console import Console
from transim.errors import DesignError, MeasurementError
from transim.parts.nearest import nearest_name

if TYPE_CHECKING:
    from transim.bench.estimation import Unknown
    from transim.bench.fit_records import Comparison
    from transim.bench.fit_tables import PointTable
    from transim.design.model import Design, Driver, Junction

__all__ = ["FitRequest", "fit_and_report"]

Array = npt.NDArray[np.float64]
Parts = list[tuple[Array, Array]]

#: What is fitted to records unless parameters are named.
_FROM_RECORDS = {
    "pin_lumped": ("lifetime", "width"),
    "pin_distributed": ("lifetime", "width"),
    "bjt_pair": ("forward_transit_time", "reverse_transit_time"),
}


@dataclass(frozen=True)
class FitRequest:
    """What is fitted to what.

    Attributes
    ----------
    design_file : Path
        The design of what was measured; its junction holds the first guesses.
    records : sequence of str
        ``DRIVER=FILE`` or ``FILE``: documents of `measure`.
    storage, loss, isolation : Path or None
        Tables of single measurements.
    junction : str or None
        Name of the junction; None: the only one.
    parameters : sequence of str
        Which of its parameters; none: those that these data usually determine.
    ngspice : str or None
        The executable that is asked for.
    figures : Path or None
        Folder for a figure of the residuals.
    """

    design_file: Path
    records: Sequence[str] = ()
    storage: Path | None = None
    loss: Path | None = None
    isolation: Path | None = None
    junction: str | None = None
    parameters: Sequence[str] = ()
    ngspice: str | None = None
    figures: Path | None = None


def fit_and_report(console: Console, request: FitRequest) -> int:
    """Fit junction parameters and write them.

    Parameters
    ----------
    console : Console
        Where they go.
    request : FitRequest
        What is fitted.

    Returns
    -------
    int
        Exit status 0.

    Raises
    ------
    DesignError, RecordError
        If the design or a file of data cannot be used.
    MeasurementError
        If the data do not determine a parameter.
    EngineError
        If ngspice is missing or fails.
    """
    from transim.bench.estimation import estimate
    from transim.design.toml import read_design
    from transim.report.fitting import Residuals, fit_document, fit_lines

    design = read_design(request.design_file)
    junction = _junction(design, request.junction)
    tables = _tables(request, junction)
    if not tables and not request.records:
        raise DesignError("nothing to fit to: give --record, --storage, --loss or --isolation", key="fit")
    comparisons = _comparisons(design, request.records)
    unknowns = _unknowns(design, junction, _names(request, junction, tables))
    records = _simulated(design, junction, comparisons, request.ngspice) if comparisons else None
    known = bool(comparisons) or all(table.sigma is not None for table in tables)

    def compare(values: Mapping[str, float]) -> Parts:
        parts = [] if records is None else records(values)
        everything = {**junction.values, **values}
        for table in tables:
            rest = table.residuals(everything, design.carrier.impedance)
            parts.append((np.arange(1.0, rest.size + 1.0), rest))
        return parts

    with console.progress() as progress:
        count = 0

        def residuals(values: Mapping[str, float]) -> Array:
            nonlocal count
            if progress is not None:
                progress(count, count + 1, "comparison with the data")
            count += 1
            return np.concatenate([rest for _, rest in compare(values)])

        try:
            found = estimate(unknowns, residuals, known_noise=known)
        except MeasurementError as error:
            raise MeasurementError(f"junction {junction.name}: {error.message}") from None
        final = compare({one.name: one.value for one in found.parameters})
    sources = [one.measured.file.name for one in comparisons] + [table.file.name for table in tables]
    rests = [Residuals(source, place, rest) for source, (place, rest) in zip(sources, final, strict=True)]
    if request.figures is not None:
        from transim.report.fit_figures import residual_figure
        from transim.report.style import save_figure

        save_figure(residual_figure(design.title, rests), request.figures / "residuals")
    console.write([f"{design.title}: junction {junction.name}, {junction.part.name}", ""])
    console.write(fit_lines(junction, found, rests))
    console.document(fit_document(design.title, junction, found, rests))
    return 0


def _junction(design: Design, name: str | None) -> Junction:
    known = {one.name: one for one in design.switch.junctions.values()}
    if name is None and len(known) > 1:
        raise DesignError("the design has several junctions: choose one", key="--junction", expected=" or ".join(known))
    chosen = name or next(iter(known))
    if chosen not in known:
        raise DesignError(
            f"there is no junction {chosen}",
            key="--junction",
            expected=f"one of {', '.join(known)}",
            nearest=nearest_name(chosen, known),
        )
    if known[chosen].model is not None:
        raise DesignError(
            f"junction {chosen} takes its parameters from a model card, which fit does not change; give them in the "
            "design instead of the key model",
            key=f"junction.{chosen}.model",
        )
    return known[chosen]


def _tables(request: FitRequest, junction: Junction) -> list[PointTable]:
    from transim.bench.fit_tables import TABLES, read_points

    laws = TABLES.get(junction.part.name, {})
    tables = []
    for kind in ("storage", "loss", "isolation"):
        file: Path | None = getattr(request, kind)
        if file is None:
            continue
        if kind not in laws:
            fitting = [name for name, known in TABLES.items() if kind in known]
            raise DesignError(
                f"no closed form of this for the part {junction.part.name}; fit it to records",
                key=f"--{kind}",
                expected=f"a junction {' or '.join(fitting)}",
            )
        tables.append(read_points(file, laws[kind]))
    return tables


def _names(request: FitRequest, junction: Junction, tables: Sequence[PointTable]) -> tuple[str, ...]:
    if request.parameters:
        return tuple(dict.fromkeys(request.parameters))
    names: list[str] = []
    if request.records:
        names += _FROM_RECORDS.get(junction.part.name, ())
    for table in tables:
        names += table.law.parameters
    if not names:
        raise DesignError(
            f"name what is to be fitted to the part {junction.part.name}",
            key="--parameter",
            expected=f"one of {', '.join(parameter.name for parameter in junction.part.parameters)}",
        )
    return tuple(dict.fromkeys(names))


def _unknowns(design: Design, junction: Junction, names: Sequence[str]) -> list[Unknown]:
    from transim.bench.estimation import Unknown

    known = {parameter.name: parameter for parameter in junction.part.parameters}
    unknowns = []
    for name in names:
        if name not in known:
            raise DesignError(
                f"the part {junction.part.name} has no parameter {name}",
                file=design.source.path,
                key="--parameter",
                expected=f"one of {', '.join(known)}",
                nearest=nearest_name(name, known),
            )
        parameter = known[name]
        unknowns.append(Unknown(name, parameter.unit, junction.values[name], parameter.low, parameter.high))
    return unknowns


def _comparisons(design: Design, records: Sequence[str]) -> list[Comparison]:
    from transim.bench.fit_records import Comparison
    from transim.bench.measured import read_measured
    from transim.study.run import choose_drivers

    comparisons = []
    for entry in records:
        name, equals, file = entry.partition("=")
        known = {driver.name for driver in design.drivers}
        if equals and name in known:
            driver = choose_drivers(design, [name])[0]
        else:
            file, driver = entry, _only_driver(design)
        comparisons.append(Comparison(read_measured(Path(file)), driver))
    return comparisons


def _only_driver(design: Design) -> Driver:
    if len(design.drivers) > 1:
        raise DesignError(
            "the design has several drivers: say which one the record was taken with",
            key="--record",
            expected=" or ".join(f"{driver.name}=FILE" for driver in design.drivers),
        )
    return design.drivers[0]


def _simulated(
    design: Design, junction: Junction, comparisons: Sequence[Comparison], ngspice: str | None
) -> Callable[[Mapping[str, float]], Parts]:
    from transim.bench.fit_records import compare_records
    from transim.engine import find_engine

    return compare_records(design, junction.name, comparisons, find_engine(ngspice))
