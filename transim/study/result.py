"""What a case gave: figures and verdicts of each throw, with decks and waveforms."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field

from transim.circuit.decks import Deck
from transim.engine.rawfile import Plot
from transim.measure.account import ChargeAccount
from transim.measure.budget import Budget
from transim.measure.limits import Judgement, Verdict, verdict
from transim.measure.metrics import Figure
from transim.measure.rate import RateStudy
from transim.measure.sweep import StaticSweep
from transim.measure.usable import Shortest
from transim.measure.waveform import Waveform

__all__ = ["CaseRun", "Result", "ThrowRun"]


@dataclass(frozen=True)
class Result:
    """Figures of one driver and throw at one carrier and temperature, by one analysis.

    Attributes
    ----------
    driver : str
        Name in the design.
    carrier, temperature : float
        [Hz], [degC].
    analysis : str
        ``envelope`` or ``carrier``.
    figures : mapping of str to Figure
        Every metric.
    judgements : tuple of Judgement
        One for each limit of the design.
    method : str
        How the envelope was found, and why so.
    level : float
        Available power of the RF source [dBm].
    warnings : tuple of str
        Where the small-signal assumption does not hold at this level, and by how much.
    ratings : tuple of Judgement
        One for each rating of the junctions and of the driver, from the run without RF.
    rates : RateStudy or None
        Powers against the switching rate, and the highest rate.
    faults : tuple of str
        What makes the figures unfit to be judged; empty in a sound run.
    check : float or None
        Largest difference of the envelope to ngspice's AC analysis at the biases that were checked [dB].
    checked : tuple of str
        These biases, in words.
    notes : tuple of str
        What makes figures less sure than they look: coarse steps, an unsettled state, few periods of the carrier.
    retries : tuple of str
        Decks of the case that found a solution in a second try only, and with which settings.
    budget : mapping of str to Budget
        Where the time goes, of ``on_time`` and ``off_time`` as far as they are defined.
    charge : mapping of str to ChargeAccount
        Where the charge goes, likewise.
    first_pulse : mapping of str to Figure or None
        Every metric of the first pulse of a train; None where there is one pulse.
    throw : str
        Its name; empty where the path has a single way.
    """

    driver: str
    carrier: float
    temperature: float
    analysis: str
    figures: Mapping[str, Figure]
    judgements: tuple[Judgement, ...]
    method: str
    faults: tuple[str, ...] = ()
    check: float | None = None
    level: float = -10.0
    warnings: tuple[str, ...] = ()
    checked: tuple[str, ...] = ()
    ratings: tuple[Judgement, ...] = ()
    rates: RateStudy | None = None
    notes: tuple[str, ...] = ()
    retries: tuple[str, ...] = ()
    budget: Mapping[str, Budget] = field(default_factory=dict)
    charge: Mapping[str, ChargeAccount] = field(default_factory=dict)
    first_pulse: Mapping[str, Figure] | None = None
    throw: str = ""

    @property
    def label(self) -> str:
        """Driver, and throw where there are several."""
        return f"{self.driver} {self.throw}".rstrip()

    @property
    def verdict(self) -> Verdict:
        """Verdict over all limits and ratings; undefined where the run has a fault."""
        return "undefined" if self.faults else verdict((*self.judgements, *self.ratings))


@dataclass(frozen=True)
class ThrowRun:
    """What one throw gave beside its figures.

    Attributes
    ----------
    name : str
        Empty where the path has a single way.
    envelopes : mapping
        Complex S of its through pair against time by (analysis, carrier); where the design has several levels, at
        the first.
    level_envelopes : mapping
        The same of every carrier-resolved run by (carrier, level).
    static : StaticSweep or None
        Both settled states against frequency, where the design asks for it.
    shortest : Shortest or None
        Shortest usable pulse and gap, where the design asks for them.
    """

    name: str
    envelopes: Mapping[tuple[str, float], Waveform]
    level_envelopes: Mapping[tuple[float, float], Waveform] = field(default_factory=dict)
    static: StaticSweep | None = None
    shortest: Shortest | None = None


@dataclass(frozen=True)
class CaseRun:
    """Everything that one driver at one temperature gave.

    Attributes
    ----------
    driver : str
        Name in the design.
    temperature : float
        [degC].
    results : tuple of Result
        For each carrier, level, throw and analysis.
    decks : tuple of Deck
        Every deck that was run.
    video : Plot
        The video run.
    throws : tuple of ThrowRun
        The ways of the RF.
    engine_seconds : float
        Time spent in ngspice [s].
    """

    driver: str
    temperature: float
    results: tuple[Result, ...]
    decks: tuple[Deck, ...]
    video: Plot
    throws: tuple[ThrowRun, ...]
    engine_seconds: float

    def throw(self, name: str) -> ThrowRun:
        """Return a throw by its name.

        Parameters
        ----------
        name : str
            As a result has it.
        """
        return next(throw for throw in self.throws if throw.name == name)
