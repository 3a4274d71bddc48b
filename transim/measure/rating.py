"""A maximum rating: a waveform and what its peak or its mean may be."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

from transim.errors import MeasurementError
from transim.measure.cycle import period_mean
from transim.measure.definitions import Timing
from transim.measure.waveform import Waveform

__all__ = ["Rating"]


@dataclass(frozen=True, eq=False)
class Rating:
    """A maximum rating of a component, with the waveform that it applies to.

    Parameters
    ----------
    name : str
        Key in the design, and the place in the circuit where a key holds for several.
    max : float
        The rated maximum [unit of `waveform`].
    kind : {"peak", "mean"}
        Whether it holds at every instant or for the mean over the command's period.
    waveform : Waveform
        What is rated, over the whole transient; positive in the rated direction.

    Raises
    ------
    MeasurementError
        If the maximum is not a finite positive number.
    """

    name: str
    max: float
    kind: Literal["peak", "mean"]
    waveform: Waveform

    def __post_init__(self) -> None:
        if not (math.isfinite(self.max) and self.max > 0.0):
            raise MeasurementError(f"rating {self.name} must be a finite positive number, found {self.max}")

    @property
    def unit(self) -> str:
        """Unit of the maximum."""
        return self.waveform.unit

    def value(self, timing: Timing) -> float:
        """Return what the rating is held against.

        Parameters
        ----------
        timing : Timing
            Of the judged cycle.

        Returns
        -------
        float
            A peak is the largest sample of the whole transient, not below 0; a mean is over the period [unit].

        Raises
        ------
        MeasurementError
            If the waveform does not cover the cycle, is complex or a sample is not finite.
        """
        if self.kind == "peak":
            return max(0.0, self.waveform.extremes()[1])
        return period_mean(self.waveform, timing)
