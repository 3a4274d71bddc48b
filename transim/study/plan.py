"""What a study needs before its first point: its drivers, its setup, and the nominal design run with every check."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

from transim.design.model import Design
from transim.engine.ngspice import Engine
from transim.errors import DesignError
from transim.study.point import Setup
from transim.study.run import Outcome, choose_drivers, run_design
from transim.study.study import Advanced, Place, Workers

__all__ = ["Plan", "chosen_drivers", "full_run"]


@dataclass(frozen=True)
class Plan:
    """Where and how a study is run.

    Attributes
    ----------
    engine : Engine
        ngspice.
    place : Place
        Where the points are kept.
    workers : Workers
        Where they are simulated.
    analysis : {"envelope", "carrier"}
        How the RF envelope is found.
    ngspice : str or None
        The executable that is asked for, as workers look for it.
    advanced : callable or None
        Told of every point.
    said : callable or None
        Told what is being done besides points.
    """

    engine: Engine
    place: Place
    workers: Workers = field(default_factory=Workers)
    analysis: str = "envelope"
    ngspice: str | None = None
    advanced: Advanced | None = None
    said: Callable[[str], None] | None = None

    def setup(self, design: Design, parameters: Sequence[str], drivers: Sequence[str]) -> Setup:
        """Return what all points have in common.

        Parameters
        ----------
        design : Design
            At its nominal values.
        parameters, drivers : sequence of str
            What is changed, and which drivers are run.

        Returns
        -------
        Setup
        """
        # the sweep of the settled states over frequency is no figure of a point
        design = design.model_copy(update={"static": None})
        return Setup(design, tuple(parameters), tuple(drivers), self.analysis, self.ngspice, self.engine.version)

    def say(self, text: str) -> None:
        """Tell what is being done."""
        if self.said is not None:
            self.said(text)


def chosen_drivers(design: Design, asked: Sequence[str], parameters: Sequence[str]) -> tuple[str, ...]:
    """Return the drivers of a study.

    Parameters
    ----------
    design : Design
        The design.
    asked : sequence of str
        Those that are asked for; none: those with a parameter that is varied, else all.
    parameters : sequence of str
        Dotted names of what is varied.

    Returns
    -------
    tuple of str
        Names, at least one.

    Raises
    ------
    DesignError
        If one does not exist, or a parameter belongs to a driver that is not run.
    """
    concerned = dict.fromkeys(name.split(".")[1] for name in parameters if name.startswith("driver."))
    names = tuple(driver.name for driver in choose_drivers(design, tuple(asked) or tuple(concerned)))
    for driver in concerned:
        if driver not in names:
            raise DesignError(
                f"a parameter of driver {driver} is varied, which is not among the drivers that are run",
                file=design.source.path,
                expected=f"driver {driver} among them, or parameters of {', '.join(names)} only",
            )
    return names


def full_run(plan: Plan, setup: Setup, values: tuple[float, ...] | None, what: str) -> Outcome:
    """Run one point with every check.

    Parameters
    ----------
    plan : Plan
        How.
    setup : Setup
        The study.
    values : tuple of float or None
        Values of its parameters; None: the nominal design.
    what : str
        What the point is, for the progress.

    Returns
    -------
    Outcome

    Raises
    ------
    EngineError
        If a deck fails.
    """
    plan.say(what)
    design = setup.design if values is None else setup.at(values)
    return run_design(design, plan.engine, drivers=setup.drivers, analysis=setup.analysis)
