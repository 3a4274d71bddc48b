"""Lossless lines in a deck: their breakpoints."""

from __future__ import annotations

import re

__all__ = ["without_breakpoints"]

#: A T card with its four nodes on its first line, and the rest of the card.
_CARD = re.compile(r"(?im)^(t\S*(?:[ \t]+[^\s=]+){4})((?:[ \t]+[^\n]*)?(?:\n\+[^\n]*)*)$")
_TOLERANCE = re.compile(r"(?i)\b(?:rel|abs)\s*=")


def without_breakpoints(text: str) -> str:
    """Keep lossless lines from setting breakpoints of their own, by ``rel=2`` on their cards.

    Parameters
    ----------
    text : str
        SPICE lines.

    Returns
    -------
    str
        The same, but for T cards that give neither ``rel`` nor ``abs``.

    Notes
    -----
    ngspice sets a breakpoint one delay after each instant at which a wave's slope changes by more than `rel` times
    the slope, and two slopes never differ by more than twice the larger one. With ngspice's own ``rel=1`` each change
    of sign counts, rounding errors included; between two junctions the breakpoints bring each other about, until the
    time step is too small. Without them the step control of what stands at the line's ends decides.
    """
    return _CARD.sub(lambda card: card[0] if _TOLERANCE.search(card[2]) else f"{card[1]} rel=2{card[2]}", text)
