"""What ngspice printed: the lines that matter, and the failure that they tell of.

The texts are those of ngspice 39. Its exit status is no guide: a deck with a ``.control`` block exits 0 after
an aborted analysis, and then ``write`` stores the plot of some earlier one.
"""

from __future__ import annotations

import re
from dataclasses import dataclass

__all__ = ["Failure", "find_failure", "log_tail", "warnings_in"]

TAIL_LINES = 12

_STATISTICS = re.compile(
    r"^(Total (analysis|elapsed) time|Total DRAM|DRAM currently|(Maximum|Current) ngspice program size"
    r"|(Shared ngspice|Text \(code\)|Library) pages|Stack = |ngspice-\d+ done|Note: No compatibility mode"
    r"|Note: no resource usage|or no active circuit|\s*$)"
)
_STEPPING = re.compile(r"^(Trying gmin|Supplies reduced|Note: One successful|Warning: Further gmin)")


@dataclass(frozen=True)
class Failure:
    """One failure that ngspice reported.

    Parameters
    ----------
    message : str
        What happened and what to change.
    converged : bool
        False where there was no solution; True where the deck itself was refused.
    time : float or None
        Time at which a transient was given up [s], to the six digits that are printed.
    """

    message: str
    converged: bool
    time: float | None = None


def log_tail(log: str) -> str:
    """Return the last lines of a log without statistics, stepping chatter and repetitions."""
    lines = (line.strip() for line in log.splitlines())
    kept = dict.fromkeys(line for line in lines if not _STATISTICS.match(line) and not _STEPPING.match(line))
    return "\n".join(list(kept)[-TAIL_LINES:])


def warnings_in(errors: str) -> tuple[str, ...]:
    """Return the warnings on standard error that a run may survive, each once, in one line each."""
    chatter = re.compile(r"Warning: (Further|Last|Dynamic|True) gmin|Warning: (gmin|source) step")
    # An indented or a bare "... - ignored" line belongs to the warning above it.
    joined = re.sub(r"\n(?=[ \t]+\S|[^\n]* - ignored)", " ", errors)
    found = re.findall(r"[Ww]arning ?[:,].*", joined)
    return tuple(dict.fromkeys(" ".join(text.split()) for text in found if not chatter.match(text)))


def find_failure(errors: str) -> Failure | None:
    """Return the failure that standard error tells of.

    Parameters
    ----------
    errors : str
        What ngspice printed on standard error; standard output repeats the title and is not looked at.

    Returns
    -------
    Failure or None
        None where nothing in the text is a failure; warnings are none.
    """
    # A missing vector is often only what an aborted analysis leaves, so convergence comes first.
    abort = _NO_SOLUTION.search(errors)
    if abort is not None:
        message = _no_solution(abort["analysis"], abort["detail"], errors)
        given_up = re.search(r"; time = ([-+.\deE]+)", abort["detail"])
        return Failure(message, converged=False, time=float(given_up[1]) if given_up else None)
    for pattern, message in _REJECTIONS:
        match = pattern.search(errors)
        if match is not None:
            found = match.groupdict(default="")
            words = {name: " ".join(text.split()).rstrip(".") for name, text in found.items()}
            return Failure(message.format(**words), converged=True)
    return None


_NO_SOLUTION = re.compile(
    r"doAnalyses:\s*(?:(?P<analysis>[A-Z]+):\s*)?"
    r"(?P<detail>[^\n]*(?:timestep too small|iteration limit|singular|no convergence|not converge)[^\n]*)",
    re.IGNORECASE,
)


def _no_solution(analysis: str | None, detail: str, errors: str) -> str:
    at_start = analysis in ("OP", "AC") or "initial timepoint" in detail
    what = "no operating point was found" if at_start else "no solution was found"
    trouble = re.search(r"trouble with ([^\n]+)", detail)
    if trouble is not None:
        what += f" (trouble with {trouble[1].strip()})"
    sweep = re.search(r";\s+(\S+ = \S+): ", detail)
    if analysis == "DC" and sweep is not None:
        what += f" at {sweep[1]}"
    # In a transient that went on for a while the warning is of the start, and was overcome.
    singular = re.search(r"singular matrix:\s+check nodes? (\S+)", errors)
    if singular is not None and "; time =" not in detail:
        return f"{what}: the matrix is singular at {_singular_at(singular[1])}"
    if "; time =" in detail:
        return (
            f"{what}: the time step became too small; relax reltol, give the switching edges a longer rise "
            "time, or add a small capacitance where the trouble is"
        )
    return f"{what}; check the bias of that part, or a controlled source that contradicts itself"


def _singular_at(node: str) -> str:
    element, branch, _ = node.partition("#branch")
    if branch:
        return (
            f"the current of {element}; look for a loop of voltage sources and inductors, "
            "and add a small resistance in it"
        )
    return f"node {node}; look for a node without a DC path to ground, and add a large resistance from it"


_REJECTIONS: tuple[tuple[re.Pattern[str], str], ...] = tuple(
    (re.compile(pattern), message)
    for pattern, message in (
        (
            r"can't allocate \d+ bytes",
            "it needed more memory than a run may take; let the circuit be smaller, or the run shorter",
        ),
        (
            r"[Cc]ould not find include file (?P<file>[^\n]+)",
            "the include file {file} was not found; give its full path",
        ),
        (
            r"can't find model '(?P<model>[^']+)'(?: from line\n(?P<line>[^\n]+))?",
            "there is no .model '{model}' (used in '{line}'); add its card or correct the name",
        ),
        (
            r"unknown subckt: (?P<line>[^\n]+)",
            "the subcircuit in '{line}' is unknown; add its .subckt or correct the name",
        ),
        (
            r"Too (?P<how>few|many) parameters for subcircuit type \"(?P<sub>[^\"]+)\""
            r" \(instance: x(?P<name>[^)]+)\)",
            "{name} has too {how} nodes for subcircuit {sub}; compare it with the .subckt line",
        ),
        (r"Mismatch of \.subckt", "a .subckt has no .ends, or the reverse; complete the pair"),
        (
            r"line no\. (?P<number>\d+):\s*Undefined parameter \[(?P<name>[^]]+)\]",
            "parameter '{name}' on line {number} has no value; define it with .param or on the .subckt line",
        ),
        (
            r"Error: no such function '(?P<name>[^']+)'",
            "there is no function '{name}' in expressions; define it with .func or correct the name",
        ),
        (
            r"Fatal error: (?P<element>\S+): unknown controlling source (?P<source>\S+)",
            "{element} is controlled by {source}, which is not in the deck; add that voltage source",
        ),
        (
            r"Error on line (?P<number>\d+) or its substitute:\n(?P<line>[^\n]+)\n(?P<reason>[^\n]+)",
            "line {number} '{line}' was refused: {reason}; correct it",
        ),
        (
            r"Error: no data saved for (?P<analysis>[^;\n]+)",
            "the .save cards name no vector that exists for the {analysis}; correct them",
        ),
        (
            r"(?P<command>\S+): no such command available in ngspice",
            "the .control block has the unknown command '{command}'; correct it",
        ),
        (
            r"Error: no such device or model name (?P<name>\S+)",
            "the .control block names {name}, which is not in the deck; correct the name",
        ),
        (
            r"vector (?P<name>\S+) is not available or has zero length",
            "the .control block asks for {name}, which does not exist; save it or correct the name",
        ),
        (r"Error: no such vector (?P<name>\S+)", "the .control block asks for {name}, which does not exist"),
        (
            r"doAnalyses: (?P<reason>[^\n]+)",
            "an analysis was aborted: {reason}; see what ngspice said",
        ),
        (
            r"simulation\(s\) aborted|circuit not parsed|there aren't any circuits loaded"
            r"|fatal error in ngspice",
            "the deck was refused; see what ngspice said",
        ),
    )
)
