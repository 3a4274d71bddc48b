"""The shortest intervals of the command that the RF can use, as a study found them."""

from __future__ import annotations

from dataclasses import dataclass

__all__ = ["Shortest", "Usable"]


@dataclass(frozen=True)
class Usable:
    """A shortest interval, found by bisection.

    Parameters
    ----------
    value : float or None
        The shortest interval that was seen to be usable, between 50 % points of the command [s].
    tolerance : float
        By how much it may be too long: the next shorter one that was tried was not usable [s].
    note : str
        What fails in a shorter one, or why there is no value.
    """

    value: float | None
    tolerance: float
    note: str


@dataclass(frozen=True)
class Shortest:
    """Shortest usable pulse and gap, at every carrier of the design.

    Parameters
    ----------
    pulse : Usable
        Shortest interval in which RF is let pass, from a state in which it was blocked for long: it reaches 90 %
        and enters the settling band before the command blocks it.
    gap : Usable
        Shortest interval in which RF is blocked: it falls below 10 %, and the on time after it differs by less than
        5 % from that after a long gap.
    """

    pulse: Usable
    gap: Usable
