"""The order of elimination on trees of every shape, and what the sweeps see against a dense solve."""

import numpy as np
import pytest

from morphotone.cable.frustum import Pi
from morphotone.cable.sweeps import path_sums, schedule, sweep


def chain(n: int) -> np.ndarray:
    return np.arange(-1, n - 1)


def star(n: int) -> np.ndarray:
    return np.array([-1] + [0] * (n - 1))


def caterpillar(n: int) -> np.ndarray:
    """A spine of even nodes, each with a leg."""
    parent = np.arange(-1, n - 1)
    parent[2::2] = np.arange(0, n - 2, 2)
    return parent


def binary(n: int) -> np.ndarray:
    return np.append(-1, (np.arange(1, n) - 1) // 2)


def grown(n: int, key: int = 3) -> np.ndarray:
    """A forest: nodes that choose any earlier parent, now and then a new root."""
    rng = np.random.default_rng(key)
    parent = np.array([-1] + [int(rng.integers(max(0, i - 4), i)) for i in range(1, n)])
    parent[rng.random(n) < 0.03] = -1
    return parent


SHAPES = {"chain": chain, "star": star, "caterpillar": caterpillar, "binary": binary, "grown": grown}


@pytest.fixture(params=SHAPES)
def parent(request: pytest.FixtureRequest) -> np.ndarray:
    return SHAPES[request.param](61)


def admittances(n: int, key: int) -> tuple[Pi, np.ndarray]:
    rng = np.random.default_rng(key)
    pieces = Pi(*(10.0 ** rng.uniform(-3, 3, (n, 2)) for _ in range(3)))
    return pieces, np.where(rng.random((n, 2)) < 0.3, rng.random((n, 2)), 0.0)


def dense(parent: np.ndarray, pieces: Pi, load: np.ndarray, case: int) -> np.ndarray:
    """Return the nodal admittance matrix."""
    matrix = np.diag(load[:, case])
    for node, up in enumerate(parent):
        if up >= 0:
            axial, start, end = (part[node, case] for part in pieces)
            matrix[node, node] += axial + end
            matrix[up, up] += axial + start
            matrix[node, up] -= axial
            matrix[up, node] -= axial
    return matrix


def test_every_node_but_the_roots_is_eliminated_once(parent: np.ndarray) -> None:
    plan = schedule(parent)
    assert sorted(plan.order) == list(range(len(parent)))
    np.testing.assert_array_equal(plan.order[plan.place], np.arange(len(parent)))
    assert plan.roots == (parent < 0).sum()
    covered = [place for step in plan.steps for place in range(step.first, step.last)]
    assert covered == list(range(len(parent) - plan.roots))


def test_a_node_hangs_on_one_that_is_still_there(parent: np.ndarray) -> None:
    for step in schedule(parent).steps:
        assert (step.parent >= step.last).all()
        if step.child is not None:
            assert (step.child >= step.last).all()
            assert len(set(step.child)) == len(step.child)


def test_input_admittance_is_the_dense_inverse(parent: np.ndarray) -> None:
    pieces, load = admittances(len(parent), 5)
    load[parent < 0] += 0.5
    plan = schedule(parent)
    by_place = Pi(*(part[plan.order] for part in pieces))
    looks = sweep(plan, by_place, load[plan.order])
    far = by_place.start + looks.beyond
    toward = by_place.end + by_place.axial * far / (by_place.axial + far)
    toward[len(parent) - plan.roots :] = 0.0
    z_in = (1.0 / (looks.away + toward))[plan.place]
    for case in range(2):
        inverse = np.linalg.inv(dense(parent, pieces, load, case))
        np.testing.assert_allclose(z_in[:, case], np.diag(inverse), rtol=1e-9)


def test_the_sweep_leaves_its_arguments_alone(parent: np.ndarray) -> None:
    pieces, load = admittances(len(parent), 6)
    before = [part.copy() for part in (*pieces, load)]
    sweep(schedule(parent), pieces, load)
    for part, was in zip((*pieces, load), before, strict=True):
        np.testing.assert_array_equal(part, was)


def test_path_sums_are_sums_along_the_path(parent: np.ndarray) -> None:
    amount = np.random.default_rng(7).random((len(parent), 3))
    plan = schedule(parent)
    sums = path_sums(plan, amount[plan.order])[plan.place]
    expected = np.zeros_like(amount)
    for node, up in enumerate(parent):
        if up >= 0:
            expected[node] = expected[up] + amount[node]
    np.testing.assert_allclose(sums, expected, rtol=1e-14, atol=0)


def test_the_rest_without_the_largest_loses_nothing() -> None:
    """Seen from a tiny branch at a soma, the others; seen from the huge one, the tiny ones alone."""
    parent = np.array([-1, 0, 0, 0])
    pieces = Pi(*(np.ones((4, 1)) for _ in range(3)))
    pieces.start[:, 0] = [0.0, 1e12, 1e-9, 1e-9]
    pieces.axial[:, 0] = 1e-30
    plan = schedule(parent)
    looks = sweep(plan, Pi(*(part[plan.order] for part in pieces)), np.zeros((4, 1)))
    beyond = looks.beyond[plan.place][:, 0]
    assert beyond[1] == pytest.approx(2e-9, rel=1e-15)
    assert beyond[2] == pytest.approx(1e12, rel=1e-15)


@pytest.mark.parametrize("shape", ["chain", "star", "caterpillar", "binary"])
def test_steps_grow_with_the_logarithm(shape: str) -> None:
    n = 100_001
    plan = schedule(SHAPES[shape](n))
    assert len(plan.steps) <= 2 * np.log2(n) + 4


def test_a_million_children_of_one_node() -> None:
    plan = schedule(star(1_000_000))
    assert len(plan.steps) == 1
