"""Trials of a spread: values within tolerances, independent or moved together by the factor of a lot."""

from __future__ import annotations

import itertools
from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from transim.design.tolerances import Tolerance
from transim.errors import StudyError

__all__ = ["MOST_CORNERS", "draw_corners", "draw_trials", "spread_values"]

Array = npt.NDArray[np.float64]

#: Corners are only enumerated where there are no more than these.
MOST_CORNERS = 4096
#: Shares are kept off 0 and 1, where the normal distribution has no quantile.
_EDGE = 1e-12


def draw_trials(tolerances: Sequence[Tolerance], trials: int, seed: int, points: str = "random") -> Array:
    """Draw trials.

    Parameters
    ----------
    tolerances : sequence of Tolerance
        p parameters.
    trials : int
        n trials.
    seed : int
        The same seed gives the same trials, and more trials begin with the fewer ones.
    points : {"random", "sobol"}
        Independent trials, or points that fill the space evenly.

    Returns
    -------
    ndarray, shape (n, p)
        Values in the unit of each parameter, as decimal numbers of twelve digits.

    Notes
    -----
    A parameter of a lot has the normal score r z0 + sqrt(1 - r^2) z, z0 the lot's and r its correlation with it; the
    distribution of each parameter by itself stays what its tolerance says.
    """
    lots = list(dict.fromkeys(tolerance.lot for tolerance in tolerances if tolerance.lot is not None))
    own = len(tolerances)
    uniform = _uniform(trials, own + len(lots), seed, points)
    columns = []
    for place, tolerance in enumerate(tolerances):
        share = uniform[:, place]
        if tolerance.lot is not None:
            share = _with_lot(share, uniform[:, own + lots.index(tolerance.lot)], tolerance.correlation)
        columns.append(spread_values(tolerance, share))
    return np.stack(columns, axis=1)


def spread_values(tolerance: Tolerance, share: Array) -> Array:
    """Turn shares of probability into values.

    Parameters
    ----------
    tolerance : Tolerance
        The parameter.
    share : ndarray, shape (n,)
        Cumulative probability, 0 .. 1.

    Returns
    -------
    ndarray, shape (n,)
        Values, within the ends of the tolerance [unit of the parameter].
    """
    from scipy.special import ndtr, ndtri

    low, high = tolerance.low, tolerance.high
    if tolerance.distribution == "uniform":
        found = low + (high - low) * share
    elif tolerance.distribution == "corners":
        found = np.where(share < 0.5, low, high)
    else:
        # the quantile of the normal distribution cut off at both ends
        tail = ndtr(-tolerance.sigmas)
        score = ndtri(tail + share * (1.0 - 2.0 * tail)) / tolerance.sigmas
        found = 0.5 * (low + high) + 0.5 * (high - low) * score
    rounded = [float(f"{value:.12g}") for value in found.tolist()]
    return np.asarray(np.clip(np.array(rounded), low, high))


def draw_corners(tolerances: Sequence[Tolerance]) -> Array:
    """Return all corners, the nominal point first.

    Parameters
    ----------
    tolerances : sequence of Tolerance
        p parameters; those that a lot moves completely are at the same end, or at opposite ones.

    Returns
    -------
    ndarray, shape (n, p)
        Values in the unit of each parameter.

    Raises
    ------
    StudyError
        If there are more than `MOST_CORNERS`.
    """
    groups: dict[object, list[int]] = {}
    for place, tolerance in enumerate(tolerances):
        tied = tolerance.lot is not None and abs(tolerance.correlation) == 1.0
        groups.setdefault(tolerance.lot if tied else place, []).append(place)
    if 2 ** len(groups) > MOST_CORNERS:
        raise StudyError(
            f"{len(groups)} independent tolerances have {2 ** len(groups)} corners, and no more than {MOST_CORNERS} are"
            " run; use random or sobol points, or fewer tolerances"
        )
    rows = [[tolerance.nominal for tolerance in tolerances]]
    for ends in itertools.product((False, True), repeat=len(groups)):
        row = [0.0] * len(tolerances)
        for up, places in zip(ends, groups.values(), strict=True):
            for place in places:
                tolerance = tolerances[place]
                row[place] = tolerance.high if up == (tolerance.correlation >= 0.0) else tolerance.low
        rows.append(row)
    return np.array(rows)


def _uniform(trials: int, width: int, seed: int, points: str) -> Array:
    """Return shares of probability, shape (trials, width)."""
    if points == "random":
        return np.asarray(np.random.Generator(np.random.PCG64(seed)).random((trials, width)))
    from scipy.stats import qmc

    engine = qmc.Sobol(width, scramble=True, rng=np.random.Generator(np.random.PCG64(seed)))
    # whole powers of two are what the sequence is made for; the first ones of them are taken
    return np.asarray(engine.random_base2(max(0, (trials - 1).bit_length()))[:trials])


def _with_lot(own: Array, common: Array, correlation: float) -> Array:
    from scipy.special import ndtr, ndtri

    scores = [ndtri(np.clip(share, _EDGE, 1.0 - _EDGE)) for share in (own, common)]
    return np.asarray(ndtr(np.sqrt(1.0 - correlation**2) * scores[0] + correlation * scores[1]))
