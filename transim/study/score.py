"""How good a point is: the margins of its limits as shares of their bounds, so that limits of all units compare."""

from __future__ import annotations

from transim.measure.limits import Judgement
from transim.study.point import CaseFigures, Point

__all__ = ["normalised_margin", "point_margins", "smallest_margin"]


def normalised_margin(judgement: Judgement) -> float | None:
    """Return a margin as a share of its bound.

    Parameters
    ----------
    judgement : Judgement
        One limit or rating.

    Returns
    -------
    float or None
        Distance to a bound over the magnitude of that bound, the smaller one of two; over one unit where the bound
        is zero. Negative where the limit is missed, None where it is undefined.
    """
    value, low, high = judgement.value, judgement.min, judgement.max
    if value is None:
        return None
    ends = [(value - low, low)] if low is not None else []
    ends += [(high - value, high)] if high is not None else []
    return min(margin / abs(bound) if bound != 0.0 else margin for margin, bound in ends)


def point_margins(point: Point) -> list[tuple[CaseFigures, Judgement, float | None]]:
    """Return every limit and rating of a point with its normalised margin.

    Parameters
    ----------
    point : Point
        A finished point.

    Returns
    -------
    list of (CaseFigures, Judgement, float or None)
        In the order of cases and limits; a case with a fault is undefined throughout.
    """
    return [
        (case, judgement, None if case.faults else normalised_margin(judgement))
        for case in point.cases
        for judgement in case.judgements
    ]


def smallest_margin(point: Point) -> float | None:
    """Return the smallest normalised margin of a point.

    Parameters
    ----------
    point : Point
        A finished point.

    Returns
    -------
    float or None
        None where the point failed, has no limits, or one of them is undefined.
    """
    margins = [margin for _, _, margin in point_margins(point)]
    known = [margin for margin in margins if margin is not None]
    return min(known) if known and len(known) == len(margins) else None
