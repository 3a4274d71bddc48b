"""Confidence interval of a yield."""

from __future__ import annotations

import math
from statistics import NormalDist

__all__ = ["wilson_interval"]


def wilson_interval(good: int, trials: int, confidence: float = 0.95) -> tuple[float, float]:
    """Return the score interval of a share.

    Parameters
    ----------
    good, trials : int
        How many of how many independent trials were good.
    confidence : float
        Probability with which the interval covers the true share, 0 .. 1.

    Returns
    -------
    tuple of float
        Lower and upper end, 0 .. 1; the whole range without trials.

    References
    ----------
    E. B. Wilson, Probable inference, the law of succession, and statistical inference, J. Am. Stat. Assoc. 22(158),
    209-212, 1927.

    Examples
    --------
    >>> [round(end, 4) for end in wilson_interval(95, 100)]
    [0.8882, 0.9785]
    """
    if trials == 0:
        return 0.0, 1.0
    z = NormalDist().inv_cdf(0.5 + confidence / 2.0)
    share = good / trials
    middle = share + z * z / (2.0 * trials)
    half = z * math.sqrt(share * (1.0 - share) / trials + z * z / (4.0 * trials * trials))
    scale = 1.0 + z * z / trials
    # at its ends the interval is exact, and rounding must not take it past them
    low = 0.0 if good == 0 else max(0.0, (middle - half) / scale)
    high = 1.0 if good == trials else min(1.0, (middle + half) / scale)
    return low, high
