"""What one run of the engine may take of the machine: processor time, memory, and the size of its files."""

from __future__ import annotations

import contextlib
import math
import resource

__all__ = ["FILE_LIMIT", "LOG_ROOM", "MEMORY_LIMIT", "bound_process"]

#: Address space of the process [bytes]: samples go to the raw file as they come, so that a circuit needs far less.
MEMORY_LIMIT = 4 * 2**30
#: Size of any one file that it writes [bytes].
FILE_LIMIT = 4 * 2**30
#: Size of what it prints on one stream [bytes], after which it is stopped; a listing of 1e6 lines is some 60 MB.
LOG_ROOM = 256 * 2**20


def bound_process(pid: int, timeout: float) -> None:
    """Set the limits of a process that has just been started; its children inherit them.

    Parameters
    ----------
    pid : int
        The process.
    timeout : float
        Its longest wall time [s]. Its processor time gets two seconds more, so that it ends even where nobody is
        left to stop it.

    Notes
    -----
    From outside, by ``prlimit`` of Linux: code run between fork and exec could deadlock beside threads. Elsewhere
    only wall time and log are bounded.
    """
    if not hasattr(resource, "prlimit"):
        return
    seconds = math.ceil(timeout) + 2
    for kind, amount in (
        (resource.RLIMIT_CPU, seconds),
        (resource.RLIMIT_AS, MEMORY_LIMIT),
        (resource.RLIMIT_FSIZE, FILE_LIMIT),
        (resource.RLIMIT_CORE, 0),
    ):
        # the process may have ended already; a lower limit that was set for this program itself stays
        with contextlib.suppress(OSError, ValueError):
            hard = resource.prlimit(pid, kind)[1]
            bound = amount if hard == resource.RLIM_INFINITY else min(amount, hard)
            resource.prlimit(pid, kind, (bound, bound))
