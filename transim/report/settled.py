"""Settled states against frequency and against the holding current: as text, as JSON, and as files."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt

from transim.measure.band import Band, usable_bands
from transim.measure.sweep import BiasSweep, StaticSweep
from transim.quantities import format_quantity
from transim.report.layout import Column, align, wrap
from transim.report.touchstone import touchstone_text
from transim.report.waveforms import csv_text
from transim.study.run import Outcome

__all__ = ["settled_documents", "settled_lines", "write_bias_sweeps", "write_static_sweep"]

Array = npt.NDArray[np.float64]
#: Rows of the table over frequency.
_ROWS = 7


def settled_lines(outcome: Outcome) -> list[str]:
    """Write the sweeps of a run.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        For each driver and temperature a table of a few frequencies and the usable bands, then for each temperature
        the table over the holding current. Empty where the design asks for no sweeps.
    """
    lines: list[str] = []
    for case in outcome.cases:
        for throw in case.throws:
            if throw.static is not None:
                place = f"{case.driver} {throw.name}".rstrip()
                place += f" at {format_quantity(case.temperature, 'degC', 12)}"
                lines += [*([""] if lines else []), *_static(outcome, place, throw.static)]
    for sweep in outcome.bias_sweeps:
        lines += [*([""] if lines else []), *_bias(sweep)]
    return lines


def settled_documents(outcome: Outcome) -> dict[str, list[dict[str, Any]]]:
    """Return the sweeps for the document of a run.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    dict
        ``static`` with one entry for each driver and temperature, ``bias_sweep`` with one for each temperature; each
        key only where the design asks for it. Hz, dB, A, V, C.
    """
    static = [
        {
            "driver": case.driver,
            "throw": throw.name or None,
            "temperature": case.temperature,
            **_static_document(outcome, throw.static),
        }
        for case in outcome.cases
        for throw in case.throws
        if throw.static is not None
    ]
    bias = [_bias_document(sweep) for sweep in outcome.bias_sweeps]
    return {name: entries for name, entries in (("static", static), ("bias_sweep", bias)) if entries}


def write_static_sweep(folder: Path, sweep: StaticSweep, title: str, throw: str = "") -> None:
    """Write the sweep of a case.

    Parameters
    ----------
    folder : Path
        Where ``static.csv`` and, for p ports, ``static_on.sPp`` and ``static_off.sPp`` go.
    sweep : StaticSweep
        Both settled states.
    title : str
        What was swept, for the head of the Touchstone files.
    throw : str
        Its name, which the files get; empty where the path has a single way.
    """
    own = f"_{throw}" if throw else ""
    columns = {"frequency [Hz]": sweep.frequency}
    for metric, values in sweep.figures().items():
        names = [metric] if values.shape[1] == 1 else [f"{metric}_{port}" for port in sweep.pair]
        columns |= {f"{name} [dB]": values[:, k] for k, name in enumerate(names)}
    (folder / f"static{own}.csv").write_text(csv_text(columns), encoding="utf-8")
    impedance = [sweep.impedance] * len(sweep.ports)
    for state, s in (("on", sweep.on), ("off", sweep.off)):
        way = f" of throw {throw}" if throw else ""
        heads = (title, f"settled {state} state{way}; ports in order: {', '.join(sweep.ports)}")
        text = touchstone_text(sweep.frequency, s, impedance, heads)
        (folder / f"static_{state}{own}.s{len(sweep.ports)}p").write_text(text, encoding="utf-8", newline="\n")


def write_bias_sweeps(folder: Path, sweeps: Sequence[BiasSweep]) -> None:
    """Write the sweeps over the holding current.

    Parameters
    ----------
    folder : Path
        Where ``bias_TEMPERATURE.csv`` go; of several throws with their names.
    sweeps : sequence of BiasSweep
        One for each temperature and throw.
    """
    for sweep in sweeps:
        columns = {"current [A]": sweep.current, "voltage [V]": sweep.voltage}
        for k, carrier in enumerate(sweep.carriers):
            columns[f"attenuation_{_compact(carrier, 'Hz')} [dB]"] = sweep.attenuation[:, k]
        columns |= {f"charge_{junction} [C]": values for junction, values in sweep.charge.items()}
        own = f"_{sweep.throw}" if sweep.throw else ""
        file = folder / f"bias_{_compact(sweep.temperature, 'degC')}{own}.csv"
        file.write_text(csv_text(columns), encoding="utf-8")


def _compact(value: float, unit: str) -> str:
    return format_quantity(value, unit, 12).replace(" ", "")


def _static(outcome: Outcome, place: str, sweep: StaticSweep) -> Iterator[str]:
    ends = [format_quantity(float(sweep.frequency[k]), "Hz", 12) for k in (0, -1)]
    yield from wrap(
        f"Settled states of {place}, {ends[0]} to {ends[1]}, {sweep.frequency.size} frequencies"
        " (return loss of the worst port)"
    )
    rows = np.unique(np.linspace(0, sweep.frequency.size - 1, _ROWS).round().astype(int))
    columns = [Column("frequency", _cells(sweep.frequency[rows], "Hz"), right=True)]
    for metric, values in sweep.figures().items():
        columns.append(Column(metric, _cells(values.min(axis=1)[rows], "dB"), right=True))
    yield from align(columns, "  ")
    yield from wrap(_bands(usable_bands(sweep, outcome.design.limits)), "  ")


def _cells(values: Array, unit: str) -> tuple[str, ...]:
    return tuple(format_quantity(float(value), unit) for value in values)


def _bands(bands: Sequence[Band] | None) -> str:
    if bands is None:
        return "usable band: not judged, the design limits neither loss nor isolation nor match"
    if not bands:
        return "usable band: none, the limits on loss, isolation and match never hold together"
    texts = []
    for band in bands:
        low = band.low_limit or "sweep begins"
        high = band.high_limit or "sweep ends"
        frequencies = [format_quantity(value, "Hz") for value in (band.low, band.high)]
        texts.append(f"{frequencies[0]} ({low}) to {frequencies[1]} ({high})")
    return f"usable {'band' if len(texts) == 1 else 'bands'}: {'; '.join(texts)}"


def _bias(sweep: BiasSweep) -> Iterator[str]:
    way = f" of throw {sweep.throw}" if sweep.throw else ""
    place = f"at {format_quantity(sweep.temperature, 'degC', 12)}"
    yield from wrap(f"Attenuation{way} against the holding current {place}, a current source in place of the driver")
    columns = [
        Column("current", _cells(sweep.current, "A"), right=True),
        Column("bias entry", _cells(sweep.voltage, "V"), right=True),
    ]
    for k, carrier in enumerate(sweep.carriers):
        columns.append(Column(format_quantity(carrier, "Hz", 12), _cells(sweep.attenuation[:, k], "dB"), right=True))
    for junction, values in sweep.charge.items():
        columns.append(Column(f"charge {junction}", _cells(values, "C"), right=True))
    yield from align(columns, "  ")


def _static_document(outcome: Outcome, sweep: StaticSweep) -> dict[str, Any]:
    bands = usable_bands(sweep, outcome.design.limits)
    return {
        "ports": list(sweep.ports),
        "through": [sweep.ports[place] for place in sweep.through],
        "impedance": sweep.impedance,
        "frequency": sweep.frequency.tolist(),
        "insertion_loss": sweep.insertion_loss.tolist(),
        "isolation": sweep.isolation.tolist(),
        "return_loss_on": _by_port(sweep, sweep.return_loss("on")),
        "return_loss_off": _by_port(sweep, sweep.return_loss("off")),
        "usable_bands": None if bands is None else [_band_document(band) for band in bands],
    }


def _by_port(sweep: StaticSweep, values: Array) -> dict[str, list[float]]:
    return {port: values[:, k].tolist() for k, port in enumerate(sweep.ports)}


def _band_document(band: Band) -> Mapping[str, float | str | None]:
    return {"from": band.low, "to": band.high, "from_limit": band.low_limit, "to_limit": band.high_limit}


def _bias_document(sweep: BiasSweep) -> dict[str, Any]:
    return {
        "temperature": sweep.temperature,
        "throw": sweep.throw or None,
        "current": sweep.current.tolist(),
        "voltage": sweep.voltage.tolist(),
        "attenuation": [
            {"carrier": carrier, "values": sweep.attenuation[:, k].tolist()} for k, carrier in enumerate(sweep.carriers)
        ],
        "charge": {junction: values.tolist() for junction, values in sweep.charge.items()},
    }
