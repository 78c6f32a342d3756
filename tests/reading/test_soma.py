"""The soma's samples, area and centre, rule by rule."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from morphotone.errors import AssumptionError
from morphotone.reading.soma import SOMA_RULES, find_soma, reroot


def soma_of(samples, rule="auto"):
    """Find the soma of samples (kind, x, y, z, radius, parent)."""
    table = np.array(samples, dtype=float)
    return find_soma(table[:, 0].astype(int), table[:, 5].astype(int), table[:, 1:4], table[:, 4], rule)


ONE = [(1, 1, 2, 3, 5, -1), (3, 10, 0, 0, 1, 0)]
THREE = [(1, 0, 0, 0, 5, -1), (1, 0, -5, 0, 5, 0), (1, 0, 5, 0, 5, 0)]
CHAIN = [(1, 0, 0, 0, 3, -1), (1, 4, 0, 0, 6, 0), (1, 8, 0, 0, 6, 1), (3, 20, 0, 0, 1, 2)]
CHAIN_AREA = np.pi * 9 * 5 + np.pi * 12 * 4  # slant of the first frustum: 3-4-5
RING = [
    (1, 8 * np.cos(angle) + 2, 8 * np.sin(angle), 1, 0.1, i - 1)
    for i, angle in enumerate(np.linspace(0, 2 * np.pi, 12, endpoint=False))
]


def test_one_sample_is_a_sphere():
    # 4πr² = 314.1592654 um2 for r = 5 um: INCF swc-specification, docs/source/swc.rst
    soma = soma_of(ONE)
    assert soma.rule == "sphere"
    assert soma.area == pytest.approx(314.1592654, rel=1e-9)
    assert soma.radius == pytest.approx(5, rel=1e-15)
    np.testing.assert_array_equal(soma.centre, [1, 2, 3])
    np.testing.assert_array_equal(soma.members, [0])


def test_the_three_point_convention_is_the_same_sphere():
    # INCF swc-specification, docs/source/swc.rst: the three points have the surface of the sphere
    soma = soma_of(THREE)
    assert soma.rule == "three-point"
    assert soma.area == pytest.approx(314.1592654, rel=1e-9)
    np.testing.assert_array_equal(soma.centre, [0, 0, 0])
    np.testing.assert_array_equal(soma.members, [0, 1, 2])
    # the reason the convention gives: two cylinders of one radius' length
    assert soma_of(THREE, "chain").area == pytest.approx(soma.area, rel=1e-15)


@pytest.mark.parametrize(
    ("row", "sample"),
    [
        (1, (1, 0, -4.4, 0, 5, 0)),  # not one radius away
        (2, (1, 0, 5, 0, 5.2, 0)),  # another radius
        (2, (1, 0, 5, 0, 5, 1)),  # a chain of three
    ],
)
def test_what_misses_the_convention_is_a_chain(row, sample):
    assert soma_of([*THREE[:row], sample, *THREE[row + 1 :]]).rule == "chain"


def test_rounding_does_not_break_the_convention():
    rounded = [(1, 0, 0, 0, 5.013, -1), (1, 0, -5.0, 0, 5.01, 0), (1, 0, 5.02, 0, 5.01, 0)]
    assert soma_of(rounded).rule == "three-point"


def test_a_chain_has_the_lateral_area_of_its_frusta():
    soma = soma_of(CHAIN)
    assert soma.rule == "chain"
    assert soma.area == pytest.approx(CHAIN_AREA, rel=1e-15)
    assert 4 * np.pi * soma.radius**2 == pytest.approx(CHAIN_AREA, rel=1e-15)
    np.testing.assert_array_equal(soma.members, [0, 1, 2])


def test_a_chain_has_the_centroid_of_its_surface():
    # literal definition: the surface cut into thin rings
    x = (np.arange(100_000) + 0.5) * 8e-5
    ring = np.where(x < 4, (3 + 0.75 * x) * 1.25, 6)
    np.testing.assert_allclose(soma_of(CHAIN).centre, [(x * ring).sum() / ring.sum(), 0, 0], rtol=1e-8)


def test_a_contour_is_the_sphere_of_the_mean_distance_from_its_centroid():
    soma = soma_of([*RING, (3, 20, 0, 0, 1, 0)])
    assert soma.rule == "outline"
    assert soma.radius == pytest.approx(8, rel=1e-14)
    assert soma.area == pytest.approx(4 * np.pi * 64, rel=1e-14)
    np.testing.assert_allclose(soma.centre, [2, 0, 1], atol=1e-14)


def test_a_slender_straight_soma_is_no_contour():
    assert soma_of([(1, 3.0 * i, 0.1 * (i % 2), 0, 0.5, i - 1) for i in range(8)]).rule == "chain"


def test_samples_in_one_place_are_a_sphere_of_the_largest_radius():
    soma = soma_of([(1, 1, 1, 1, 2, -1), (1, 1, 1, 1, 2.5, 0), (3, 9, 0, 0, 1, 1)])
    assert (soma.rule, soma.radius) == ("sphere", pytest.approx(2.5, rel=1e-15))
    nearly = soma_of([(1, 1, 1, 1, 2.5, -1), (1, 1, 1.2, 1, 2.5, 0)])
    assert (nearly.rule, nearly.area) == ("sphere", pytest.approx(25 * np.pi, rel=1e-15))


@pytest.mark.parametrize(
    ("rule", "area", "centre"),
    [
        ("sphere", 4 * np.pi * 36, [4, 0, 0]),
        ("three-point", 4 * np.pi * 9, [0, 0, 0]),
        ("outline", 4 * np.pi * (8 / 3) ** 2, [4, 0, 0]),
        ("chain", CHAIN_AREA, None),
    ],
)
def test_a_rule_can_be_forced(rule, area, centre):
    soma = soma_of(CHAIN, rule)
    assert (soma.rule, soma.area) == (rule, pytest.approx(area, rel=1e-14))
    if centre:
        np.testing.assert_allclose(soma.centre, centre, atol=1e-14)


@pytest.mark.parametrize("rule", ["three-point", "chain", "outline"])
@pytest.mark.parametrize("samples", [ONE, [*ONE[:1], (1, 1, 2, 3, 4, 0)]], ids=["one sample", "one place"])
def test_one_place_is_a_sphere_whatever_is_forced(samples, rule):
    soma = soma_of(samples, rule)
    assert (soma.rule, soma.area) == ("sphere", pytest.approx(100 * np.pi, rel=1e-15))


@pytest.mark.parametrize(
    ("samples", "rule"), [(CHAIN, "none"), ([(3, 0, 0, 0, 3, -1), (3, 4, 0, 0, 6, 0)], "auto")]
)
def test_without_a_soma_the_root_is_the_reference(samples, rule):
    soma = soma_of(samples, rule)
    assert (soma.rule, soma.area, soma.radius, len(soma.members)) == ("none", 0, 0, 0)
    np.testing.assert_array_equal(soma.centre, [0, 0, 0])


def test_an_unknown_rule_is_refused():
    with pytest.raises(AssumptionError, match="read soma rule 'ball', expected one of auto, sphere"):
        soma_of(ONE, "ball")


def test_radii_that_are_no_radii_add_no_area():
    assert soma_of([(1, 0, 0, 0, -1, -1), (3, 4, 0, 0, 1, 0)]).area == 0
    assert soma_of([(1, 0, 0, 0, 0, -1), (1, 4, 0, 0, -1, 0)]).area == 0


@pytest.mark.parametrize(
    ("kind", "parent", "members"),
    [
        ([3, 1, 1, 3, 1], [-1, 0, 1, 2, 3], [1, 2]),  # the larger one
        ([1, 3, 1, 1, 1], [-1, 0, 1, 2, 3], [0]),  # the one with a root
        ([3, 1, 3, 1], [-1, 0, 1, 2], [1]),  # the first of equals
        ([1, 1, 1, 1], [-1, -1, 1, 1], [1, 2, 3]),  # the larger of two with roots
        ([3, 1, 1, 1], [1, 2, -1, 2], [2, 1, 3]),  # children first: the root leads
    ],
)
def test_the_main_lump_is_found(kind, parent, members):
    n = len(kind)
    soma = find_soma(np.array(kind), np.array(parent), np.eye(n, 3), np.ones(n), "sphere")
    np.testing.assert_array_equal(soma.members, members)


@pytest.mark.parametrize("rule", [rule for rule in SOMA_RULES if rule != "none"])
@pytest.mark.parametrize("samples", [ONE, THREE, CHAIN, RING], ids=["one", "three", "chain", "ring"])
def test_moving_turning_and_renumbering_changes_nothing(samples, rule):
    table = np.array(samples, dtype=float)
    rng = np.random.default_rng(7)
    turn = np.linalg.qr(rng.normal(size=(3, 3)))[0]
    moved = table.copy()
    moved[:, 1:4] = table[:, 1:4] @ turn + [100, -20, 3]
    before, after = soma_of(samples, rule), soma_of(moved, rule)
    assert (after.rule, after.area) == (before.rule, pytest.approx(before.area, rel=1e-12))
    np.testing.assert_allclose(after.centre, before.centre @ turn + [100, -20, 3], rtol=1e-12)


def test_rerooting_turns_the_path_and_nothing_else():
    parent = np.array([-1, 0, 1, 1, 3, -1, 5])
    np.testing.assert_array_equal(reroot(parent, 3), [1, 3, 1, -1, 3, -1, 5])
    np.testing.assert_array_equal(reroot(parent, 0), parent)
    np.testing.assert_array_equal(parent, [-1, 0, 1, 1, 3, -1, 5])


@given(st.data())
def test_rerooting_keeps_the_edges_and_can_be_undone(data):
    n = data.draw(st.integers(2, 30))
    parent = np.array([-1] + [data.draw(st.integers(0, i - 1)) for i in range(1, n)])
    turned = reroot(parent, data.draw(st.integers(0, n - 1)))

    def edges(tree):
        return {frozenset((i, int(p))) for i, p in enumerate(tree) if p >= 0}

    assert edges(turned) == edges(parent)
    np.testing.assert_array_equal(reroot(turned, 0), parent)
