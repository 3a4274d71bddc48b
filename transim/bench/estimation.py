"""Parameters by weighted least squares, with intervals, and with a refusal where the data do not tell them."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from transim.errors import DesignError, MeasurementError
from transim.quantities import format_quantity

__all__ = ["Estimation", "Fitted", "Unknown", "estimate"]

Array = npt.NDArray[np.float64]
Residuals = Callable[[Mapping[str, float]], Array]

#: Change of the logarithm of a parameter for central differences.
_STEP = 0.03
#: Relative standard deviation above which a parameter counts as not determined.
_LARGEST = 0.3
#: Correlation above which two parameters count as one.
_SAME = 0.998


@dataclass(frozen=True)
class Unknown:
    """A parameter that is looked for.

    Attributes
    ----------
    name, unit : str
        As in the part file.
    start : float
        First guess, above 0.
    low, high : float
        Its range.
    """

    name: str
    unit: str
    start: float
    low: float
    high: float


@dataclass(frozen=True)
class Fitted:
    """A parameter that was found.

    Attributes
    ----------
    name, unit : str
        As in the part file.
    value : float
        Estimate.
    low, high : float
        Ends of the 95 % confidence interval.
    start : float
        First guess.
    """

    name: str
    unit: str
    value: float
    low: float
    high: float
    start: float


@dataclass(frozen=True)
class Estimation:
    """What a fit gave.

    Attributes
    ----------
    parameters : tuple of Fitted
        In the order of the unknowns.
    correlation : ndarray, shape (k, k)
        Of their logarithms.
    residuals : ndarray, shape (m,)
        Measured less computed, in standard deviations of the data.
    misfit : float
        Sum of their squares over the degrees of freedom; 1 for data that differ by their noise alone.
    evaluations : int
        How often the residuals were computed.
    """

    parameters: tuple[Fitted, ...]
    correlation: Array
    residuals: Array
    misfit: float
    evaluations: int


def estimate(unknowns: Sequence[Unknown], residuals: Residuals, *, known_noise: bool = True) -> Estimation:
    """Find parameters.

    Parameters
    ----------
    unknowns : sequence of Unknown
        What is looked for; the logarithms are fitted, so that no estimate leaves the positive numbers.
    residuals : callable
        Takes values by name, returns measured less computed in standard deviations, shape (m,).
    known_noise : bool
        Whether those standard deviations are known; if not, they are scaled by the misfit.

    Returns
    -------
    Estimation
        With 95 % intervals from the linearised problem and Student's t; a misfit above 1 widens them.

    Raises
    ------
    DesignError
        If a first guess is not above 0.
    MeasurementError
        If there are too few data, or they do not determine a parameter, which is named.
    """
    from scipy.optimize import least_squares
    from scipy.special import stdtrit

    for unknown in unknowns:
        if not unknown.start > 0.0:
            raise DesignError(
                "a parameter that is fitted must start above 0",
                key=unknown.name,
                found=format_quantity(unknown.start, unknown.unit),
            )
    names = [unknown.name for unknown in unknowns]
    evaluations = 0

    def rest(place: Array) -> Array:
        nonlocal evaluations
        evaluations += 1
        return residuals(dict(zip(names, np.exp(place).tolist(), strict=True)))

    def slopes(place: Array) -> Array:
        columns = []
        for k in range(place.size):
            shift = np.zeros(place.size)
            shift[k] = _STEP
            columns.append((rest(place + shift) - rest(place - shift)) / (2.0 * _STEP))
        return np.stack(columns, axis=1)

    start = np.log([unknown.start for unknown in unknowns])
    # the differences must not step out of the range
    lows = np.log([max(unknown.low, unknown.start * 1e-6) for unknown in unknowns]) + 1.1 * _STEP
    highs = np.log([min(unknown.high, unknown.start * 1e6) for unknown in unknowns]) - 1.1 * _STEP
    start = np.clip(start, lows + 1e-6, highs - 1e-6)
    first = slopes(start)
    if first.shape[0] <= len(names):
        raise MeasurementError(f"{first.shape[0]} data cannot determine {', '.join(names)}; more are needed")
    _refuse_blind(names, first)
    found = least_squares(rest, start, jac=slopes, bounds=(lows, highs), xtol=1e-4, ftol=1e-5, max_nfev=20)
    jacobian = slopes(found.x)
    free = found.fun.size - len(names)
    misfit = float(found.fun @ found.fun) / free
    scale = max(1.0, misfit) if known_noise else misfit
    spread, correlation = _covariance(jacobian, scale)
    _refuse(unknowns, found.x, spread, correlation, (lows, highs))
    reach = float(stdtrit(free, 0.975)) * spread
    fitted = tuple(
        Fitted(one.name, one.unit, math.exp(x), math.exp(x - r), math.exp(x + r), one.start)
        for one, x, r in zip(unknowns, found.x.tolist(), reach.tolist(), strict=True)
    )
    return Estimation(fitted, correlation, np.asarray(found.fun), misfit, evaluations)


def _covariance(jacobian: Array, scale: float) -> tuple[Array, Array]:
    """Return standard deviations and correlations of the logarithms."""
    _, singular, right = np.linalg.svd(jacobian, full_matrices=False)
    safe = np.maximum(singular, 1e-12 * max(float(singular[0]), 1e-300))
    covariance = scale * (right.T / safe**2) @ right
    spread = np.sqrt(np.diag(covariance))
    return spread, covariance / np.outer(spread, spread)


def _refuse_blind(names: Sequence[str], jacobian: Array) -> None:
    blind = [name for name, size in zip(names, np.linalg.norm(jacobian, axis=0), strict=True) if size < 1e-6]
    if blind:
        raise MeasurementError(
            f"{', '.join(blind)}: not determined, these data do not depend on it; leave it out with --parameter"
        )


def _refuse(
    unknowns: Sequence[Unknown], place: Array, spread: Array, correlation: Array, bounds: tuple[Array, Array]
) -> None:
    """Raise where the data leave a parameter open."""
    names = [unknown.name for unknown in unknowns]
    for i, j in zip(*np.triu_indices(len(names), 1), strict=True):
        if abs(correlation[i, j]) > _SAME:
            raise MeasurementError(
                f"{names[i]} and {names[j]}: not determined, these data tell only a combination of the two; set one in "
                "the design and fit the other with --parameter"
            )
    for k, unknown in enumerate(unknowns):
        value = format_quantity(math.exp(float(place[k])), unknown.unit)
        if spread[k] > _LARGEST:
            factor = math.exp(min(2.0 * float(spread[k]), 50.0))
            raise MeasurementError(
                f"{unknown.name}: not determined, with 95 % confidence these data allow {value} times or divided by "
                f"{factor:.2g}; leave it out with --parameter, or add data that depend on it"
            )
        edge = min(abs(float(place[k] - bounds[0][k])), abs(float(bounds[1][k] - place[k])))
        if edge < 1e-3:
            raise MeasurementError(
                f"{unknown.name}: not determined, the best fit lies at the end of its range, {value}; check the "
                "design that the record is compared with"
            )
