"""The usual cautions where a design works with voltages or RF powers that can hurt."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from transim.design.model import Design, Driver
from transim.quantities import format_quantity
from transim.report.layout import wrap
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = ["caution_lines", "cautions", "highest_bias", "highest_level"]

#: Above these [V], [dBm] a design gets its cautions; 30 dBm is 1 W.
_BIAS = 50.0
_LEVEL = 30.0


def cautions(outcome: Outcome) -> tuple[str, ...]:
    """Return the cautions that a run calls for.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    tuple of str
        A sentence or two each; none where the bias stays within 50 V and the RF within 1 W.
    """
    bias, level = highest_bias(outcome.design, outcome.results), highest_level(outcome.design)
    found = []
    if bias > _BIAS:
        found.append(
            f"Bias up to {format_quantity(bias, 'V', 3)}: capacitors and chokes keep stored energy after switch-off."
            " Give it a discharge path and an interlock, and measure before touching."
        )
    if level > _LEVEL:
        watts = format_quantity(1e-3 * 10.0 ** (level / 10.0), "W", 3)
        found.append(
            f"RF of {watts}: it burns skin and can exceed exposure limits. Terminate every port, keep covers closed,"
            " and do not radiate outside a licence."
        )
    if found:
        found.append("Local electrical codes and licensed practice decide; these figures do not replace them.")
    return tuple(found)


def caution_lines(outcome: Outcome) -> list[str]:
    """Write the cautions as a block of text.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        Empty where there are none.
    """
    found = cautions(outcome)
    return ["Caution", *(line for text in found for line in wrap(text, "  "))] if found else []


def highest_bias(design: Design, results: Sequence[Result] = ()) -> float:
    """Return the highest voltage of a design that is no RF.

    Parameters
    ----------
    design : Design
        The design.
    results : sequence of Result
        Of its run, if any.

    Returns
    -------
    float
        Largest of the supplies, also from one to another or to ground, of the voltages that set a driver's
        output, and of the simulated reverse voltages of the junctions [V].
    """
    reverse = (result.figures["junction_reverse"].value for result in results if "junction_reverse" in result.figures)
    simulated = [value for value in reverse if value is not None]
    return max(0.0, *(_driver_bias(driver) for driver in design.drivers), *simulated)


def highest_level(design: Design) -> float:
    """Return the highest RF level of a design.

    Parameters
    ----------
    design : Design
        The design.

    Returns
    -------
    float
        Available power of the source [dBm].
    """
    return max(_several(design.carrier.level))


def _driver_bias(driver: Driver) -> float:
    rails = [0.0, *(driver.values[supply.name] for supply in driver.part.supplies)]
    outputs = [abs(driver.values[p.name]) for p in driver.part.parameters if p.unit == "V"]
    return max(max(rails) - min(rails), *outputs, 0.0)


def _several(level: float | Iterable[float]) -> Iterable[float]:
    return level if isinstance(level, Iterable) else (level,)
