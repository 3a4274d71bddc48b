"""What was recorded, and how."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from transim.bench.detectors import Detector
from transim.measure.definitions import Definitions

__all__ = ["Channels", "Levels", "Setup"]

Array = npt.NDArray[np.float64]


@dataclass(frozen=True)
class Channels:
    """What was recorded, on one time axis.

    Attributes
    ----------
    time : ndarray, shape (n,)
        Instants, increasing [s].
    command : ndarray, shape (n,)
        The logic command [V].
    rf : ndarray or None
        The RF or the output of its detector [V].
    leakage : mapping of str to ndarray
        Voltage at RF ports [V].
    """

    time: Array
    command: Array
    rf: Array | None = None
    leakage: Mapping[str, Array] = field(default_factory=dict)


@dataclass(frozen=True)
class Setup:
    """How it was recorded.

    Attributes
    ----------
    detector : Detector
        What the RF trace is.
    definitions : Definitions
        Of the figures.
    carrier : float or None
        Its frequency [Hz]; None: found where the RF itself is recorded, else unknown.
    impedance : float
        That leakage is measured across [ohm].
    passes_high : bool or None
        Whether RF passes while the command is high; None: as the RF trace shows, and high without one.
    through : float or None
        What the RF trace reads with a straight connection in place of the switch, a carrier's amplitude or a
        detector's output [V]; None: not known, so that levels count from the on level.
    pulse : int or None
        The pulse that is judged, counted from 1; None: the last one with both edges.
    period : float or None
        From one pulse to the next [s]; None: as the record shows.
    """

    detector: Detector
    definitions: Definitions = field(default_factory=Definitions)
    carrier: float | None = None
    impedance: float = 50.0
    passes_high: bool | None = None
    through: float | None = None
    pulse: int | None = None
    period: float | None = None


@dataclass(frozen=True)
class Levels:
    """Settled levels of the RF trace, as it reads.

    Attributes
    ----------
    on, off : float
        A carrier's amplitude, or the output of a detector [V].
    """

    on: float
    off: float
