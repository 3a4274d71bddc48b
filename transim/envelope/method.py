"""Which solution a circuit needs: frozen where its RF network is fast against the switching, else ringing."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.circuit.netlist import RfPort
from transim.envelope.frozen import solve_frozen
from transim.envelope.junction import Array
from transim.envelope.network import Network
from transim.envelope.reduction import Reduction
from transim.envelope.ringing import solve_ringing
from transim.envelope.scatter import Scattering

__all__ = ["Envelope", "Transition", "solve_envelope"]

#: Frozen is left where the group delay exceeds this share of the fastest RF transition.
_SLOW = 0.02
#: The delay counts where the transmission is at least this share of its largest value.
_PASSING = 0.3


@dataclass(frozen=True)
class Transition:
    """Group delay of the RF network against the fastest 10 to 90 % change of its transmission [s]."""

    group_delay: float
    fastest: float

    @property
    def share(self) -> float:
        """The delay as a share of the change."""
        return self.group_delay / self.fastest

    @property
    def slow_network(self) -> bool:
        """Whether the network itself takes part in the transition."""
        return self.share > _SLOW


@dataclass(frozen=True)
class Envelope:
    """S against time with the method used for each carrier, and why.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Time [s].
    s : ndarray, shape (f, n, p, p)
        S-parameters of each carrier.
    frozen : ndarray, shape (f, n, p, p)
        The frozen solution, which is what an AC analysis at the bias of each instant has to give.
    methods, reasons : tuple of str
        ``frozen`` or ``ringing`` for each carrier, and the ground for it.
    reduction : Reduction
        How the network was solved; serves further solutions of it.
    """

    time: Array
    s: npt.NDArray[np.complex128]
    frozen: npt.NDArray[np.complex128]
    methods: tuple[str, ...]
    reasons: tuple[str, ...]
    reduction: Reduction


def solve_envelope(
    network: Network,
    ports: Sequence[RfPort],
    frequency: Sequence[float],
    pairs: Sequence[tuple[int, int]],
    wanted: str = "auto",
) -> Envelope:
    """Solve a network for all carriers, each by the method that it needs.

    Parameters
    ----------
    network : Network
        Linearised along the video run, n points.
    ports : sequence of RfPort
        p ports.
    frequency : sequence of float
        f carriers [Hz].
    pairs : sequence of tuple of int
        Places of the port that RF enters and of the one that it leaves; the slowest pair decides.
    wanted : {"auto", "frozen", "ringing"}
        Method, or the choice by group delay.

    Returns
    -------
    Envelope

    Raises
    ------
    LinearisationError
        If the network is singular.
    """
    reduction = Reduction(network, 2j * np.pi * frequency[0])
    frozen = solve_frozen(network, ports, frequency, reduction)
    methods, reasons = [], []
    for k, carrier in enumerate(frequency):
        each = [_transition(_Pair(network, ports, pair, reduction), carrier, frozen.s[k]) for pair in pairs]
        transition = max(each, key=lambda one: one.share)
        methods.append(wanted if wanted != "auto" else ("ringing" if transition.slow_network else "frozen"))
        share = transition.share
        reason = (
            f"group delay is {100.0 * share:.2g} % of the fastest RF transition"
            if np.isfinite(transition.fastest)
            else "the RF makes no transition between 10 and 90 % that its network could slow"
        )
        reasons.append(reason if wanted == "auto" else f"as requested; {reason}")
    s = frozen.s
    slow = [k for k, method in enumerate(methods) if method == "ringing"]
    if slow:
        ringing: Scattering = solve_ringing(network, ports, [frequency[k] for k in slow], frozen.s[slow])
        s = s.copy()
        s[slow] = ringing.s
    return Envelope(network.time, s, frozen.s, tuple(methods), tuple(reasons), reduction)


@dataclass(frozen=True)
class _Pair:
    """A network, and the pair of its ports that is looked at."""

    network: Network
    ports: Sequence[RfPort]
    pair: tuple[int, int]
    reduction: Reduction


def _transition(way: _Pair, carrier: float, s: npt.NDArray[np.complex128]) -> Transition:
    time = way.network.time
    level = np.abs(s[:, way.pair[1], way.pair[0]])
    top = float(level.max())
    fastest = min(_shortest(time, level / top), _shortest(time, 1.0 - level / top))
    passing = np.flatnonzero(level >= _PASSING * top)
    sample = passing[np.unique(np.linspace(0, passing.size - 1, 32).astype(int))]
    delay = float(_group_delay(way, sample, carrier).max())
    return Transition(delay, fastest)


def _shortest(time: Array, level: Array) -> float:
    """Return the shortest time from below 0.1 to above 0.9 of a level [s]; infinite without such a change."""
    outside = np.flatnonzero((level <= 0.1) | (level >= 0.9))
    low = level[outside] <= 0.1
    rises = np.flatnonzero(low[:-1] & ~low[1:])
    return float(np.min(time[outside[rises + 1]] - time[outside[rises]], initial=np.inf))


def _group_delay(way: _Pair, points: npt.NDArray[np.intp], carrier: float) -> Array:
    """Return |d ln S / dw| at some time points [s]: group delay, amplitude slope included."""
    spread = 1e-4
    both = solve_frozen(
        way.network.at(points), way.ports, [carrier * (1.0 - spread), carrier * (1.0 + spread)], way.reduction
    )
    through = both.s[:, :, way.pair[1], way.pair[0]]
    middle = 0.5 * (through[0] + through[1])
    return np.asarray(np.abs((through[1] - through[0]) / middle) / (2.0 * np.pi * carrier * 2.0 * spread))
