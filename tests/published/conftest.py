"""The engine that every test in this folder runs its decks on."""

import pytest

from transim.engine import Engine, find_engine


@pytest.fixture(scope="session")
def engine() -> Engine:
    """Return the ngspice on PATH."""
    return find_engine()
