"""Networks reduced to their changing entries, against the whole system solved by numpy (LAPACK's Gaussian elimination)."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from transim.envelope import reduction as module
from transim.envelope.network import Delay, Network
from transim.envelope.reduction import Reduction
from transim.errors import LinearisationError

OMEGA = 2j * np.pi * 1e8


def random_network(seed, size, entries, points):
    """Return a network whose rows are as unlike in scale as node and branch equations are, with entries that change."""
    chance = np.random.default_rng(seed)
    places = chance.choice(size * size, size=entries, replace=False)
    pattern = chance.random((size, size)) < 0.3
    scale = 10.0 ** chance.uniform(-3.0, 3.0, size)
    g = np.where(pattern, chance.normal(size=(size, size)), 0.0)
    # every equation has an unknown of its own, so that the whole is solvable at all times
    g += np.diag(chance.uniform(5.0, 10.0, size))
    c = np.where(pattern, chance.normal(size=(size, size)), 0.0) * 1e-10
    return Network(
        {f"v:n{k}": k for k in range(size)},
        scale[:, None] * g,
        scale[:, None] * c,
        places // size,
        places % size,
        scale[places // size] * chance.uniform(-1.0, 1.0, (points, entries)),
        scale[places // size] * chance.uniform(-1e-10, 1e-10, (points, entries)),
        np.arange(points, dtype=float),
    )


def whole(network, right, omega):
    matrices = np.repeat(network.constant(omega)[None], network.time.size, axis=0)
    matrices[:, network.rows, network.columns] += network.varying_g + omega * network.varying_c
    return np.linalg.solve(matrices, right)


@settings(deadline=None, max_examples=60)
@given(st.integers(0, 10**6), st.integers(2, 24), st.integers(0, 12), st.integers(1, 9))
def test_every_unknown_is_that_of_the_whole_system(seed, size, entries, points):
    network = random_network(seed, size, min(entries, size * size), points)
    right = np.eye(size, 2, dtype=complex)
    found = Reduction(network, OMEGA).solve(network, right, OMEGA)
    expected = whole(network, right, OMEGA)
    assert found == pytest.approx(expected, rel=1e-9, abs=1e-10 * np.abs(expected).max())


def test_only_what_changing_entries_touch_is_solved_at_every_point(monkeypatch):
    network = random_network(5, 30, 6, 40)
    sizes = []
    original = module.solve_linear

    def spied(matrices, right):
        sizes.append(matrices.shape)
        return original(matrices, right)

    monkeypatch.setattr(module, "solve_linear", spied)
    Reduction(network, OMEGA).solve(network, np.eye(30, 2, dtype=complex), OMEGA)
    touched = max(len(set(network.rows.tolist())), len(set(network.columns.tolist())))
    assert (40, touched, touched) in sizes
    assert (40, 30, 30) not in sizes


def test_wanted_unknowns_come_in_their_order():
    network = random_network(7, 12, 5, 6)
    right = np.eye(12, 3, dtype=complex)
    every = Reduction(network, OMEGA).solve(network, right, OMEGA)
    wanted = np.array([11, 0, 4])
    assert Reduction(network, OMEGA).solve(network, right, OMEGA, wanted) == pytest.approx(every[:, wanted])


def test_the_choice_serves_other_times_and_carriers():
    network = random_network(9, 16, 7, 20)
    right = np.eye(16, 2, dtype=complex)
    reduction = Reduction(network, OMEGA)
    some = network.at(np.array([3, 17]))
    for omega in (OMEGA, 1.001 * OMEGA, 20.0 * OMEGA):
        assert reduction.solve(some, right, omega) == pytest.approx(whole(some, right, omega), rel=1e-9)


def test_where_elimination_loses_digits_the_whole_system_is_solved(monkeypatch):
    network = random_network(11, 16, 5, 8)
    right = np.eye(16, 2, dtype=complex)
    expected = whole(network, right, OMEGA)
    original = module._Eliminated.solve

    def spoiled(self, points, wanted):
        # only where something is eliminated
        return original(self, points, wanted) * (1.0 + 1e-6 * (self._choice.rows.size > 0))

    monkeypatch.setattr(module._Eliminated, "solve", spoiled)
    assert Reduction(network, OMEGA).solve(network, right, OMEGA) == pytest.approx(expected, rel=1e-12)


def test_lines_count_in_the_constant_part():
    network = random_network(13, 10, 4, 5)
    lined = Network(**{**vars(network), "delays": (Delay(1, 2, 3.0, 1.3e-9), Delay(2, 1, -2.0, 0.7e-9))})
    right = np.eye(10, 2, dtype=complex)
    found = Reduction(lined, OMEGA).solve(lined, right, OMEGA)
    assert found == pytest.approx(whole(lined, right, OMEGA), rel=1e-9)
    assert np.abs(found - whole(network, right, OMEGA)).max() > 1e-3 * np.abs(found).max()


def test_a_singular_network_is_refused():
    network = random_network(15, 8, 3, 4)
    network.constant_g[5] = network.constant_c[5] = 0.0
    network.varying_g[:, network.rows == 5] = network.varying_c[:, network.rows == 5] = 0.0
    with pytest.raises(LinearisationError, match="singular"):
        Reduction(network, OMEGA).solve(network, np.eye(8, 2, dtype=complex), OMEGA)
