"""Points in space against the cable's surface: trimesh on a triangulated tube, literal sampling, by hand."""

import time

import numpy as np
import pytest
import trimesh

from morphotone.cable import nearest
from morphotone.cable.assumptions import Assumptions
from morphotone.cable.nearest import nearest_places, positions
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import trees

DEFAULTS = Assumptions()
SIDES = 96
CELLS = {
    **{name: trees.FAMILIES[name][0] for name in ("star", "comb", "caterpillar", "zero-length joints")},
    "irregular": lambda: trees.irregular(60, 8),
    "irregular with soma": lambda: trees.irregular(60, 9, soma=True),
    "with axon": trees.with_axon,
}


def cable_of(swc, assumptions=DEFAULTS):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), assumptions)


def ends_of(cable):
    """Return axis ends and radii of every frustum; positions at fractions 1 and 0 are what it says."""
    node = np.arange(1, len(cable.parent))
    start, end = (positions(cable, node, np.full(len(node), fraction)) for fraction in (1.0, 0.0))
    return start, end, cable.r_start[1:], cable.r_end[1:]


def points_about(cable, count, key, spread=3.0):
    """Draw points around random places on the cable, inside and outside."""
    rng = np.random.default_rng(key)
    node = rng.integers(1, len(cable.parent), count)
    place = positions(cable, node, rng.random(count))
    return place + rng.normal(size=(count, 3)) * rng.exponential(spread, (count, 1))


def tube(start, end, r_start, r_end):
    """Return the triangulated lateral surfaces of all frusta as one mesh, and the frustum of each face."""
    angle = 2 * np.pi * np.arange(SIDES) / SIDES
    vertices, faces = [], []
    for k in range(len(start)):
        axis = (end[k] - start[k]) / np.linalg.norm(end[k] - start[k])
        one = np.cross(axis, np.eye(3)[np.argmin(np.abs(axis))])
        one /= np.linalg.norm(one)
        circle = np.cos(angle)[:, None] * one + np.sin(angle)[:, None] * np.cross(axis, one)
        vertices += [start[k] + r_start[k] * circle, end[k] + r_end[k] * circle]
        here = 2 * SIDES * k + np.arange(SIDES)
        there = 2 * SIDES * k + (np.arange(SIDES) + 1) % SIDES
        faces += [np.stack((here, there, here + SIDES), axis=1)]
        faces += [np.stack((there, there + SIDES, here + SIDES), axis=1)]
    mesh = trimesh.Trimesh(np.concatenate(vertices), np.concatenate(faces), process=False)
    return mesh, np.repeat(np.arange(len(start)), 2 * SIDES)


# ---------------------------------------------------------------- against other ways to find it


@pytest.mark.parametrize("name", CELLS)
def test_distances_agree_with_trimesh_on_the_tube_surface(name):
    cable = cable_of(CELLS[name]())
    points = points_about(cable, 120, 21)
    found = nearest_places(cable, points)
    mesh, frustum = tube(*ends_of(cable))
    there, distance, face = trimesh.proximity.closest_point(mesh, points)
    on_cable = ~found.in_soma
    # Chords lie inside the circle by at most r·(1 − cos(π/sides)).
    sagitta = cable.r_start.max() * (1 - np.cos(np.pi / SIDES))
    assert (np.abs(found.moved_um - distance) <= sagitta)[on_cable].all()
    # Where trimesh's face is of the same frustum, the places along it agree too.
    same = on_cable & (frustum[face] + 1 == found.node)
    assert same.sum() > 0.5 * on_cable.sum()
    axis = positions(cable, found.node, found.fraction)
    reach = np.linalg.norm(there - axis, axis=1)
    radius = found.fraction * cable.r_start[found.node] + (1 - found.fraction) * cable.r_end[found.node]
    np.testing.assert_allclose(reach[same], radius[same], rtol=0.02, atol=0.2)


@pytest.mark.parametrize("name", CELLS)
def test_no_point_sampled_on_the_surface_is_nearer(name):
    cable = cable_of(CELLS[name]())
    points = points_about(cable, 60, 22, spread=20.0)
    found = nearest_places(cable, points)
    start, end, r_start, r_end = ends_of(cable)
    share = np.linspace(0, 1, 4001)[:, None, None]
    axis = (end - start) / np.linalg.norm(end - start, axis=1, keepdims=True)
    for point, moved, in_soma in zip(points, found.moved_um, found.in_soma, strict=True):
        centre = start + share * (end - start)
        offset = point - centre
        along = np.einsum("skj,kj->sk", offset, axis)
        beside = np.sqrt(np.maximum(np.einsum("skj,skj->sk", offset, offset) - along**2, 0.0))
        radius = r_start + share[..., 0] * (r_end - r_start)
        sampled = np.hypot(along, beside - radius).min()
        step = np.hypot(np.linalg.norm(end - start, axis=1), r_end - r_start).max() / 4000
        assert moved <= sampled + 1e-6
        assert in_soma or moved >= sampled - step


@pytest.mark.parametrize("name", CELLS)
def test_a_point_made_on_the_surface_is_found_where_it_was_made(name):
    cable = cable_of(CELLS[name]())
    rng = np.random.default_rng(23)
    node, fraction = rng.integers(1, len(cable.parent), 200), rng.random(200)
    start, end, r_start, r_end = (values[node - 1] for values in ends_of(cable))
    axis = (end - start) / np.linalg.norm(end - start, axis=1, keepdims=True)
    beside = np.cross(axis, rng.normal(size=(200, 3)))
    beside /= np.linalg.norm(beside, axis=1, keepdims=True)
    radius = fraction * r_start + (1 - fraction) * r_end
    found = nearest_places(cable, positions(cable, node, fraction) + radius[:, None] * beside)
    assert (found.moved_um < 1e-9).all()
    same = found.node == node  # elsewhere two frusta cross
    assert same.sum() > 120
    length = np.linalg.norm(end - start, axis=1)
    np.testing.assert_allclose((found.fraction * length)[same], (fraction * length)[same], atol=1e-6)


@pytest.mark.parametrize("name", CELLS)
def test_axes_are_as_long_as_the_cable(name):
    for assumptions in (
        DEFAULTS,
        Assumptions(axon="cut", axon_cut_um=90.0),
        Assumptions(shrinkage=(1.2, 1.2, 2.0)),
    ):
        cable = cable_of(CELLS[name](), assumptions)
        start, end, _, _ = ends_of(cable)
        np.testing.assert_allclose(np.linalg.norm(end - start, axis=1), cable.length[1:], rtol=1e-9)


def test_answers_do_not_depend_on_what_else_is_asked():
    cable = cable_of(trees.irregular(300, 10, soma=True))
    points = points_about(cable, 3000, 24, spread=200.0)
    together = nearest_places(cable, points)
    for some in (slice(0, 1), slice(1500, 1700), slice(2999, 3000)):
        for alone, whole in zip(nearest_places(cable, points[some]), together, strict=True):
            np.testing.assert_array_equal(alone, whole[some])


def test_answers_do_not_depend_on_how_many_candidates_are_looked_at_together(monkeypatch):
    cable = cable_of(trees.irregular(300, 10, soma=True))
    points = points_about(cable, 300, 26, spread=200.0)
    together = nearest_places(cable, points)
    monkeypatch.setattr(nearest, "_CANDIDATES_AT_ONCE", 20)
    for apart, whole in zip(nearest_places(cable, points), together, strict=True):
        np.testing.assert_array_equal(apart, whole)


def test_no_points():
    found = nearest_places(cable_of(trees.star()), np.empty((0, 3)))
    assert [len(values) for values in found] == [0, 0, 0, 0]


# ---------------------------------------------------------------- by hand


def test_one_taper_by_hand():
    """Radius 2 at x = 0 to 0.5 at x = 200: the surface's normal leans by 1.5/200."""
    cable = cable_of(trees.frustum(200.0, 4.0, 1.0))
    found = nearest_places(cable, [[100.0, 0.0, 5.0], [250.0, 0.0, 0.0], [-3.0, 0.0, 6.0], [0.0, 0.0, 0.0]])
    slant = np.hypot(200.0, 1.5)
    assert found.node.tolist() == [1, 1, 1, 1]
    assert found.moved_um[0] == pytest.approx((5.0 - 1.25) * 200.0 / slant, rel=1e-14)
    assert found.fraction[0] == pytest.approx(0.5 + 3.75 * 1.5 / slant**2, rel=1e-12)
    assert found.moved_um[1] == pytest.approx(np.hypot(50.0, 0.5), rel=1e-14)
    assert found.fraction[1] == 0.0
    assert found.moved_um[2] == pytest.approx(5.0, rel=1e-14)  # 3-4-5 from the rim
    assert found.fraction[2] == 1.0
    assert found.moved_um[3] == pytest.approx(2.0 * 200.0 / slant, rel=1e-14)  # from the axis to the surface
    assert not found.in_soma.any()


def test_frusta_count_not_samples():
    """Beside the middle of a long frustum, another branch's sample is the nearest sample, but not nearest."""
    swc = "1 3 0 0 0 1 -1\n2 3 1000 0 0 1 1\n3 3 500 20 0 1 1\n"
    found = nearest_places(cable_of(swc), [[500.0, 4.0, 0.0]])
    assert found.node[0] == 1
    assert found.fraction[0] == pytest.approx(0.5)
    assert found.moved_um[0] == pytest.approx(3.0)


def test_a_thick_frustum_wins_over_a_thin_one_whose_axis_is_nearer():
    swc = "1 3 0 0 0 1 -1\n2 3 0 0 0 40 1\n3 3 100 0 0 40 2\n4 3 0 70 0 0.1 1\n5 3 100 70 0 0.1 4\n"
    found = nearest_places(cable_of(swc), [[50.0, 50.0, 0.0]])
    assert cable_of(swc).r_end[found.node[0]] == 40
    assert found.moved_um[0] == pytest.approx(10.0)


# ---------------------------------------------------------------- the soma


def test_on_in_and_beside_a_spherical_soma():
    cable = cable_of(trees.ball_and_stick())  # radius 10, cable of radius 1 along x from 10 on
    points = [[0, 0, 0], [0, 9.9, 0], [0, -13, 0], [10, 0, 0], [12.0, 1.0, 0], [9.0, 0.5, 0.0]]
    found = nearest_places(cable, points)
    assert found.in_soma.tolist() == [True, True, True, True, False, True]
    assert found.node[found.in_soma].tolist() == [0] * 5
    assert found.fraction[found.in_soma].tolist() == [0.0] * 5
    np.testing.assert_allclose(found.moved_um, [0, 0, 3, 0, 0, 0], atol=1e-14)
    assert cable.length[found.node[4]] * (1 - found.fraction[4]) == pytest.approx(2.0)


def test_a_stem_starts_at_the_soma_s_surface():
    cable = cable_of(trees.soma_three_points())  # radius 5; stem of radius 1 to (12, 0, 0)
    found = nearest_places(cable, [[8.5, 1.0, 0.0]])
    assert found.fraction[0] == pytest.approx(0.5, rel=1e-12)
    assert found.moved_um[0] < 1e-12


def test_the_soma_of_a_chain_is_its_samples_spheres_and_the_frusta_between_them():
    cable = cable_of("1 1 0 0 0 2 -1\n2 1 10 0 0 4 1\n3 3 30 0 0 1 2\n")
    points = [[5, 2.9, 0], [5, 3.0 + 2.0, 0], [-2, 0, 0], [10, 4.5, 0], [13.9, 0, 0], [14.5, 1.0, 0]]
    found = nearest_places(cable, points)
    assert found.in_soma.tolist() == [True, True, True, True, True, False]
    slope = np.hypot(10.0, 2.0)
    np.testing.assert_allclose(found.moved_um[:5], [0, 2 * 10 / slope, 0, 0.5, 0], atol=1e-12)


def test_an_outline_soma_is_its_sphere():
    cable = cable_of(trees.soma_outline())
    centre, radius = cable.traced.soma.centre, cable.traced.soma.radius
    found = nearest_places(cable, centre + np.outer([0, radius + 2, -radius], [0, 0, 1]))
    assert found.in_soma.all()
    np.testing.assert_allclose(found.moved_um, [0, 2, 0], atol=1e-12)


def test_a_cell_of_a_soma_alone_takes_everything():
    cable = cable_of("1 1 0 0 0 5 -1\n2 2 30 0 0 1 1\n", Assumptions(axon="left out"))
    found = nearest_places(cable, [[30.0, 0.0, 0.0]])
    assert found.in_soma.all()
    assert found.moved_um[0] == pytest.approx(25.0)
    np.testing.assert_array_equal(positions(cable, found.node, found.fraction), [[0, 0, 0]])


def test_a_cut_axon_ends_where_it_is_cut():
    cable = cable_of("1 1 0 0 0 5 -1\n2 2 105 0 0 1 1\n", Assumptions(axon="cut", axon_cut_um=40.0))
    found = nearest_places(cable, [[105.0, 0.0, 1.0], [25.0, 0.0, 1.0]])
    np.testing.assert_allclose(found.moved_um, [60.0, 0.0], atol=1e-12)
    np.testing.assert_allclose(found.fraction, [0.0, 0.5], atol=1e-12)


# ---------------------------------------------------------------- speed


@pytest.mark.slow
def test_ten_thousand_points_on_a_hundred_thousand_samples_take_seconds():
    rng = np.random.default_rng(25)
    turns = 0.2 * rng.normal(size=(100_000, 3)).cumsum(axis=0)
    steps = turns / np.linalg.norm(turns, axis=1, keepdims=True)
    at = np.cumsum(steps, axis=0)
    radius = rng.uniform(0.2, 1.5, len(at))
    rows = zip(at.tolist(), radius.tolist(), strict=True)
    swc = "".join(f"{k} 3 {x} {y} {z} {r} {k - 1 or -1}\n" for k, ((x, y, z), r) in enumerate(rows, 1))
    cable = cable_of(swc)
    points = at[rng.integers(0, len(at), 10_000)] + 2 * rng.normal(size=(10_000, 3))
    begun = time.perf_counter()
    found = nearest_places(cable, points)
    assert time.perf_counter() - begun < 10.0  # 0.3 s on one core of 2026
    assert np.median(found.moved_um) < 3.0
