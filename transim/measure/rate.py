"""Powers against the switching rate, and the highest rate at which ratings and settling hold."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

from transim.errors import MeasurementError
from transim.measure.cycle import RateLaw, duty_cycle, rate_law, settling_after
from transim.measure.dissipation import kept_power
from transim.measure.metrics import metric
from transim.measure.rating import Rating
from transim.measure.record import Record
from transim.measure.settling import off_settling, on_settling
from transim.quantities import format_quantity

__all__ = ["CHARGE", "RateBound", "RateStudy", "highest_rate", "rate_bound", "rate_study"]

#: Share of its settled value within which a power or charge has settled.
_SETTLED = 0.02
#: The reason where a mean is rated, and powers and charges no longer settle at higher rates.
CHARGE = "stored_charge"


@dataclass(frozen=True)
class RateBound:
    """A highest switching rate and what sets it.

    Parameters
    ----------
    rate : float
        [Hz].
    reason : str
        ``on_settling``, ``off_settling``, ``rating`` and its name, or `CHARGE`.
    """

    rate: float
    reason: str


@dataclass(frozen=True)
class RateStudy:
    """How the powers of one driver depend on the switching rate, at the duty cycle of the command.

    Parameters
    ----------
    duty : float
        Share of the period in which the RF passes.
    stated : float
        The command's own rate [Hz].
    laws : mapping of str to RateLaw
        Mean powers [W]: ``junction_dissipation`` (the worst junction at the command's own rate),
        ``driver_dissipation``, ``driver_power``; what is not recorded is left out.
    settled : RateBound or None
        Highest rate at which both intervals are long enough to settle; None where settling is undefined.
    highest : RateBound or None
        Highest rate at which the ratings hold too; None where there is no such rate.
    note : str or None
        Why there is none.
    held : float
        Rate up to which powers and stored charges settle within 2 %, so that the laws hold [Hz].
    """

    duty: float
    stated: float
    laws: Mapping[str, RateLaw]
    settled: RateBound | None
    highest: RateBound | None
    note: str | None
    held: float


@metric("highest_rate", unit="Hz", title="Highest switching rate, ratings and settling met")
def highest_rate(record: Record) -> float:
    """Return the highest switching rate at which ratings and full settling both hold.

    Parameters
    ----------
    record : Record
        The cycle, with the ratings that are to hold.

    Returns
    -------
    float
        The rate at the command's own duty cycle [Hz].

    Raises
    ------
    MeasurementError
        If settling is undefined, or a rating is exceeded at every rate.
    """
    return rate_bound(record).rate


def rate_bound(record: Record) -> RateBound:
    """Return the highest switching rate at which ratings and full settling hold, and what sets it.

    Parameters
    ----------
    record : Record
        The cycle, with the ratings that are to hold.

    Returns
    -------
    RateBound

    Raises
    ------
    MeasurementError
        If settling is undefined, or a rating is exceeded at every rate.

    Notes
    -----
    At the rate f the RF passes for duty / f, which must not be shorter than `on_settling`, and is blocked
    for (1 - duty) / f, not shorter than `off_settling`. Peaks do not depend on the rate while all settles;
    means follow `RateLaw` up to the rate at which powers and stored charges still settle too. Above it a rated
    mean is not known from one cycle, so that this rate is a bound where a mean is rated.
    """
    bound, held = _settled(record), _held(record)
    for rating in record.ratings:
        if rating.kind == "peak":
            if rating.value(record.timing) > rating.max:
                raise _none_holds(rating, rating.value(record.timing), "at any rate")
            continue
        law = rate_law(rating.waveform, record.timing)
        if law.idle >= rating.max:
            raise _none_holds(rating, law.idle, "at the lowest rates already")
        rate = (rating.max - law.idle) / law.slope if law.slope > 0.0 else math.inf
        known = RateBound(rate, f"rating {rating.name}") if rate <= held else RateBound(held, CHARGE)
        bound = min(bound, known, key=_rate)
    return bound


def _held(record: Record) -> float:
    """Return the rate up to which powers and charges settle within both intervals."""
    timing, duty = record.timing, duty_cycle(record.timing)
    powers = [wave for wave in (record.supply_power, record.driver_output_power) if wave is not None]
    times = [
        settling_after(wave, timing, _SETTLED)
        for wave in (*record.junction_charge.values(), *record.junction_power.values(), *powers)
    ]
    on, off = (max((pair[k] for pair in times), default=0.0) for k in (0, 1))
    return min(duty / on if on > 0.0 else math.inf, (1.0 - duty) / off if off > 0.0 else math.inf)


def _rate(bound: RateBound) -> float:
    return bound.rate


def rate_study(record: Record) -> RateStudy | None:
    """Return how the powers depend on the switching rate.

    Parameters
    ----------
    record : Record
        The cycle.

    Returns
    -------
    RateStudy or None
        None where no power is recorded, or the cycle does not hold both edges.
    """
    timing = record.timing
    try:
        duty, laws, held = duty_cycle(timing), _laws(record), _held(record)
    except MeasurementError:
        return None
    if not laws:
        return None
    settled = highest = note = None
    try:
        settled = _settled(record)
        highest = rate_bound(record)
    except MeasurementError as reason:
        note = reason.message
    return RateStudy(duty, 1.0 / timing.period, laws, settled, highest, note, held)


def _laws(record: Record) -> dict[str, RateLaw]:
    timing = record.timing
    laws = {}
    if record.junction_power:
        every = [rate_law(power, timing) for power in record.junction_power.values()]
        laws["junction_dissipation"] = max(every, key=lambda law: law.at(1.0 / timing.period))
    if record.supply_power is not None:
        if record.driver_output_power is not None:
            laws["driver_dissipation"] = rate_law(kept_power(record), timing)
        laws["driver_power"] = rate_law(record.supply_power, timing)
    return laws


def _settled(record: Record) -> RateBound:
    """Return the highest rate at which both intervals are as long as their settling times."""
    duty = duty_cycle(record.timing)
    bounds = []
    for name, function, share in (("on_settling", on_settling, duty), ("off_settling", off_settling, 1.0 - duty)):
        try:
            time = function(record)
        except MeasurementError as reason:
            raise MeasurementError(f"{name} is undefined: {reason.message}") from reason
        if time > 0.0:
            bounds.append(RateBound(share / time, name))
    if not bounds:
        raise MeasurementError("the RF settles before the command's edges, so that nothing bounds the rate")
    return min(bounds, key=_rate)


def _none_holds(rating: Rating, found: float, where: str) -> MeasurementError:
    unit = rating.unit
    return MeasurementError(
        f"rating {rating.name} is exceeded {where}: {format_quantity(found, unit)},"
        f" at most {format_quantity(rating.max, unit)}"
    )
