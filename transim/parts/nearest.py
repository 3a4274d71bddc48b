"""The known name that is closest to a mistyped one."""

from __future__ import annotations

import difflib
from collections.abc import Iterable

__all__ = ["nearest_name"]


def nearest_name(name: str, known: Iterable[str]) -> str | None:
    """Return the known name closest to a given one.

    Parameters
    ----------
    name : str
        What was written.
    known : iterable of str
        What would have been understood.

    Returns
    -------
    str or None
        The closest name, upper and lower case alike; None where nothing is similar.

    Examples
    --------
    >>> nearest_name("lifetme", ["lifetime", "width"])
    'lifetime'
    """
    by_folded = {candidate.casefold(): candidate for candidate in known}
    matches = difflib.get_close_matches(name[:100].casefold(), by_folded, n=1, cutoff=0.6)
    return by_folded[matches[0]] if matches else None
