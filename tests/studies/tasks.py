"""What the workers of these tests compute: plain arithmetic, and ways to die."""

import os
import signal
import time
from pathlib import Path

from transim.errors import EngineNotFound


def square(common, argument):
    return common["offset"] + argument**2


def slow_square(common, argument):
    time.sleep(0.02 * (argument % 3))
    return square(common, argument)


def dies_once(common, argument):
    """Die by SIGKILL the first time that certain arguments are met."""
    marker = Path(common["folder"]) / str(argument)
    if argument in common["deadly"] and not marker.exists():
        marker.write_text("")
        os.kill(os.getpid(), signal.SIGKILL)
    return argument**2


def always_dies(common, argument):
    if argument in common["deadly"]:
        os.kill(os.getpid(), signal.SIGKILL)
    return argument**2


def breaks(common, argument):
    if argument == common["break_at"]:
        raise ZeroDivisionError("no such value")
    return argument**2


def stops(common, argument):
    if argument == common["stop_at"]:
        raise EngineNotFound("no ngspice here")
    return argument**2


class Stillborn:
    """Kills the process that unpickles it."""

    def __reduce__(self):
        return os._exit, (7,)


def threads(_common, _argument):
    return os.environ.get("OPENBLAS_NUM_THREADS"), os.environ.get("OMP_NUM_THREADS")
