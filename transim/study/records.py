"""The waveforms of a case, collected for the metrics."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from transim.circuit.netlist import Netlist, RfPort, ThrowPlace
from transim.design.model import Design
from transim.envelope.junction import Array
from transim.envelope.stationary import Complex
from transim.measure.definitions import Definitions, Timing
from transim.measure.record import Record
from transim.measure.rf import LargeSignal, RfStress
from transim.measure.waveform import Waveform
from transim.parts.own import OWN_PATH
from transim.study.case import Case
from transim.study.charges import fed_junctions, other_charges, reached_nodes
from transim.study.ratings import ratings_of
from transim.study.terminals import (
    driver_output_power,
    junction_at,
    junction_currents,
    junction_powers,
    polarity,
    supply_currents,
)

__all__ = ["record_of"]

_UNITS = {"charge": "C", "reverse": "V", "current": "A"}


def record_of(
    case: Case,
    throw: ThrowPlace,
    frequency: float,
    envelopes: Sequence[Waveform],
    states: Complex,
    vectors: Mapping[str, Array],
    rf: RfStress | LargeSignal | None = None,
) -> Record:
    """Collect the waveforms of one throw at one carrier.

    Parameters
    ----------
    case : Case
        The circuit.
    throw : ThrowPlace
        The way of the RF.
    frequency : float
        Carrier [Hz].
    envelopes : sequence of Waveform
        Complex S of the through pair of every throw.
    states : ndarray, shape (2, p, p)
        S in the settled states, command low first.
    vectors : mapping
        The video run, by name as ngspice prints it.
    rf : RfStress, LargeSignal or None
        RF in the junctions, by the envelope or by the carrier analysis.

    Returns
    -------
    Record
    """
    design, netlist = case.design, case.netlist
    first, second = throw.through
    on, off = (states[1], states[0]) if throw.passes_high else (states[0], states[1])
    time = vectors["time"]
    probes: dict[str, dict[str, Waveform]] = {"charge": {}, "reverse": {}, "current": {}}
    signs = {place.instance: polarity(junction_at(design, place)) for place in netlist.junctions}
    for probe in netlist.probes:
        if probe.quantity in probes:
            total = sum((scale * _vector(vectors, name) for scale, name in probe.terms), np.zeros(time.size))
            found = probes[probe.quantity]
            name = probe.junction if probe.junction not in found else f"{probe.junction} {len(found) + 1}"
            if probe.quantity == "reverse":
                total = signs[probe.junction] * total
            found[name] = Waveform(time, np.asarray(total), _UNITS[probe.quantity])
    power = None
    if netlist.supplies:
        rails = [name.removeprefix("vsupply_") for name in netlist.supplies]
        delivered = [-vectors[f"v({rail})"] * vectors[f"i(vsupply_{rail})"] for rail in rails]
        power = Waveform(time, np.sum(delivered, axis=0), "W")
    fed: dict[str, float] = {}
    other: dict[str, Waveform] = {}
    # only the charge account of a single run asks for them
    if case.circuit is not None and not case.lean:
        reached = reached_nodes(case.circuit, throw.feed)
        fed = fed_junctions(case, reached)
        other = other_charges(case.circuit, throw.feed, reached, vectors)
    timing = case.timeline.timing(throw.passes_high)
    drive = Waveform(time, vectors[f"i({throw.feed.ammeter})"], "A")
    record = Record(
        timing=timing,
        definitions=_definitions(design),
        carrier=frequency,
        impedance=design.carrier.impedance,
        biased_passes=_biased_passes(case, throw, timing, drive),
        envelope=envelopes[netlist.throws.index(throw)],
        other_throws=_others(case, throw, envelopes, states),
        static_on=complex(on[second, first]),
        static_off=complex(off[second, first]),
        match_on=complex(on[first, first]),
        match_off=complex(off[first, first]),
        video={port.node: Waveform(time, vectors[f"v({port.node})"], "V") for port in _leaking(netlist, throw)},
        drive_current=drive,
        driver_voltage=Waveform(time, vectors[f"v({throw.feed.node})"], "V"),
        supply_power=power,
        junction_charge=probes["charge"],
        junction_reverse=probes["reverse"],
        junction_current=junction_currents(case, vectors),
        junction_power=junction_powers(case, vectors),
        junction_conduction=probes["current"],
        junction_fed=fed,
        other_charge=other,
        shortest=case.shortest.get(throw.name),
        driver_output_power=driver_output_power(case, vectors),
        supply_current=supply_currents(case, vectors),
        stress=rf if isinstance(rf, RfStress) else None,
        large=rf if isinstance(rf, LargeSignal) else None,
    )
    return replace(record, ratings=ratings_of(case, record))


def _leaking(netlist: Netlist, throw: ThrowPlace) -> Sequence[RfPort]:
    """Return the ports whose leakage is a throw's: where there are several, its own two."""
    return [netlist.ports[place] for place in sorted(throw.through)] if throw.name else netlist.ports


def _biased_passes(case: Case, throw: ThrowPlace, timing: Timing, drive: Waveform) -> bool:
    """Tell whether the RF passes under forward bias: of a path that has no header, where more current flows in."""
    if case.design.switch.path.name != OWN_PATH:
        return throw.forward
    on, off = (drive.at(window[1]).real for window in (timing.on_window(), timing.off_window()))
    return bool(on > off)


def _others(
    case: Case, throw: ThrowPlace, envelopes: Sequence[Waveform], states: Complex
) -> dict[str, Waveform]:
    """Return the level of the other throws as a share of their own on state."""
    found = {}
    for other, envelope in zip(case.netlist.throws, envelopes, strict=True):
        first, second = other.through
        on = abs(complex(states[1 if other.passes_high else 0][second, first]))
        if other is not throw and on > 0.0:
            found[other.name] = Waveform(envelope.time, np.abs(envelope.value) / on, "1")
    return found


def _vector(vectors: Mapping[str, Array], name: str) -> Array:
    """Find a saved vector; ngspice prints device quantities with the letter of their kind around them."""
    for known in (name, f"i({name})", f"v({name})"):
        if known in vectors:
            return vectors[known]
    raise KeyError(name)


def _definitions(design: Design) -> Definitions:
    """Return the design's definitions; what counts as off is its isolation limit, where it has one."""
    for limit in design.limits:
        if limit.metric == "isolation" and limit.min is not None and limit.min > 0.0:
            return replace(design.definitions, isolation_level=limit.min)
    return design.definitions
