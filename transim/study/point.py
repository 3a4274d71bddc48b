"""One point of a study: a design with some values changed, simulated and judged, or the reason why it could not be."""

from __future__ import annotations

import contextlib
import json
import platform
import shutil
import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path

from transim.design.model import Design
from transim.design.parameters import changed_design
from transim.engine.ngspice import Engine, find_engine
from transim.errors import EngineError, EngineNotFound, OutputError, TransimError
from transim.measure.limits import Judgement
from transim.study.result import Result
from transim.study.run import ANALYSES, choose_drivers
from transim.study.simulate import simulate

__all__ = ["CaseFigures", "Point", "Setup", "failed_point", "simulate_point"]

#: A log or deck that is kept with a failed point is no longer than this.
_LONGEST_TEXT = 200_000


@dataclass(frozen=True)
class Setup:
    """What all points of a study have in common.

    Attributes
    ----------
    design : Design
        The design at its nominal values.
    parameters : tuple of str
        Dotted names of what is changed.
    drivers : tuple of str
        Drivers that are run.
    analysis : {"envelope", "carrier"}
        How the RF envelope is found.
    ngspice : str or None
        The executable that is asked for.
    version : int or None
        Version of ngspice that every point is simulated with; None: any.
    """

    design: Design
    parameters: tuple[str, ...]
    drivers: tuple[str, ...]
    analysis: str = "envelope"
    ngspice: str | None = None
    version: int | None = None

    def at(self, values: tuple[float, ...]) -> Design:
        """Return the design of one point.

        Parameters
        ----------
        values : tuple of float
            One for each parameter, in its unit.

        Returns
        -------
        Design

        Raises
        ------
        DesignError
            If a value is out of its range, or values exclude each other.
        """
        return changed_design(self.design, dict(zip(self.parameters, values, strict=True)))


@dataclass(frozen=True)
class CaseFigures:
    """What one driver and throw gave at one temperature, carrier and level.

    Attributes
    ----------
    driver : str
        Its name.
    temperature, carrier, level : float
        [degC], [Hz], [dBm].
    throw : str
        Name of the throw; empty where the path has a single way.
    figures : mapping of str to float or None
        Every metric in its unit; None where it is undefined.
    notes : mapping of str to str
        The reason of each that is undefined.
    judgements : tuple of Judgement
        Limits of the design, then ratings of the components.
    faults : tuple of str
        What makes the figures unfit to be judged.
    """

    driver: str
    temperature: float
    carrier: float
    level: float
    throw: str
    figures: Mapping[str, float | None]
    notes: Mapping[str, str]
    judgements: tuple[Judgement, ...]
    faults: tuple[str, ...] = ()

    @property
    def good(self) -> bool:
        """Whether every limit and rating is met, and the figures are sound."""
        return not self.faults and all(judgement.verdict == "pass" for judgement in self.judgements)


@dataclass(frozen=True)
class Point:
    """A finished point.

    Attributes
    ----------
    values : tuple of float
        Values of the study's parameters.
    cases : tuple of CaseFigures
        By driver, temperature, carrier and level; empty where the point failed.
    reason : str or None
        Why it failed.
    deck, log : str or None
        The deck that failed, and what ngspice said.
    """

    values: tuple[float, ...]
    cases: tuple[CaseFigures, ...] = ()
    reason: str | None = None
    deck: str | None = None
    log: str | None = None

    @property
    def good(self) -> bool:
        """Whether it was simulated and every limit and rating is met in all cases."""
        return self.reason is None and all(case.good for case in self.cases)

    def text(self) -> str:
        """Return the point as JSON, every float exactly."""
        # field by field: dataclasses.asdict copies every figure, which costs more than the text
        cases = [{**vars(case), "judgements": [*map(vars, case.judgements)]} for case in self.cases]
        return json.dumps({**vars(self), "cases": cases}, separators=(",", ":"))

    @classmethod
    def read(cls, text: str) -> Point:
        """Return the point that a text stands for.

        Parameters
        ----------
        text : str
            As `text` writes it.

        Returns
        -------
        Point
        """
        raw = json.loads(text)
        cases = tuple(
            CaseFigures(
                **{
                    **case,
                    "judgements": tuple(Judgement(**judgement) for judgement in case["judgements"]),
                    "faults": tuple(case["faults"]),
                }
            )
            for case in raw.pop("cases")
        )
        return cls(**{**raw, "values": tuple(raw["values"]), "cases": cases})


def simulate_point(setup: Setup, values: tuple[float, ...]) -> Point:
    """Simulate one point.

    Parameters
    ----------
    setup : Setup
        The study.
    values : tuple of float
        One for each of its parameters.

    Returns
    -------
    Point
        Finished or failed: a point that does not converge is no error.

    Raises
    ------
    EngineNotFound, OutputError
        If no point at all can be run here: there is no ngspice, or another version, or no room on the disk.
    """
    try:
        design = setup.at(values)
        engine = _engine(setup.ngspice, setup.version)
        cases: list[CaseFigures] = []
        for driver in choose_drivers(design, setup.drivers):
            for temperature in design.environment.temperature:
                # the envelope's three decks of its own check are for the nominal and the reported points
                run = simulate(design, driver, temperature, engine, ANALYSES[setup.analysis], checks="start")
                cases += [_case(result) for result in run.results]
    except (EngineNotFound, OutputError):
        raise
    except EngineError as exc:
        return failed_point(values, exc.message, exc)
    except TransimError as exc:
        return failed_point(values, str(exc))
    return Point(values, tuple(cases))


def failed_point(values: tuple[float, ...], reason: str, error: EngineError | None = None) -> Point:
    """Return a point that could not be simulated.

    Parameters
    ----------
    values : tuple of float
        Its values.
    reason : str
        Why.
    error : EngineError or None
        What ngspice did; the deck that it kept is taken over, and removed from where it was.

    Returns
    -------
    Point
    """
    deck = log = None
    if error is not None:
        log = error.log_tail or None
        if error.deck is not None:
            deck = _taken_over(error.deck)
    return Point(values, (), " ".join(reason.split()), deck, log)


def _taken_over(deck: Path) -> str | None:
    with contextlib.suppress(OSError):
        text = deck.read_text(encoding="utf-8", errors="replace")[:_LONGEST_TEXT]
        # only a private folder of the engine's own is removed
        if deck.parent.parent == Path(tempfile.gettempdir()).absolute() and deck.parent.name.startswith("transim-"):
            shutil.rmtree(deck.parent, ignore_errors=True)
        return text
    return None


@lru_cache(maxsize=4)
def _engine(ngspice: str | None, version: int | None) -> Engine:
    engine = find_engine(ngspice)
    if version not in (None, engine.version):
        raise EngineNotFound(
            f"{engine.path} on {platform.node()} is ngspice {engine.version}, and the study was started with {version}"
        )
    return engine


def _case(result: Result) -> CaseFigures:
    figures = {name: figure.value for name, figure in result.figures.items()}
    notes = {name: figure.note or "" for name, figure in result.figures.items() if figure.value is None}
    return CaseFigures(
        driver=result.driver,
        temperature=result.temperature,
        carrier=result.carrier,
        level=result.level,
        throw=result.throw,
        figures=figures,
        notes=notes,
        judgements=(*result.judgements, *result.ratings),
        faults=result.faults,
    )
