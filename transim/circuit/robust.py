"""Settings for a second try of a deck that found no solution: more patience, and a little of everything that damps."""

from __future__ import annotations

from dataclasses import replace

from transim.circuit.decks import Deck
from transim.design.model import Numerics
from transim.quantities import deck_number

__all__ = ["robust_deck", "robust_settings"]

#: The relative tolerance is relaxed by this factor, up to the largest that a design may ask for.
_RELAXED, _LARGEST = 10.0, 1e-2


def robust_settings(numerics: Numerics) -> str:
    """Return the options of the second try as ngspice reads them.

    Parameters
    ----------
    numerics : Numerics
        Tolerance of the first try.

    Returns
    -------
    str
        A relative tolerance ten times as wide, iteration limits of 1000, 1000 and 200 (usually 100, 50 and 10), a
        minimum conductance of 1e-11 S (1e-12 S), and from every node to ground 1 Tohm and 1 fF.

    Notes
    -----
    The capacitance is what lets sources converge that limit abruptly; at 1 GHz it is 159 kohm.
    """
    reltol = deck_number(min(_RELAXED * numerics.reltol, max(_LARGEST, numerics.reltol)))
    return f"reltol={reltol} method=gear itl1=1000 itl2=1000 itl4=200 gmin=1e-11 rshunt=1e12 cshunt=1e-15"


def robust_deck(deck: Deck, numerics: Numerics) -> Deck:
    """Return a deck with the settings of the second try.

    Parameters
    ----------
    deck : Deck
        As it was first tried.
    numerics : Numerics
        Of the design.

    Returns
    -------
    Deck
        With one more option card before its control block or its end: of two settings ngspice takes the later one.
    """
    head, end, rest = deck.text.rpartition("\n.control\n" if deck.writes_raw else "\n.end\n")
    card = f"\n* second try, since the first found no solution\n.options {robust_settings(numerics)}"
    return replace(deck, text=f"{head}{card}{end}{rest}")
