"""The ratings of a design, each with the waveform of the run that it applies to."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from transim.measure.dissipation import kept_power
from transim.measure.rating import Rating
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.study.case import Case
from transim.study.terminals import junction_at

__all__ = ["ratings_of"]


def ratings_of(case: Case, record: Record) -> tuple[Rating, ...]:
    """Collect the ratings of the junctions and of the driver of a case.

    Parameters
    ----------
    case : Case
        The circuit.
    record : Record
        The waveforms of its run.

    Returns
    -------
    tuple of Rating
        A rating of a junction stands once for each of its places in the path. Means of the forward current
        leave out what flows in reverse, as rated mean currents do. Where the path has several bias entries, the
        rating of the output current stands for the driver that gives most, and those of dissipation and supply
        current, whose rails are shared, for all of them together.
    """
    return (*_of_junctions(case, record), *_of_driver(case, record))


def _of_junctions(case: Case, record: Record) -> Iterator[Rating]:
    for place in case.netlist.junctions:
        junction, instance = junction_at(case.design, place), place.instance
        stated = junction.ratings.stated
        current, power = record.junction_current[instance], record.junction_power[instance]
        forward = Waveform(current.time, np.maximum(current.value.real, 0.0), "A")
        reverse = [(name, wave) for name, wave in record.junction_reverse.items() if name.split()[0] == instance]
        for key, kind, waves in (
            ("reverse_voltage", "peak", reverse),
            ("forward_current_mean", "mean", [(instance, forward)]),
            ("forward_current_peak", "peak", [(instance, current)]),
            ("dissipation", "mean", [(instance, power)]),
        ):
            for where, wave in waves if key in stated else ():
                yield Rating(f"junction.{junction.name}.{key} {where}", stated[key], kind, wave)  # type: ignore[arg-type]


def _of_driver(case: Case, record: Record) -> Iterator[Rating]:
    driver = case.driver
    stated = driver.ratings.stated
    prefix = f"driver.{driver.name}."
    if "output_current" in stated:
        currents = [case.vectors[f"i({feed.ammeter})"] for feed in case.netlist.feeds]
        waves = [Waveform(case.vectors["time"], np.abs(current), "A") for current in currents]
        largest = max(waves, key=lambda wave: wave.extremes()[1])
        yield Rating(f"{prefix}output_current", stated["output_current"], "peak", largest)
    if "dissipation" in stated and record.supply_power is not None:
        yield Rating(f"{prefix}dissipation", stated["dissipation"], "mean", kept_power(record))
    if "supply_current" in stated and record.supply_current:
        waves = [wave.magnitude() for wave in record.supply_current.values()]
        largest = max(waves, key=lambda wave: wave.extremes()[1])
        yield Rating(f"{prefix}supply_current", stated["supply_current"], "peak", largest)
