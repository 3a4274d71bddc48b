"""Find ngspice, run a deck, read what it wrote."""

from transim.engine.ngspice import Engine, EngineRun, find_engine
from transim.engine.rawfile import Plot, read_raw, write_raw
from transim.engine.reference import SelfCheck, self_check

__all__ = ["Engine", "EngineRun", "Plot", "SelfCheck", "find_engine", "read_raw", "self_check", "write_raw"]
