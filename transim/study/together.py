"""The static and the video deck of a study's point in one process: what has to be saved is known beforehand.

The device vectors that the envelope needs follow from the flattened circuit, which ngspice prints only as it runs. It
is the same for all points of a study whose netlists differ in numbers alone, as a rule. What is remembered here is a
guess that each run proves or corrects, so that no figure depends on which points were simulated before.
"""

from __future__ import annotations

import re
from collections import OrderedDict

from transim.circuit.elements import Circuit
from transim.engine.ngspice import discard_kept
from transim.engine.rawfile import Plot
from transim.envelope.linearise import saved_vectors
from transim.envelope.stationary import Complex
from transim.errors import ConvergenceError, DeckRejected
from transim.study.case import Case

__all__ = ["run_together"]

#: Netlists that are remembered: drivers times studies of one process.
_REMEMBERED = 64
_NUMBER = re.compile(r"(?<![\w.])[-+]?(?:\d+\.?\d*|\.\d+)(?:e[-+]?\d+)?(?![\w.])", re.IGNORECASE)
_known: OrderedDict[str, tuple[str, ...]] = OrderedDict()


def run_together(case: Case) -> tuple[Circuit, Complex, Plot]:
    """Run the static and the video deck of a case.

    Parameters
    ----------
    case : Case
        Not run yet; keeps decks and vectors.

    Returns
    -------
    circuit : Circuit
        Flattened.
    states : ndarray of complex, shape (2, f, p, p)
        S in both states, command low first; at least the columns of the ports that RF enters.
    video : Plot
        The control pulse without RF.

    Raises
    ------
    EngineError
        If a deck fails. Where there is no solution at first, both decks are run one by one, each with its second
        try: figures and reasons are those of a single run.
    """
    shape = _NUMBER.sub("#", case.netlist.text)
    saved = _known.get(shape)
    if saved is None:
        # a case of its own, so that nothing of this run is left in the results
        first = Case(case.design, case.driver, case.temperature, case.engine)
        try:
            saved = _remember(shape, saved_vectors(first.static()[0]))
        except ConvergenceError as error:
            discard_kept(error)
    if saved is not None:
        try:
            return _run(case, shape, saved)
        except (ConvergenceError, DeckRejected) as error:
            discard_kept(error)
    circuit, states = case.static()
    return circuit, states, case.video(saved_vectors(circuit))


def _run(case: Case, shape: str, saved: tuple[str, ...]) -> tuple[Circuit, Complex, Plot]:
    """Run one deck; once more where its listing shows that other vectors are needed than were saved."""
    found = case.point(saved)
    needed = saved_vectors(found[0])
    if needed == saved:
        return found
    case.decks.clear()
    return case.point(_remember(shape, needed))


def _remember(shape: str, saved: tuple[str, ...]) -> tuple[str, ...]:
    _known[shape] = saved
    _known.move_to_end(shape)
    while len(_known) > _REMEMBERED:
        _known.popitem(last=False)
    return saved
