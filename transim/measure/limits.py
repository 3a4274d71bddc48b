"""Limits on metrics, and the verdict on figures held against them."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from difflib import get_close_matches
from typing import Literal

from transim.errors import DesignError, MeasurementError
from transim.measure.metrics import METRICS, Figure
from transim.measure.rating import Rating
from transim.measure.record import Record
from transim.quantities import format_quantity

__all__ = ["Judgement", "Limit", "Verdict", "judge", "judge_ratings", "verdict"]

Verdict = Literal["pass", "fail", "undefined"]


@dataclass(frozen=True)
class Limit:
    """What a metric must not pass; a value on a bound meets it.

    Parameters
    ----------
    metric : str
        Name of the metric.
    min, max : float or None
        Bounds in the metric's unit, at least one.

    Raises
    ------
    DesignError
        If the metric is unknown, no bound is given, a bound is not finite or they exclude each other;
        `key` is the key in the design file.
    """

    metric: str
    min: float | None = None
    max: float | None = None

    def __post_init__(self) -> None:
        key = f"limits.{self.metric}"
        if self.metric not in METRICS:
            nearest = get_close_matches(self.metric, METRICS, n=1)
            raise DesignError(
                "unknown metric",
                key=key,
                expected=f"one of {', '.join(METRICS)}",
                found=self.metric,
                nearest=nearest[0] if nearest else None,
            )
        bounds = [bound for bound in (self.min, self.max) if bound is not None]
        if not bounds:
            raise DesignError("a limit needs min, max or both", key=key)
        if not all(math.isfinite(bound) for bound in bounds):
            raise DesignError("a bound is not a finite number", key=key, found=str(bounds))
        if self.min is not None and self.max is not None and self.min > self.max:
            unit = METRICS[self.metric].unit
            low, high = format_quantity(self.min, unit), format_quantity(self.max, unit)
            raise DesignError("min is above max", key=key, found=f"min {low}, max {high}")


@dataclass(frozen=True)
class Judgement:
    """One limit, the figure that was held against it, and the outcome.

    Parameters
    ----------
    metric : str
        Name of the metric.
    min, max : float or None
        Bounds of the limit, in the metric's unit.
    value : float or None
        The figure; None if it is undefined.
    margin : float or None
        Distance to the nearer bound, negative where that is missed, in the metric's unit.
    verdict : {"pass", "fail", "undefined"}
        The outcome.
    unit : str or None
        Unit of bounds, value and margin where `metric` is no metric but a rating; None: that of the metric.
    note : str or None
        Why a rating could not be judged, or why a value was not.
    uncertainty : float or None
        Numerical uncertainty of the value; None where it was not asked for.
    """

    metric: str
    min: float | None
    max: float | None
    value: float | None
    margin: float | None
    verdict: Verdict
    unit: str | None = None
    note: str | None = None
    uncertainty: float | None = None

    def within(self, uncertainty: float) -> Judgement:
        """Return the judgement of a value that is known to within an uncertainty.

        Parameters
        ----------
        uncertainty : float
            Of the value, 0 or more.

        Returns
        -------
        Judgement
            "undefined" where the margin, to either side of the bound, is smaller than the uncertainty.
        """
        if self.margin is None or self.verdict == "undefined":
            return replace(self, uncertainty=uncertainty)
        if abs(self.margin) >= uncertainty:
            return replace(self, uncertainty=uncertainty)
        unit = self.unit or METRICS[self.metric].unit
        # levels differ by decibels
        unit = "dB" if unit == "dBm" else unit
        width = format_quantity(uncertainty, unit, 3) if math.isfinite(uncertainty) else "unknown"
        side = "inside" if self.margin >= 0.0 else "outside"
        margin = format_quantity(abs(self.margin), unit, 3)
        note = f"it is {margin} {side} its bound, and its numerical uncertainty is {width}"
        return replace(self, verdict="undefined", note=note, uncertainty=uncertainty)


def judge(figures: Mapping[str, Figure], limits: Sequence[Limit]) -> tuple[Judgement, ...]:
    """Hold figures against limits.

    Parameters
    ----------
    figures : mapping of str to Figure
        Figures by metric, as `extract` gives them.
    limits : sequence of Limit
        The limits.

    Returns
    -------
    tuple of Judgement
        One for each limit, in their order. A figure that is missing, undefined or not finite gives the
        verdict "undefined", and so does one whose margin is smaller than its numerical uncertainty.
    """
    return tuple(_judge(figures.get(limit.metric), limit) for limit in limits)


def judge_ratings(record: Record) -> tuple[Judgement, ...]:
    """Hold the record's waveforms against the ratings of their components.

    Parameters
    ----------
    record : Record
        The cycle, with its ratings.

    Returns
    -------
    tuple of Judgement
        One for each rating, in their order; the metric is ``rating`` and its name. A peak is taken over the
        whole transient, a mean over the period.
    """
    return tuple(_held(record, rating) for rating in record.ratings)


def verdict(judgements: Iterable[Judgement]) -> Verdict:
    """Join verdicts into one.

    Parameters
    ----------
    judgements : iterable of Judgement
        What was judged.

    Returns
    -------
    {"pass", "fail", "undefined"}
        "fail" if any limit is missed, else "undefined" if any could not be judged, else "pass".
    """
    found = {judgement.verdict for judgement in judgements}
    if "fail" in found:
        return "fail"
    return "undefined" if "undefined" in found else "pass"


def _judge(figure: Figure | None, limit: Limit) -> Judgement:
    value = None if figure is None else figure.value
    if value is None or not math.isfinite(value):
        return Judgement(limit.metric, limit.min, limit.max, None, None, "undefined")
    margins = []
    if limit.min is not None:
        margins.append(value - limit.min)
    if limit.max is not None:
        margins.append(limit.max - value)
    margin = min(margins)
    outcome: Verdict = "pass" if margin >= 0.0 else "fail"
    judgement = Judgement(limit.metric, limit.min, limit.max, value, margin, outcome)
    known = None if figure is None else figure.uncertainty
    return judgement if known is None else judgement.within(known)


def _held(record: Record, rating: Rating) -> Judgement:
    name, note, value = f"rating {rating.name}", None, None
    try:
        value = rating.value(record.timing)
    except MeasurementError as reason:
        note = reason.message
    if value is None or not math.isfinite(value):
        note = note or "the waveform gives no finite number"
        return Judgement(name, None, rating.max, None, None, "undefined", rating.unit, note)
    margin = rating.max - value
    return Judgement(name, None, rating.max, value, margin, "pass" if margin >= 0.0 else "fail", rating.unit)
