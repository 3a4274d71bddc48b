"""One deck run, and run once more with robust settings where ngspice finds no solution."""

from __future__ import annotations

from dataclasses import dataclass

from transim.circuit.decks import Deck
from transim.circuit.robust import robust_deck, robust_settings
from transim.design.model import Numerics
from transim.engine.ngspice import Engine, EngineRun, discard_kept
from transim.errors import ConvergenceError

__all__ = ["Finished", "run_deck", "run_once"]


@dataclass(frozen=True)
class Finished:
    """A deck that ran to its end.

    Attributes
    ----------
    deck : Deck
        The deck that gave the result.
    run : EngineRun
        What it gave.
    retry : str or None
        What is to be said where it is the second try.
    """

    deck: Deck
    run: EngineRun
    retry: str | None = None


def run_deck(engine: Engine, deck: Deck, numerics: Numerics) -> Finished:
    """Run a deck, a second time where there is no solution.

    Parameters
    ----------
    engine : Engine
        ngspice.
    deck : Deck
        What to run.
    numerics : Numerics
        Its tolerance and the time limit.

    Returns
    -------
    Finished

    Raises
    ------
    EngineError
        If it fails; a `ConvergenceError` is that of the first try, and says that a second one failed as well.
    """
    try:
        return Finished(deck, run_once(engine, deck, numerics))
    except ConvergenceError as error:
        first = error
    second = robust_deck(deck, numerics)
    settings = robust_settings(numerics)
    try:
        run = run_once(engine, second, numerics)
    except ConvergenceError as error:
        discard_kept(error)
        first.message += f"; a second try with {settings} found no solution either"
        raise first from None
    discard_kept(first)
    reached = "" if first.time_reached is None else f" at {first.time_reached:.4g} s"
    name = f"{deck.group}/{deck.name}" if deck.group else deck.name
    return Finished(
        second, run, f"{name}: no solution at first{reached}; these figures are of a second try with {settings}"
    )


def run_once(engine: Engine, deck: Deck, numerics: Numerics) -> EngineRun:
    """Run a deck as it is.

    Parameters
    ----------
    engine : Engine
        ngspice.
    deck : Deck
        What to run.
    numerics : Numerics
        The time limit.

    Returns
    -------
    EngineRun

    Raises
    ------
    EngineError
        If it fails.
    """
    return engine.run(
        deck.text, name=deck.name, timeout=numerics.timeout, stop_time=deck.stop, writes_raw=deck.writes_raw
    )
