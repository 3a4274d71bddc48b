"""The ways of the RF through a path, in words."""

from __future__ import annotations

from collections.abc import Iterator

from transim.parts.own import OWN_PATH
from transim.parts.part import Part

__all__ = ["throw_sentences"]


def throw_sentences(path: Part) -> Iterator[str]:
    """Say when the RF passes which way, and what feeds the bias entries.

    Parameters
    ----------
    path : Part
        Of role path.

    Yields
    ------
    str
        A sentence a throw, then one on the drivers.
    """
    several = len(path.throws) > 1
    for throw in path.throws:
        # of a user's own netlist nobody has said what the bias does to its junctions
        state = f": {'forward' if path.forward(throw) else 'no forward'} bias at {throw.bias}" * (path.name != OWN_PATH)
        way = f"throw {throw.name}, from {throw.through[0]} to {throw.through[1]}, passes"
        yield (
            f"{way if several else f'RF passes from {throw.through[0]} to {throw.through[1]}'} while the command is "
            f"{'high' if throw.passes_high else 'low'}{state}"
        )
    if len(path.bias) == 1 and not path.inverted:
        yield "a driver feeds the bias entry"
        return
    entries = (f"{entry} (inverted command)" if entry in path.inverted else entry for entry in path.bias)
    yield f"each bias entry has a driver of its own, of the same kind: {', '.join(entries)}"
