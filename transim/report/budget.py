"""Where time and charge of each edge go, in words and for a JSON document."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import Any

from transim.measure.account import ChargeAccount, needed_current
from transim.measure.budget import Budget
from transim.measure.limits import Judgement
from transim.quantities import format_quantity
from transim.report.layout import wrap
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = ["budget_document", "budget_lines", "charge_document", "edge_sentences"]

#: A carrier gets its own lines where its time, or a part's share of it, departs by more than this from the first.
_DIFFERENT = 0.1
#: Share of the charge on capacitances that is worth a word.
_MUCH = 0.2


def budget_lines(outcome: Outcome) -> list[str]:
    """Write where the time goes, for each driver and temperature.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        Of the first carrier and analysis, and of others only where they differ much; empty where nothing switches.
    """
    groups: dict[tuple[str, float], list[Result]] = {}
    for result in outcome.results:
        groups.setdefault((result.label, result.temperature), []).append(result)
    several = len(outcome.design.environment.temperature) > 1
    lines: list[str] = []
    for (driver, temperature), results in groups.items():
        place = f"{driver}, {format_quantity(temperature, 'degC', 12)}" if several else driver
        lines += _group(place, results)
    return ["Where the time goes, from the command to the RF", "", *lines] if lines else []


def _group(place: str, results: Sequence[Result]) -> Iterator[str]:
    told: dict[str, Budget] = {}
    for result in results:
        for metric, budget in result.budget.items():
            if metric in told and not _differs(budget, told[metric]):
                continue
            told.setdefault(metric, budget)
            at = format_quantity(result.carrier, "Hz", 12)
            first, *others = edge_sentences(result, metric)
            yield from wrap(f"{place} at {at}: {first}", "  ")
            for sentence in others:
                yield from wrap(sentence, "    ")


def _differs(budget: Budget, other: Budget) -> bool:
    if abs(budget.total - other.total) > _DIFFERENT * abs(other.total):
        return True
    mine, its = dict(budget.parts), dict(other.parts)
    if set(mine) != set(its):
        return False
    return any(abs(mine[name] - its[name]) > _DIFFERENT * abs(other.total) for name in mine)


def edge_sentences(result: Result, metric: str) -> list[str]:
    """Say where time and charge of an edge go.

    Parameters
    ----------
    result : Result
        Of a run.
    metric : {"on_time", "off_time"}
        A time that `Result.budget` has.

    Returns
    -------
    list of str
        The parts of the time; the charge with what became of it; the current that the limit takes; what could
        not be told apart.
    """
    budget, account = result.budget[metric], result.charge.get(metric)
    parts = ", ".join(
        f"{name} {format_quantity(seconds, 's', 3)}"
        + (f" ({100.0 * seconds / budget.total:.0f} %)" if budget.total > 0.0 else "")
        for name, seconds in budget.parts
    )
    found = [f"{metric} {format_quantity(budget.total, 's')} = {parts}"]
    if account is not None:
        found.append(_charge_sentence(account))
        found.append(_needed_sentence(account, budget, result.judgements))
    if budget.notes:
        found.append(f"not told apart: {'; '.join(budget.notes)}")
    return found


def _charge_sentence(account: ChargeAccount) -> str:
    def charge(value: float) -> str:
        return format_quantity(value, "C", 3)

    out = account.delivered >= 0.0
    sign = 1.0 if out else -1.0
    stored, others = sign * account.stored, sign * account.displaced
    junctions = "the junctions store" if out else "the junctions give up"
    where = "onto" if out else "from"
    return (
        f"the driver {'delivers' if out else 'removes'} {charge(sign * account.delivered)}, on average"
        f" {format_quantity(sign * account.mean_current, 'A', 3)} once the junction current has turned: {junctions}"
        f" {charge(stored)}, {charge(account.recombined)} recombine, {charge(others)} go {where} capacitances;"
        f" the account closes within {100.0 * max(account.closing_share, 1e-4):.2g} %"
    )


def _needed_sentence(account: ChargeAccount, budget: Budget, judgements: Sequence[Judgement]) -> str:
    limit = next((j.max for j in judgements if j.metric == budget.metric and j.max is not None), None)
    wanted = budget.total / 2.0 if limit is None else limit
    named = "half this time" if limit is None else f"the limit of {format_quantity(limit, 's')}"
    current = needed_current(account, budget, wanted)
    fixed = format_quantity(budget.fixed, "s", 3)
    if current is None:
        return f"no current meets {named}: {fixed} pass before the junction current has turned"
    left = wanted - budget.fixed
    moved = format_quantity(current * left, "C", 3)
    verb = "removing" if account.delivered < 0.0 else "delivering"
    text = (
        f"{verb} {moved} in the {format_quantity(left, 's', 3)} that {named} leaves takes"
        f" {format_quantity(current, 'A', 3)}"
    )
    if abs(account.displaced) > _MUCH * abs(account.delivered):
        share = abs(account.displaced / account.delivered)
        text += f"; capacitances take {100.0 * share:.0f} % of the charge: a smaller bypass or DC block would help"
    return text


def budget_document(budgets: Mapping[str, Budget]) -> dict[str, Any]:
    """Return the budgets of a result.

    Parameters
    ----------
    budgets : mapping of str to Budget
        By metric.

    Returns
    -------
    dict
        By metric: ``total`` and ``parts`` [s], which add up to it, and ``notes``.
    """
    return {
        metric: {
            "total": budget.total,
            "parts": [{"name": name, "seconds": seconds} for name, seconds in budget.parts],
            "notes": list(budget.notes),
        }
        for metric, budget in budgets.items()
    }


def charge_document(result: Result) -> dict[str, Any]:
    """Return the charge accounts of a result.

    Parameters
    ----------
    result : Result
        Of a run.

    Returns
    -------
    dict
        By metric: charges [C], positive out of the driver, the closing error [C], the mean current [A] and, where
        the design limits the time, the current that meets the limit [A].
    """
    found = {}
    for metric, account in result.charge.items():
        limit = next((j.max for j in result.judgements if j.metric == metric and j.max is not None), None)
        needed = None if limit is None else needed_current(account, result.budget[metric], limit)
        found[metric] = {
            "delivered": account.delivered,
            "stored": account.stored,
            "recombined": account.recombined,
            "displaced": account.displaced,
            "closing": account.closing,
            "mean_current": account.mean_current,
            "limit": limit,
            "needed_current": needed,
        }
    return found
