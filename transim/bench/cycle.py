"""One switching cycle out of a record: its traces in cells, and the waveforms that figures are taken from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from transim.bench.command import Edge, command_edges
from transim.bench.demodulate import demodulate, find_carrier
from transim.bench.noise import estimate_noise
from transim.bench.setup import Channels, Levels, Setup
from transim.bench.states import state_levels
from transim.bench.trace import Samples, Smoother, Trace, gather
from transim.errors import MeasurementError
from transim.measure.definitions import Timing
from transim.measure.record import Record
from transim.measure.waveform import Waveform
from transim.quantities import format_quantity

__all__ = ["Cycle"]

Array = npt.NDArray[np.float64]
Smooth = Mapping[str, Samples]


class Cycle:
    """The judged cycle of a record.

    Parameters
    ----------
    channels : Channels
        What was recorded.
    setup : Setup
        How.

    Attributes
    ----------
    traces : dict of str to Trace
        ``command``, ``rf``, and each leakage by its port.
    carrier : float or None
        Stated or found [Hz].
    passes_high : bool
        Whether RF passes while the command is high.
    levels : Levels or None
        Of the RF trace.
    averaged : bool
        Whether the RF was averaged over blocks before it came into cells.
    pulses : int
        Pulses in the record.
    pulse : int
        The one that is judged, from 1.
    period : float or None
        Of the command; None where neither stated nor to be seen [s].

    Raises
    ------
    MeasurementError
        If the command or the RF does not switch, or there is no such pulse.
    """

    def __init__(self, channels: Channels, setup: Setup) -> None:
        self.setup = setup
        whole = gather(channels.time, channels.command)
        smoother = Smoother(whole)
        edges = command_edges(whole, np.asarray(smoother(whole.value), dtype=float), smoother.sigma)
        self._choose(edges, float(channels.time[0]), float(channels.time[-1]))
        inside = (channels.time >= self._start) & (channels.time <= self._stop)
        time = channels.time[inside]
        self.traces: dict[str, Trace] = {"command": gather(time, channels.command[inside])}
        self.carrier = setup.carrier
        if channels.rf is not None:
            self.traces["rf"] = self._rf(time, channels.rf[inside])
        for port, value in channels.leakage.items():
            self.traces[f"leakage {port}"] = gather(time, value[inside])
        self.averaged = setup.detector.kind == "carrier" or any(t.noise.correlation > 1 for t in self.traces.values())
        self.smoothers = {name: Smoother(trace) for name, trace in self.traces.items()}
        self.passes_high = self._passing()
        self.levels: Levels | None = None
        if "rf" in self.traces:
            smooth = self.smooth()["rf"]
            self.levels = self._levels(np.abs(smooth) if np.iscomplexobj(smooth) else smooth, self.smoothers)[0]

    def smooth(self, smoothers: Mapping[str, Smoother] | None = None) -> dict[str, Samples]:
        """Return the smooth traces.

        Parameters
        ----------
        smoothers : mapping of str to Smoother or None
            None: the cycle's own.

        Returns
        -------
        dict of str to ndarray
            By trace.
        """
        use = smoothers or self.smoothers
        return {name: use[name](trace.value) for name, trace in self.traces.items()}

    def timing(self, command: Array) -> Timing:
        """Return the instants of the command.

        Parameters
        ----------
        command : ndarray
            Its smooth trace.

        Returns
        -------
        Timing
            With an edge that the record does not hold set after its end.
        """
        edges = command_edges(self.traces["command"], command, self.smoothers["command"].sigma)
        start = max(float(trace.time[0]) for trace in self.traces.values())
        stop = min(float(trace.time[-1]) for trace in self.traces.values())
        beyond = stop + (stop - start)
        rising = next((e.instant for e in edges if e.rising), beyond)
        falling = next((e.instant for e in edges if not e.rising and (rising == beyond or e.instant > rising)), beyond)
        on, off = (rising, falling) if self.passes_high else (falling, rising)
        if not self.passes_high and off > on:
            off = beyond
        return Timing(on, off, max(e.length for e in edges), start, stop, self.period or stop - start)

    def record(self, smooth: Smooth, *, thin: slice | None = None, at_end: bool = False) -> Record:
        """Make the waveforms that figures are taken from.

        Parameters
        ----------
        smooth : mapping of str to ndarray
            Smooth traces.
        thin : slice or None
            Which cells of them; None: all.
        at_end : bool
            Whether the on level is that at the end of the on interval, with what is still to come where the RF
            is still approaching it, not the most frequent one.

        Returns
        -------
        Record
            With S21 relative to the through level, or to the on level where that is not known.

        Raises
        ------
        MeasurementError
            If the RF has one level only.
        """
        part = thin or slice(None)
        timing = self.timing(np.asarray(smooth["command"], dtype=float))
        record = Record(
            timing=timing,
            definitions=self.setup.definitions,
            carrier=self.carrier or 1.0,
            impedance=self.setup.impedance,
            biased_passes=self.passes_high,
            video={name.removeprefix("leakage "): self._leakage(name, smooth, timing, part)
                   for name in smooth if name.startswith("leakage ")},
        )  # fmt: skip
        if "rf" not in smooth:
            return record
        value, trace = smooth["rf"], self.traces["rf"]
        size = np.abs(value) if np.iscomplexobj(value) else np.asarray(value, dtype=float)
        levels, at_on = self._levels(size, self.smoothers)
        if at_end:
            levels = replace(levels, on=self._final(size, timing))
        full = levels.on if self.setup.through is None else self.setup.through
        detector = self.setup.detector
        share = detector.ratio(np.array([levels.on, levels.off]), full)
        envelope: Samples = detector.ratio(size, full)
        on = complex(share[0])
        if np.iscomplexobj(value):
            phasor = complex(value[at_on].mean()) if at_on.any() else 1.0
            turn = np.exp(-1j * np.angle(phasor))
            envelope = envelope * np.exp(1j * np.angle(value * turn))
        waveform = Waveform(trace.time[part], envelope[part], "1")
        # the ends of the judged cycle stay, whatever is left out between them
        waveform = _whole(waveform, Waveform(trace.time, envelope, "1"))
        return replace(record, envelope=waveform, static_on=on, static_off=complex(share[1]))

    def _final(self, size: Array, timing: Timing) -> float:
        """Return the on level as the end of the on interval lets one expect it (Aitken's delta-squared)."""
        trace = self.traces["rf"]
        begin, end = timing.on_window()
        end = min(end, float(trace.time[-1]))
        places = np.array([0.5, 0.75, 1.0]) * (end - begin) + begin
        first, second, third = np.interp(places, trace.time, size)
        noise = float(np.interp(end, trace.time, self.smoothers["rf"].sigma))
        before, last = second - first, third - second
        if abs(last) <= 3.0 * noise or not 0.0 < last / before < 0.8:
            return float(third)
        return float(third + last * last / (before - last))

    def _choose(self, edges: tuple[Edge, ...], first: float, last: float) -> None:
        """Choose the judged pulse: from just before its rising edge, or the begin, to the next rising edge."""
        rising = [edge for edge in edges if edge.rising]
        self.period = self.setup.period
        if len(rising) > 1 and self.period is None:
            self.period = float(np.median(np.diff([edge.instant for edge in rising])))
        self.pulses = max(1, len(rising))
        closed = [k for k, edge in enumerate(rising, 1) if any(e.instant > edge.instant for e in edges if not e.rising)]
        self.pulse = self.setup.pulse or (closed[-1] if closed else self.pulses)
        if not 1 <= self.pulse <= self.pulses:
            raise MeasurementError(f"there is no pulse {self.pulse}: the record holds {self.pulses} of the command")
        self._start, self._stop = first, last
        if not rising:
            return
        k = self.pulse - 1
        before = [e.instant for e in edges if e.instant < rising[k].instant]
        if before:
            self._start = (before[-1] + rising[k].instant) / 2.0
        if k + 1 < len(rising):
            self._stop = rising[k + 1].instant - 1.5 * rising[k + 1].length

    def _rf(self, time: Array, value: Array) -> Trace:
        if self.setup.detector.kind != "carrier":
            return gather(time, value)
        self.carrier = self.carrier or find_carrier(time, value)
        at, amplitude, noise = demodulate(time, value, self.carrier)
        quantum = estimate_noise(value[None]).quantum
        return gather(at, amplitude, quantum if noise < quantum / 2.0 else 0.0)

    def _passing(self) -> bool:
        if self.setup.passes_high is not None or "rf" not in self.traces:
            return self.setup.passes_high is not False
        smooth = self.smooth()
        trace = self.traces["rf"]
        command = np.interp(trace.time, self.traces["command"].time, np.asarray(smooth["command"], dtype=float))
        middle = (command.min() + command.max()) / 2.0
        size = self._strength(np.abs(smooth["rf"]) if np.iscomplexobj(smooth["rf"]) else smooth["rf"])
        weight = np.gradient(trace.time)
        high = command > middle
        mean_high, mean_low = (float(np.average(size[side], weights=weight[side])) for side in (high, ~high))
        return mean_high > mean_low

    def _strength(self, size: Samples) -> Array:
        """Return what grows with the RF."""
        detector = self.setup.detector
        if detector.kind == "log":
            return np.asarray(size * np.sign(detector.slope), dtype=float)
        return np.abs(np.asarray(size, dtype=float) - detector.zero)

    def _levels(self, size: Samples, smoothers: Mapping[str, Smoother]) -> tuple[Levels, npt.NDArray[np.bool_]]:
        value = np.asarray(size, dtype=float)
        try:
            states = state_levels(value, np.gradient(self.traces["rf"].time), smoothers["rf"].sigma)
        except MeasurementError:
            level = format_quantity(float(np.median(value)), "V")
            raise MeasurementError(f"the RF trace has one level only, {level}: no switching can be measured") from None
        upper, lower = self._strength(np.array([states.high, states.low]))
        if upper > lower:
            return Levels(states.high, states.low), states.at_high
        return Levels(states.low, states.high), states.at_low

    def _leakage(self, name: str, smooth: Smooth, timing: Timing, part: slice) -> Waveform:
        trace, value = self.traces[name], np.asarray(smooth[name], dtype=float)
        quiet = trace.time < min(timing.on_edge, timing.off_edge) - timing.edge
        weight = np.gradient(trace.time)
        rest = np.average(value[quiet], weights=weight[quiet]) if quiet.sum() > 2 else float(np.median(value))
        whole = Waveform(trace.time, value - rest, "V")
        return _whole(Waveform(trace.time[part], whole.value[part], "V"), whole)


def _whole(thinned: Waveform, whole: Waveform) -> Waveform:
    """Give a thinned waveform both ends of the whole one."""
    if thinned.time.size == whole.time.size:
        return whole
    keep = np.isin(whole.time, thinned.time)
    keep[[0, -1]] = True
    return Waveform(whole.time[keep], whole.value[keep], whole.unit)
