"""The waveforms of a case as named arrays and as comma-separated text."""

from __future__ import annotations

import io
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import Feed, Netlist, ThrowPlace
from transim.engine.rawfile import Plot
from transim.quantities import format_quantity
from transim.study.result import CaseRun

__all__ = ["carrier_name", "csv_text", "envelope_name", "video_waveforms", "write_waveforms"]

Array = npt.NDArray[np.float64]


def carrier_name(frequency: float) -> str:
    """Return a carrier as part of a name.

    Parameters
    ----------
    frequency : float
        [Hz].

    Returns
    -------
    str
        For example ``433.92MHz``.
    """
    return format_quantity(frequency, "Hz", 12).replace(" ", "")


def envelope_name(analysis: str, frequency: float, throw: str = "") -> str:
    """Return the name of an envelope's array and file.

    Parameters
    ----------
    analysis : str
        ``envelope`` or ``carrier``.
    frequency : float
        Carrier [Hz].
    throw : str
        Name of the throw; empty where the path has a single way.

    Returns
    -------
    str
        For example ``envelope_30MHz``, or ``envelope_30MHz_resolved`` from the carrier analysis.
    """
    own = f"_{throw}" if throw else ""
    return f"envelope_{carrier_name(frequency)}{'_resolved' if analysis == 'carrier' else ''}{own}"


def drive_name(quantity: str, throw: ThrowPlace) -> str:
    """Return the name of a waveform where the driver of a throw feeds the path.

    Parameters
    ----------
    quantity : {"voltage", "current"}
        Which.
    throw : ThrowPlace
        The way of the RF.

    Returns
    -------
    str
        As `video_waveforms` has it.
    """
    return f"driver_{quantity}{_entry(throw.feed)}"


def _entry(feed: Feed) -> str:
    """Return what tells a second bias entry from the first."""
    return "" if feed.node == "drive" else f"_{feed.entry}"


def video_waveforms(video: Plot, netlist: Netlist) -> dict[str, tuple[Array, str]]:
    """Name the waveforms of a video run.

    Parameters
    ----------
    video : Plot
        The run of the control pulse without RF.
    netlist : Netlist
        Its circuit.

    Returns
    -------
    dict
        Samples and unit by name, all on the same instants: ``time``, ``control``, ``driver_voltage``,
        ``driver_current`` (positive into the bias entry; of a second one with its name), ``port_NAME``,
        ``supply_current_NAME`` (positive out of the supply), and ``charge_NAME``, ``current_NAME``,
        ``reverse_NAME`` of each junction.
    """
    found = {
        "time": (np.real(video["time"]), "s"),
        "control": (np.real(video["v(ctl)"]), "V"),
    }
    for feed in netlist.feeds:
        found[f"driver_voltage{_entry(feed)}"] = (np.real(video[f"v({feed.node})"]), "V")
        found[f"driver_current{_entry(feed)}"] = (np.real(video[f"i({feed.ammeter})"]), "A")
    for port in netlist.ports:
        found[f"port_{port.node}"] = (np.real(video[f"v({port.node})"]), "V")
    for supply in netlist.supplies:
        found[f"supply_current_{supply.removeprefix('vsupply_')}"] = (0.0 - np.real(video[f"i({supply})"]), "A")
    units = {"charge": "C", "current": "A", "reverse": "V"}
    for probe in netlist.probes:
        name = first = f"{probe.quantity}_{probe.junction}"
        number = 2
        while name in found:
            name, number = f"{first}_{number}", number + 1
        total = np.zeros(found["time"][0].size)
        for scale, vector in probe.terms:
            total = total + scale * np.real(video[vector])
        found[name] = (total, units.get(probe.quantity, "1"))
    return found


def write_waveforms(folder: Path, case: CaseRun, netlist: Netlist) -> None:
    """Write the waveforms of a case.

    Parameters
    ----------
    folder : Path
        Where ``waveforms.npz``, ``waveforms.csv`` and ``envelope_CARRIER.csv`` go; of several throws with their names.
    case : CaseRun
        What was run.
    netlist : Netlist
        Its circuit.
    """
    video = video_waveforms(case.video, netlist)
    arrays: dict[str, npt.NDArray[np.generic]] = {name: samples for name, (samples, _) in video.items()}
    units = {name: unit for name, (_, unit) in video.items()}
    (folder / "waveforms.csv").write_text(
        csv_text({f"{name} [{unit}]": samples for name, (samples, unit) in video.items()}), encoding="utf-8"
    )
    named = [
        (envelope_name(analysis, frequency, throw.name), envelope)
        for throw in case.throws
        for (analysis, frequency), envelope in throw.envelopes.items()
    ]
    for name, envelope in named:
        arrays |= {f"{name}_time": envelope.time, name: envelope.value}
        units |= {f"{name}_time": "s", name: "1"}
        magnitude = np.maximum(np.abs(envelope.value), np.finfo(float).tiny)
        columns = {
            "time [s]": envelope.time,
            "magnitude [dB]": 20.0 * np.log10(magnitude),
            "phase [deg]": np.degrees(np.angle(envelope.value)),
        }
        (folder / f"{name}.csv").write_text(csv_text(columns), encoding="utf-8")
    np.savez_compressed(
        folder / "waveforms.npz", allow_pickle=False, units=np.array(list(units.items())), **arrays
    )


def csv_text(columns: Mapping[str, Array]) -> str:
    """Write columns of equal length as comma-separated text.

    Parameters
    ----------
    columns : mapping of str to ndarray, shape (n,)
        Samples by heading.

    Returns
    -------
    str
        The headings, then n lines with nine digits a number.
    """
    text = io.StringIO()
    text.write(",".join(columns) + "\n")
    np.savetxt(text, np.column_stack(list(columns.values())), fmt="%.9g", delimiter=",")
    return text.getvalue()
