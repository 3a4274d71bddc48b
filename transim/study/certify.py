"""Numerical uncertainty of figures: a case repeated at finer settings, and how much each figure moves.

The change from one setting to a finer one, times a safety factor of 3, is the usual estimate of a discretisation error
from two runs (P. J. Roache, J. Fluids Eng. 116(3), 405-413, 1994; factor quoted from memory). It supposes that the
error falls evenly. Here it scatters with the places of the time steps: on the examples one finer run left 2 % of the
figures further from a run at ten times finer settings than 3 changes. So three finer runs are made, the widest spread
counts, and the factor is 4.
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import replace

from transim.design.model import Design, Numerics
from transim.measure.limits import Judgement, judge
from transim.measure.metrics import Figure
from transim.study.result import Result

__all__ = ["SAFETY", "certified", "finer_designs", "settings_text"]

#: Uncertainty over the spread of the figures between settings.
SAFETY = 4.0
#: Changes below this share of a value [1] are rounding, of the decks' own numbers among others.
_ROUNDING = 1e-6
#: Tolerance is divided, steps and points of a carrier period are multiplied.
_FINER = ((4.0, 2), (10.0, 2), (10.0, 4))


def finer_designs(design: Design) -> tuple[Design, ...]:
    """Return a design at each of the finer settings.

    Parameters
    ----------
    design : Design
        As its file asks.

    Returns
    -------
    tuple of Design
        With a quarter and a tenth of the tolerance, and a half and a quarter of the longest step; a carrier that is
        resolved gets twice the points a period.
    """
    return tuple(design.model_copy(update={"numerics": numerics}) for numerics in _finer(design.numerics))


def _finer(numerics: Numerics) -> list[Numerics]:
    return [
        numerics.model_copy(
            update={
                "reltol": numerics.reltol / tolerance,
                "steps": numerics.steps * steps,
                "carrier_points": 2 * numerics.carrier_points,
            }
        )
        for tolerance, steps in _FINER
    ]


def settings_text(numerics: Numerics) -> str:
    """Say what was compared with what.

    Parameters
    ----------
    numerics : Numerics
        Of the design.

    Returns
    -------
    str
        One sentence.
    """
    finer = _finer(numerics)
    tolerances = sorted({f"{one.reltol:g}" for one in finer}, key=float)
    steps = sorted({one.steps for one in finer})
    return (
        f"\N{PLUS-MINUS SIGN} is the numerical uncertainty, {SAFETY:g} times the spread between this run (reltol "
        f"{numerics.reltol:g}, {numerics.steps} steps) and {len(finer)} finer ones (reltol down to {tolerances[0]}, "
        f"up to {steps[-1]} steps); a limit closer than that is undefined"
    )


def certified(result: Result, finer: Sequence[Result], design: Design) -> Result:
    """Return a result with the uncertainty of each figure, its limits judged with it.

    Parameters
    ----------
    result : Result
        At the design's own settings; its values stay.
    finer : sequence of Result
        The same driver, carrier, temperature, analysis and level at finer settings.
    design : Design
        With the limits.

    Returns
    -------
    Result
    """
    figures = {
        name: _figure(figure, [other.figures[name] for other in finer]) for name, figure in result.figures.items()
    }
    ratings = tuple(
        _rating(rating, [_ratings(other).get(rating.metric) for other in finer]) for rating in result.ratings
    )
    return replace(result, figures=figures, judgements=judge(figures, design.limits), ratings=ratings)


def _ratings(result: Result) -> Mapping[str, Judgement]:
    return {rating.metric: rating for rating in result.ratings}


def _figure(figure: Figure, others: Sequence[Figure]) -> Figure:
    if figure.value is None:
        return figure
    uncertainty = _uncertainty(figure.value, [other.value for other in others])
    if math.isfinite(uncertainty):
        return replace(figure, uncertainty=uncertainty)
    reason = next(other.note for other in others if other.value is None)
    return replace(figure, uncertainty=uncertainty, note=f"at finer settings it has no value: {reason}")


def _rating(rating: Judgement, others: Sequence[Judgement | None]) -> Judgement:
    if rating.value is None:
        return rating
    return rating.within(_uncertainty(rating.value, [None if other is None else other.value for other in others]))


def _uncertainty(value: float, others: Sequence[float | None]) -> float:
    known = [other for other in others if other is not None]
    if len(known) < len(others):
        return math.inf
    spread = max(value, *known) - min(value, *known)
    return SAFETY * spread + _ROUNDING * abs(value)
