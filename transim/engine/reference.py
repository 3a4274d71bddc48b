"""A circuit with a known answer, to see that the ngspice found is one that solves."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from transim.engine.ngspice import Engine

__all__ = ["SelfCheck", "self_check"]


@dataclass(frozen=True)
class SelfCheck:
    """How well ngspice solves a circuit with a known answer.

    Parameters
    ----------
    version : int
        Major version of ngspice.
    deviation : float
        Largest difference from the closed form [V], of an answer of 1 V.
    limit : float
        Largest that is accepted [V].
    seconds : float
        Wall time of the run [s].
    """

    version: int
    deviation: float
    limit: float
    seconds: float

    @property
    def passed(self) -> bool:
        """True where the deviation is within its limit."""
        return self.deviation <= self.limit


def self_check(engine: Engine) -> SelfCheck:
    """Let ngspice discharge a capacitor, and compare it with exp(-t/RC).

    Parameters
    ----------
    engine : Engine
        The ngspice to check.

    Returns
    -------
    SelfCheck
        The largest deviation over five time constants.

    Raises
    ------
    EngineError
        Where the run fails at all.

    Notes
    -----
    1 kohm, 1 nF, 1 V at the start: v = V exp(-t/RC), the solution of C dv/dt = -v/R.
    """
    deck = (
        "* self-check: a capacitor discharges\nc1 out 0 1e-9 ic=1\nr1 out 0 1e3\n"
        ".options reltol=1e-6\n.tran 5e-9 5e-6 0 5e-9 uic\n.end\n"
    )
    run = engine.run(deck, name="self_check", timeout=20.0, stop_time=5e-6)
    plot = run.plots[0]
    expected = np.exp(-plot["time"].real / 1e-6)
    deviation = float(np.max(np.abs(plot["v(out)"] - expected)))
    return SelfCheck(engine.version, deviation, 1e-4, run.seconds)
