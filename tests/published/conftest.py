"""Parts under test: the engine, and the shipped part files as text for a deck of a test's own."""

import pytest

from transim.engine import Engine, find_engine
from transim.parts.catalogue import load_catalogue


@pytest.fixture(scope="session")
def engine() -> Engine:
    """Return the ngspice on PATH."""
    return find_engine()


@pytest.fixture(scope="session")
def body():
    """Return a function that gives the SPICE text of a shipped part."""
    catalogue = load_catalogue()

    def text(role: str, name: str) -> str:
        return catalogue.find(role, name).body.rstrip() + "\n"

    return text


@pytest.fixture
def transient(engine):
    """Return a function that runs a deck's transient and gives the plot."""

    def run(deck: str, stop: float, step: float, options: str = "reltol=1e-6"):
        text = f"* published\n{deck}.options {options} method=gear\n.save all\n.tran {step} {stop} 0 {step}\n.end\n"
        return engine.run(text, name="published", stop_time=stop).plots[0]

    return run
