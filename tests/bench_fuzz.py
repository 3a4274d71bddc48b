"""Thousands of mutated files: how many are read, how many are refused with their place, and how long the slowest takes.

Run by hand: ``python tests/bench_fuzz.py [SEED]``. Anything else than these two outcomes is printed with its file and
counted as a failure; so is a file that takes more than 10 s of processor time.
"""

from __future__ import annotations

import collections
import signal
import sys
import tempfile
import time
import traceback
from collections.abc import Callable
from pathlib import Path

from hypothesis import HealthCheck, Phase, given, seed, settings
from hypothesis import strategies as st

sys.path.insert(0, str(Path(__file__).parents[1]))

from tests.mutations import mutated_designs, mutated_parts, mutated_raw, mutated_records
from tests.outcomes import design_outcome, part_outcome, raw_outcome, record_outcome

LONGEST = 10


def _too_long(*_: object) -> None:
    raise TimeoutError(f"more than {LONGEST} s of processor time")


def count(name: str, number: int, strategy: st.SearchStrategy[object], outcome: Callable[..., str], start: int) -> int:
    """Draw files of one kind and print what became of them; return the number of failures."""
    found: collections.Counter[str] = collections.Counter()
    slowest = 0.0

    @seed(start)
    @settings(
        max_examples=number, deadline=None, database=None, phases=[Phase.generate], suppress_health_check=list(HealthCheck)
    )
    @given(strategy)
    def each(drawn: object) -> None:
        nonlocal slowest
        begun = time.process_time()
        signal.setitimer(signal.ITIMER_PROF, LONGEST)
        try:
            found[outcome(drawn)] += 1
        except Exception:  # noqa: BLE001 - whatever it is, it is counted and shown
            found["FAILED"] += 1
            print(f"--- {name}: {drawn!r}"[:1500])
            traceback.print_exc(limit=-3)
        finally:
            signal.setitimer(signal.ITIMER_PROF, 0)
        slowest = max(slowest, time.process_time() - begun)

    each()
    print(f"{name:8} {sum(found.values()):5} files: {found['read']} read, {found['refused']} refused with their place, "
          f"{found['FAILED']} failed; slowest {slowest:.2f} s", flush=True)
    return found["FAILED"]


def run(start: int) -> int:
    """Run all kinds; return the number of failures."""
    # processor time: a busy machine is no hang
    signal.signal(signal.SIGPROF, _too_long)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        return sum(
            (
                count("design", 2000, mutated_designs(), lambda text: design_outcome(folder, text), start),
                count("part", 500, mutated_parts(), lambda part: part_outcome(folder, *part), start),
                count("raw", 500, mutated_raw(folder), lambda content: raw_outcome(folder, content), start),
                count("record", 500, mutated_records(), lambda text: record_outcome(folder, text), start),
            )
        )


if __name__ == "__main__":
    sys.exit(1 if run(int(sys.argv[1]) if len(sys.argv) > 1 else 1) else 0)
