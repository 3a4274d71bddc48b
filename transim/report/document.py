"""The JSON documents of the commands: SI units, versioned, and no number that is not finite.

Nothing heavy is imported here, so that an error is reported as fast as it is found.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import asdict
from typing import TYPE_CHECKING, Any

from transim.errors import TransimError

if TYPE_CHECKING:
    from transim.engine.ngspice import Engine
    from transim.engine.reference import SelfCheck
    from transim.measure.limits import Judgement, Limit
    from transim.measure.usable import Shortest
    from transim.parts.part import Parameter, Part
    from transim.study.result import Result
    from transim.study.run import Outcome

__all__ = [
    "FORMAT",
    "engine_document",
    "error_document",
    "json_text",
    "limit_document",
    "part_document",
    "run_document",
]

#: Version of the documents; it changes when a key changes its meaning or goes.
FORMAT = 1

Document = dict[str, Any]


def json_text(document: Mapping[str, Any]) -> str:
    """Write a document.

    Parameters
    ----------
    document : mapping
        Of what JSON has, and of numbers that may be NaN or infinite.

    Returns
    -------
    str
        JSON in ASCII, indented; what is no finite number is null.
    """
    return json.dumps(_finite(document), indent=2, allow_nan=False) + "\n"


def _finite(value: Any) -> Any:
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, Mapping):
        return {str(key): _finite(element) for key, element in value.items()}
    if isinstance(value, list | tuple):
        return [_finite(element) for element in value]
    return value


def error_document(error: TransimError) -> Document:
    """Return the document of a command that failed.

    Parameters
    ----------
    error : TransimError
        Why it failed.

    Returns
    -------
    dict
        ``errors`` with file, line, column, key and message of each; ``exit`` with the exit status.
    """
    return {"format": FORMAT, "errors": error.records(), "exit": error.exit_code}


def run_document(outcome: Outcome, seconds: float) -> Document:
    """Return the document of a run.

    Parameters
    ----------
    outcome : Outcome
        The run of a design.
    seconds : float
        Its wall time [s].

    Returns
    -------
    dict
        ``results`` holds one entry for each driver, temperature, carrier, level, throw and analysis.
    """
    from transim.report.cautions import cautions
    from transim.report.settled import settled_documents

    design = outcome.design
    return {
        "format": FORMAT,
        "title": design.title,
        "design": design.source.path.name,
        "engine": outcome.engine,
        "seconds": round(seconds, 3),
        "definitions": asdict(design.definitions),
        "certified": outcome.certified,
        "verdict": outcome.verdict,
        "cautions": list(cautions(outcome)),
        "results": [
            _result(result, case.throw(result.throw).shortest) for case in outcome.cases for result in case.results
        ],
        **settled_documents(outcome),
    }


def limit_document(limit: Limit | Judgement) -> Document:
    """Return a limit.

    Parameters
    ----------
    limit : Limit or Judgement
        With one bound or two.

    Returns
    -------
    dict
        Metric, and the bounds that it has in the metric's unit.
    """
    bounds = {"min": limit.min, "max": limit.max}
    return {"metric": limit.metric, **{name: bound for name, bound in bounds.items() if bound is not None}}


def _result(result: Result, shortest: Shortest | None) -> Document:
    from transim.report.budget import budget_document, charge_document
    from transim.report.pulses import first_document
    from transim.report.ratings import rates_document
    from transim.report.shortest import shortest_document
    from transim.report.tables import verdict_word

    limits = [
        {
            **limit_document(judgement),
            "value": judgement.value,
            "margin": judgement.margin,
            "verdict": verdict_word(result, judgement).lower(),
            # a rating is no metric: unit and reason stand here
            **({} if judgement.uncertainty is None else {"uncertainty": judgement.uncertainty}),
            **({"rating": True, "unit": judgement.unit, "note": judgement.note} if judgement.unit else {}),
        }
        for judgement in (*result.judgements, *result.ratings)
    ]
    return {
        "driver": result.driver,
        "throw": result.throw or None,
        "carrier": result.carrier,
        "temperature": result.temperature,
        "analysis": result.analysis,
        "level": result.level,
        "method": result.method,
        "check_db": result.check,
        "faults": list(result.faults),
        "warnings": list(result.warnings),
        "notes": list(result.notes),
        "retries": list(result.retries),
        "verdict": result.verdict,
        "metrics": {name: asdict(figure) for name, figure in result.figures.items()},
        "limits": limits,
        "switching_rate": rates_document(result.rates),
        "budget": budget_document(result.budget),
        "charge": charge_document(result),
        "first_pulse": first_document(result),
        "shortest": shortest_document(shortest),
    }


def engine_document(engine: Engine, origin: str, check: SelfCheck) -> Document:
    """Return the document of the engine that was found.

    Parameters
    ----------
    engine : Engine
        The ngspice.
    origin : str
        Why this one.
    check : SelfCheck
        Its self-test.

    Returns
    -------
    dict
        With the deviation of the self-test and its limit [V].
    """
    return {
        "format": FORMAT,
        "path": str(engine.path),
        "found": origin,
        "version": check.version,
        "self_test": {
            "passed": check.passed,
            "deviation": check.deviation,
            "limit": check.limit,
            "unit": "V",
            "seconds": check.seconds,
        },
    }


def part_document(part: Part) -> Document:
    """Return the description of one part.

    Parameters
    ----------
    part : Part
        The part.

    Returns
    -------
    dict
        Defaults and ranges in the unit of each parameter; an open end of a range is null.
    """
    return {
        "name": part.name,
        "role": part.role,
        "file": str(part.file),
        "summary": part.summary,
        "terminals": list(part.terminals),
        "supplies": [_parameter(supply) for supply in part.supplies],
        "parameters": [_parameter(parameter) for parameter in part.parameters],
        "ports": list(part.ports),
        "bias": list(part.bias),
        "throws": [asdict(throw) for throw in part.throws],
        "inverted": list(part.inverted),
        "slots": [asdict(slot) for slot in part.slots],
        "model_kinds": [] if part.model is None else [kind for place in part.model.places for kind in place.kinds],
        "notes": list(part.notes),
        "sources": list(part.sources),
    }


def _parameter(parameter: Parameter) -> Document:
    return {
        "name": parameter.name,
        "unit": parameter.unit,
        "default": parameter.default,
        "low": parameter.low,
        "low_open": parameter.low_open,
        "high": parameter.high,
        "meaning": parameter.meaning,
    }
