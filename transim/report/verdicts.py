"""What stands around the figures of a run: its definitions before them, the verdicts after them."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace

from transim.measure.definitions import Definitions
from transim.measure.limits import Judgement, Verdict
from transim.measure.metrics import METRICS
from transim.quantities import format_quantity
from transim.report.layout import wrap
from transim.report.ratings import first_results
from transim.report.tables import limit_text, verdict_word
from transim.study.result import Result
from transim.study.run import Outcome

__all__ = [
    "closest_sentence",
    "counts_sentence",
    "definition_lines",
    "head_lines",
    "joined_verdict",
    "overall_sentence",
    "verdict_lines",
]

_LEVELS = {"voltage": "-20 and -0.915 dB", "power": "-10 and -0.458 dB"}
_REFERENCES = {"static": "static on state", "end_of_pulse": "end of the on interval"}
#: Smaller differences to ngspice's AC analysis are not worth their digits [dB].
_SMALLEST = 1e-3


def definition_lines(definitions: Definitions) -> list[str]:
    """State what the figures are counted from.

    Parameters
    ----------
    definitions : Definitions
        Of the design.

    Returns
    -------
    list of str
        Two sentences, the first with basis and reference: without them a switching time says nothing.
    """
    video = definitions.video_bandwidth
    seen = "unfiltered" if video is None else f"through one pole at {format_quantity(video, 'Hz')}"
    band, phase = format_quantity(definitions.settle_band, "dB"), format_quantity(definitions.phase_band, "deg")
    return [
        f"Levels: 10 and 90 % of RF {definitions.basis} ({_LEVELS[definitions.basis]});"
        f" 100 % is the {_REFERENCES[definitions.reference]}.",
        f"Times from the command's 50 % points; settled within {band}, {phase}; off at"
        f" {format_quantity(definitions.isolation_level, 'dB')};"
        f" video leakage {seen}, in band per {format_quantity(definitions.resolution_bandwidth, 'Hz')}.",
    ]


def head_lines(outcome: Outcome) -> list[str]:
    """Write what was run, and by which definitions.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        Title, then engine, analyses and temperatures, then definitions.
    """
    design = outcome.design
    analyses = " and ".join(dict.fromkeys(result.analysis for result in outcome.results))
    degrees = ", ".join(format_quantity(value, "degC", 12) for value in design.environment.temperature)
    return [
        *wrap(design.title),
        *wrap(f"{outcome.engine}; {analyses} analysis; {degrees}; design file {design.source.path.name}"),
        *(line for sentence in definition_lines(design.definitions) for line in wrap(sentence)),
        *(wrap(f"{outcome.certified}.") if outcome.certified else ()),
    ]


def verdict_lines(outcome: Outcome) -> list[str]:
    """Write the verdict on each driver with its ground, and the verdict on all.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    list of str
        A block a driver: verdict, worst limit, faults, how the envelope was found. The last line is the
        verdict on the whole run.
    """
    lines = []
    for driver in dict.fromkeys(case.driver for case in outcome.cases):
        results = [result for result in outcome.results if result.driver == driver]
        lines += [*_driver(driver, results, joined_verdict(results)), ""]
    return [*lines, *_hold_off(outcome), *wrap(overall_sentence(outcome))]


def _hold_off(outcome: Outcome) -> list[str]:
    """Say where a model's own hold-off differs from the relation, if a figure of the relation is shown."""
    figures = (result.figures.get("holdoff_bias_margin") for result in outcome.results)
    if not any(figure is not None and figure.value is not None for figure in figures):
        return []
    parts = {junction.part.name: junction.part for junction in outcome.design.switch.junctions.values()}
    lines = []
    for name, part in parts.items():
        if any(note.startswith("Hold-off") for note in part.notes):
            said = f"holdoff_bias_margin is by the published relation; {name} lets go later, see its notes"
            lines += [*wrap(said), ""]
    return lines


def joined_verdict(results: Sequence[Result]) -> Verdict:
    """Return the verdict over several results.

    Parameters
    ----------
    results : sequence of Result
        The results.

    Returns
    -------
    {"pass", "fail", "undefined"}
        Fail if any fails, else undefined if any is undefined, else pass.
    """
    found = {result.verdict for result in results}
    if "fail" in found:
        return "fail"
    return "undefined" if "undefined" in found else "pass"


def overall_sentence(outcome: Outcome) -> str:
    """Write the verdict on the whole run, and which drivers it is due to.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.

    Returns
    -------
    str
        For example ``Verdict: PASS; every limit is met``.
    """
    results: dict[str, list[Result]] = {}
    for result in outcome.results:
        results.setdefault(result.driver, []).append(result)
    verdicts = {driver: joined_verdict(own) for driver, own in results.items()}
    if not outcome.design.limits and not any(result.ratings for result in outcome.results):
        return f"Verdict: {outcome.verdict.upper()}; the design sets no limits"
    same = [driver for driver, verdict in verdicts.items() if verdict == outcome.verdict]
    what = {
        "pass": "every limit is met",
        "fail": f"a limit is missed by {', '.join(same)}",
        "undefined": f"a limit cannot be judged for {', '.join(same)}",
    }
    good = [driver for driver, verdict in verdicts.items() if verdict == "pass"]
    also = f"; every limit is met by {', '.join(good)}" if good and outcome.verdict != "pass" else ""
    return f"Verdict: {outcome.verdict.upper()}; {what[outcome.verdict]}{also}"


def _driver(driver: str, results: Sequence[Result], verdict: Verdict) -> Iterator[str]:
    judged = _pairs(results)
    counts = counts_sentence(results)
    yield from wrap(f"{driver}: {verdict.upper()}; {counts}" if judged else f"{driver}: {counts}")
    several = len({result.temperature for result in results}) > 1
    places = {id(result): _place(result, several) for result in results}
    closest = closest_sentence(results)
    if closest is not None:
        yield from wrap(closest, "  ")
    for result, judgement in judged:
        if judgement.verdict == "undefined":
            # a value that is too uncertain has its reason in the judgement, as a rating has
            note = judgement.note or result.figures[judgement.metric].note
            yield from wrap(f"undefined: {judgement.metric} {_where(judgement, places[id(result)])}, {note}", "  ")
    yield from _remarks(results, places)
    # the slowest throw decides on the method of all
    plain = [replace(result, throw="") for result in results]
    methods = {f"{result.analysis} at {_place(result, several)}": result.method for result in plain}
    for place, method in methods.items():
        yield from wrap(f"{place}: {method}", "  ")
    checks = [result.check for result in results if result.check is not None]
    if checks:
        found = f"by {format_quantity(max(checks), 'dB', 2)} at most" if max(checks) > _SMALLEST else ""
        found = found or f"by less than {format_quantity(_SMALLEST, 'dB')}"
        yield from wrap(f"check: S differs from ngspice's own .ac at the same biases {found}", "  ")


def _remarks(results: Sequence[Result], places: Mapping[int, str]) -> Iterator[str]:
    """Write faults, warnings and notes with the place of each, and what needed a second try."""
    for word, name in (("fault", "faults"), ("warning", "warnings"), ("note", "notes")):
        for result in results:
            for text in getattr(result, name):
                yield from wrap(f"{word} at {places[id(result)]}: {text}", "  ")
    for retry in dict.fromkeys(retry for result in results for retry in result.retries):
        yield from wrap(f"second try: {retry}", "  ")


def counts_sentence(results: Sequence[Result]) -> str:
    """Count how many limits and ratings are met, missed and undefined.

    Parameters
    ----------
    results : sequence of Result
        Of one driver.

    Returns
    -------
    str
        For example ``limits met 3, missed 1; ratings met 4``.
    """
    judged = _pairs(results)
    limits = [pair for pair in judged if pair[1].unit is None]
    ratings = [pair for pair in judged if pair[1].unit is not None]
    counts = [f"{name} {_counted(pairs)}" for name, pairs in (("limits", limits), ("ratings", ratings)) if pairs]
    return "; ".join(counts) or "no limits to judge"


def closest_sentence(results: Sequence[Result]) -> str | None:
    """Write which limit is missed most, or is met with the least margin, as a share of the limit.

    Parameters
    ----------
    results : sequence of Result
        Of one driver.

    Returns
    -------
    str or None
        None where nothing can be judged.
    """
    several = len({result.temperature for result in results}) > 1
    known = [pair for pair in _pairs(results) if pair[1].margin is not None and not pair[0].faults]
    if not known:
        return None
    result, judgement = min(known, key=lambda pair: _relative(pair[1]))
    return _margin(judgement, _where(judgement, _place(result, several)))


def _pairs(results: Sequence[Result]) -> list[tuple[Result, Judgement]]:
    """Return every limit with its result, then every rating once: it does not depend on the carrier."""
    limits = [(result, judgement) for result in results for judgement in result.judgements]
    return [*limits, *((result, rating) for result in first_results(results) for rating in result.ratings)]


def _counted(pairs: Sequence[tuple[Result, Judgement]]) -> str:
    words = [verdict_word(result, judgement) for result, judgement in pairs]
    return ", ".join(f"{text} {words.count(word)}" for word, text in _COUNTED.items() if words.count(word))


def _where(judgement: Judgement, place: str) -> str:
    return f"at {place}" if judgement.unit is None else "without RF"


_COUNTED = {"PASS": "met", "FAIL": "missed", "UNDEFINED": "undefined"}


def _carrier(result: Result) -> str:
    on = f" on {result.throw}" if result.throw else ""
    return f"{format_quantity(result.carrier, 'Hz', 12)}{on}"


def _place(result: Result, several: bool) -> str:
    place = _carrier(result)
    return f"{place} and {format_quantity(result.temperature, 'degC', 12)}" if several else place


def _bound(judgement: Judgement) -> float:
    """Return the bound that the margin is counted from."""
    value, low, high = judgement.value, judgement.min, judgement.max
    if value is None or (low is None and high is None):
        return math.nan
    if low is None or high is None:
        return float(high if low is None else low)  # type: ignore[arg-type]
    return low if value - low <= high - value else high


def _relative(judgement: Judgement) -> float:
    """Return the margin as a share of its bound, which makes limits of all units comparable."""
    margin, bound = judgement.margin or 0.0, abs(_bound(judgement))
    return margin / bound if bound > 0.0 else math.copysign(math.inf, margin) if margin else 0.0


def _margin(judgement: Judgement, place: str) -> str:
    unit = judgement.unit or METRICS[judgement.metric].unit
    value, margin = judgement.value or 0.0, judgement.margin or 0.0
    share = _relative(judgement)
    percent = f" ({abs(100.0 * share):.3g} %)" if math.isfinite(share) and unit not in ("dB", "dBm") else ""
    word = "worst" if margin < 0.0 else "closest"
    side = "outside" if margin < 0.0 else "inside"
    return (
        f"{word}: {judgement.metric} {place} is {format_quantity(value, unit)}, that is"
        f" {format_quantity(abs(margin), unit)}{percent} {side} its limit of {limit_text(judgement)}"
    )
