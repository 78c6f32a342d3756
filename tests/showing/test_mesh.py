"""Meshes that are closed, face outwards, and have the cable's area and values."""

import io
import json
import subprocess
import sys

import numpy as np
import pytest
import trimesh

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.tree import build
from morphotone.errors import ReadingError
from morphotone.reading.reconstruction import reconstruct
from morphotone.showing.mesh import BEND_ERROR, MESH_KINDS, area_check, membrane_mesh, mesh_bytes
from morphotone.showing.placed import frusta_of
from morphotone.showing.tubes import (
    CABLE,
    FACET_UM,
    HIDDEN,
    LEAST_SIDES,
    MOST_SIDES,
    SOMA,
    inner_share,
    sides,
)
from tests import trees

BALLS = [name for name, (_, rule) in trees.FAMILIES.items() if rule not in ("none", "chain")]


def cable_of(swc, **assumptions):
    return build(reconstruct(swc.encode(), file="a.swc", cell="a"), Assumptions(**assumptions))


def drawn(swc, **assumptions):
    """Return the cable and a mesh that shows each node's number."""
    cable = cable_of(swc, **assumptions)
    return cable, membrane_mesh(cable, np.arange(len(cable.parent), dtype=float))


def family(name):
    return drawn(trees.FAMILIES[name][0]())


def polyline(points, radii):
    tree = trees.Tree()
    last = -1
    for at, r in zip(points, radii, strict=True):
        last = tree.add(at, r, last)
    return tree.text()


def bodies(mesh):
    return mesh.split(only_watertight=False)


def area_of(mesh, part):
    return mesh.area_faces[mesh.face_attributes["part"] == part].sum()


def read_back(mesh, kind):
    options = {"skip_materials": True} if kind == "glb" else {}  # with one, trimesh drops vertex colours
    return trimesh.load_mesh(io.BytesIO(mesh_bytes(mesh, kind)), file_type=kind, process=False, **options)


def in_ply(mesh, element, name):
    return read_back(mesh, "ply").metadata["_ply_raw"][element]["data"][name].ravel()


def head_of_glb(data):
    """Return the JSON of a GLB, which must be strict."""

    def refuse(word):
        raise AssertionError(f"{word} is no JSON")

    length = int.from_bytes(data[12:16], "little")
    return json.loads(data[20 : 20 + length], parse_constant=refuse)


# Places where a mesh may break: each is a path and its radii.
ODD_PATHS = {
    "there and back": ([(0, 0, 0), (10, 0, 0), (2, 0, 0), (20, 0, 0)], [1, 1, 1, 1]),
    "sharp turns": ([(0, 0, 0), (9, 0, 0), (3, 1, 0), (3, 9, 0), (2, 3, 4)], [1, 0.8, 0.9, 0.4, 0.4]),
    "steps far shorter than wide": ([(0.01 * k, 0.01 * (k % 3), 0) for k in range(9)], [2] * 9),
    "radii a thousand to one": ([(0, 0, 0), (1, 0, 0), (2, 0.1, 0), (3, 0, 0)], [0.01, 10, 0.01, 5]),
    "all but flat": ([(0, 0, 0), (1e-9, 0, 0), (5, 0, 0), (5 + 1e-7, 0, 0)], [1, 3, 3, 0.5]),
    "far from the origin": ([(9e3, -9e3, 9e3 + k) for k in (0, 1e-6, 1, 2)], [1, 1, 1, 0.2]),
    "against z": ([(0, 0, -k) for k in range(5)], [1, 1, 1, 1, 1]),
    "samples in one place": ([(0, 0, 0), (5, 0, 0), (5, 0, 0), (9, 1, 0), (9, 1, 0)], [2, 2, 1, 1, 4]),
}


@pytest.mark.parametrize("name", [*trees.FAMILIES, *ODD_PATHS])
def test_every_body_is_closed_and_faces_outwards(name):
    _, mesh = drawn(polyline(*ODD_PATHS[name])) if name in ODD_PATHS else family(name)
    assert np.isfinite(mesh.vertices).all()
    for body in bodies(mesh):
        assert body.is_watertight
        assert body.is_winding_consistent
        assert body.volume > 0
    np.testing.assert_allclose(np.linalg.norm(mesh.vertex_normals, axis=1), 1.0, rtol=1e-12)
    facing = np.einsum("fcx,fx->fc", mesh.vertex_normals[mesh.faces], mesh.face_normals)
    assert np.mean(facing > 0.5) > 0.6  # corners of flat ends look across them


def test_a_mirrored_cell_still_faces_outwards():
    swc = trees.moved(trees.irregular(), trees.orthogonal(5, mirror=True), (3.0, 1.0, 2.0))
    assert all(body.volume > 0 for body in bodies(drawn(swc)[1]))


# ---------------------------------------------------------------- areas


def test_no_side_lies_further_inside_than_the_rule_says():
    radius = np.geomspace(0.2, 10.0, 60)
    n = sides(radius)
    assert (radius * (1 - np.cos(np.pi / n)) <= FACET_UM * (1 + 1e-12)).all()
    fewer = (n > LEAST_SIDES) & (n <= MOST_SIDES)
    assert (radius * (1 - np.cos(np.pi / (n - 2))))[fewer].min() > FACET_UM
    assert (n % 2 == 0).all()
    assert sides(np.array([1e-9, 1e-3, 1e3])).tolist() == [LEAST_SIDES, LEAST_SIDES, MOST_SIDES]


@pytest.mark.parametrize("diameter", [0.1, 0.6, 4.0, 50.0])
def test_a_cylinder_has_its_area_for_any_number_of_sides(diameter):
    cable, mesh = drawn(trees.cylinder(length=300.0, diameter=diameter, pieces=5))
    assert area_of(mesh, CABLE) == pytest.approx(np.pi * diameter * 300.0, rel=1e-12)
    check = area_check(mesh, cable)
    assert check.mesh_um2 == pytest.approx(check.cable_um2, rel=1e-12)
    assert abs(check.facet_error) < 1e-12


@pytest.mark.parametrize("length", [1e-6, 0.1, 3.0, 500.0])
@pytest.mark.parametrize(("d_start", "d_end"), [(4.0, 1.0), (0.3, 8.0), (1.0, 1.1), (0.01, 10.0)])
def test_a_taper_is_too_small_by_its_facet_error(length, d_start, d_end):
    """An n-gon with the circle's circumference, whose sides lie c(n)·r from the axis."""
    cable, mesh = drawn(trees.frustum(length, d_start, d_end))
    check = area_check(mesh, cable)
    n = sides(np.array(max(d_start, d_end) / 2))
    drop = inner_share(n) * (d_start - d_end) / 2
    assert check.mesh_um2 == pytest.approx(np.pi * (d_start + d_end) / 2 * np.hypot(length, drop), rel=1e-9)
    assert check.mesh_um2 == pytest.approx(check.cable_um2 * (1 - check.facet_error), rel=1e-9)
    assert 0 <= check.facet_error <= 1 - inner_share(n)
    assert check.agrees


def test_a_bent_cylinder_has_its_area():
    """Planes that halve the bends cut off on one side what they leave on the other; no twist, or it shows."""
    turn = np.linspace(0, 6 * np.pi, 200)
    helix = np.column_stack((20 * np.cos(turn), 20 * np.sin(turn), 3 * turn))
    cable, mesh = drawn(polyline(helix, [1.3] * 200))
    assert len(bodies(mesh)) == 1
    check = area_check(mesh, cable)
    assert check.mesh_um2 == pytest.approx(check.cable_um2, rel=1e-12)


@pytest.mark.parametrize("name", [*trees.FAMILIES, *ODD_PATHS])
def test_a_whole_cell_has_its_area_but_for_facets_and_bends(name):
    cable, mesh = drawn(polyline(*ODD_PATHS[name])) if name in ODD_PATHS else family(name)
    check = area_check(mesh, cable)
    assert check.cable_um2 == pytest.approx(sum(part.sum() for part in cable.areas()))
    assert check.agrees
    assert not area_check(mesh.copy().apply_scale(0.99), cable).agrees


@pytest.mark.parametrize("key", range(6))
def test_bends_and_tapers_together_stay_within_their_bound(key):
    rng = np.random.default_rng(key)
    steps = rng.normal(loc=(2.0, 0.0, 0.0), size=(400, 3))
    radii = np.exp(np.cumsum(rng.normal(scale=0.1, size=400)))
    cable, mesh = drawn(polyline(np.cumsum(steps, axis=0), np.clip(radii, 0.05, 4.0)))
    check = area_check(mesh, cable)
    assert abs(check.mesh_um2 / check.cable_um2 - 1 + check.facet_error) < BEND_ERROR / 2


# ---------------------------------------------------------------- the soma, and joints


@pytest.mark.parametrize("name", BALLS)
def test_a_round_soma_has_its_rules_area(name):
    cable, mesh = family(name)
    assert area_of(mesh, SOMA) == pytest.approx(cable.traced.soma.area, rel=1e-12)
    soma = mesh.vertices[mesh.faces[mesh.face_attributes["part"] == SOMA]].reshape(-1, 3)
    assert np.linalg.norm(soma - cable.traced.soma.centre, axis=1) == pytest.approx(
        cable.traced.soma.radius, rel=0.01
    )


def test_a_chain_soma_has_its_area_but_for_facets():
    cable, mesh = family("soma chain")
    n = sides(cable.traced.radius[cable.traced.soma.members].max())
    assert inner_share(n) <= area_of(mesh, SOMA) / cable.traced.soma.area <= 1.0


def test_without_a_soma_none_is_drawn():
    assert area_of(family("comb")[1], SOMA) == 0


def test_a_cell_that_is_but_a_soma_is_a_ball():
    cable, mesh = drawn("1 1 5 5 5 8 -1\n2 1 5 5 5 8 1\n")
    assert mesh.area == pytest.approx(4 * np.pi * 64, rel=1e-12)
    assert np.allclose(mesh.centroid, 5)
    assert area_check(mesh, cable).agrees


def test_samples_in_one_place_without_a_soma_cannot_be_drawn():
    with pytest.raises(ReadingError, match="one place and no soma") as raised:
        drawn("1 3 0 0 0 1 -1\n2 3 0 0 0 2 1\n")
    assert raised.value.reason == "nothing_to_draw"


def in_wedges(frusta):
    """Return points between the end of a frustum and the start of the next, where they bend apart."""
    next_one = np.flatnonzero(frusta.follows >= 0)
    before = frusta.follows[next_one]
    around = np.random.default_rng(1).normal(size=(40, 1, 3))
    around *= 0.6 / np.linalg.norm(around, axis=2, keepdims=True)
    least = np.minimum(frusta.r_end[before], frusta.r_start[next_one])
    past_end = (around * frusta.along[before]).sum(axis=2) >= 0
    not_begun = (around * frusta.along[next_one]).sum(axis=2) <= 0
    return (frusta.start[next_one] + around * least[:, None])[past_end & not_begun]


@pytest.mark.parametrize("name", [*trees.FAMILIES, *ODD_PATHS])
def test_nothing_gapes(name):
    """Where frusta bend apart, and along every link from the soma to its stems, all is inside some body."""
    cable, mesh = drawn(polyline(*ODD_PATHS[name])) if name in ODD_PATHS else family(name)
    frusta = frusta_of(cable)
    links = frusta.take(frusta.part == HIDDEN)
    share = np.linspace(0.02, 0.98, 9)[:, None, None]
    axes = links.start + share * (links.end - links.start)
    probes = np.concatenate((in_wedges(frusta), axes.reshape(-1, 3)))
    inside = np.zeros(len(probes), bool)
    for body in bodies(mesh):
        near = ((probes >= body.bounds[0]) & (probes <= body.bounds[1])).all(axis=1) & ~inside
        if near.any():
            inside[near] = body.contains(probes[near])
    assert inside.all()


def test_a_gentle_path_is_one_tube_and_a_turn_begins_another():
    assert len(bodies(drawn(trees.cylinder(pieces=9))[1])) == 1
    assert len(bodies(drawn(polyline(*ODD_PATHS["there and back"]))[1])) == 3


# ---------------------------------------------------------------- what is drawn is what is analysed


def test_orphans_and_axons_are_drawn_as_assumed():
    text = trees.with_axon()
    whole, without = drawn(text)[1], drawn(text, axon="left out")[1]
    assert whole.bounds[1][0] == pytest.approx(372, abs=0.5)
    assert without.bounds[1][0] < 50
    cut = drawn(text, axon="cut", axon_cut_um=75.0)
    assert cut[1].bounds[1][0] == pytest.approx(12 + 75 - (12 - 7), abs=0.5)
    assert area_check(*cut[::-1]).agrees
    text = trees.cylinder(length=50.0) + "3 3 53 0 0 2 -1\n4 3 90 0 0 2 3\n"
    assert drawn(text)[1].bounds[1][0] == pytest.approx(50)
    assert drawn(text, orphans="joined", orphan_gap_um=5.0)[1].bounds[1][0] == pytest.approx(90)


@pytest.mark.parametrize("name", trees.FAMILIES)
def test_each_vertex_has_the_value_of_its_place(name):
    cable, mesh = family(name)
    node = mesh.vertex_attributes["value"].astype(int)
    assert set(node) == set(range(len(cable.parent))) - ({0} if name == "none" else set())
    place = cable.traced.position[cable.sample[node]]
    far = np.linalg.norm(mesh.vertices - place, axis=1)
    widest = cable.r_end.copy()
    np.maximum.at(widest, cable.parent[1:], cable.r_start[1:])
    assert (far <= 1.3 * widest[node] + 1e-9)[node > 0].all()


def test_colours_go_from_the_least_value_to_the_greatest_or_as_given():
    cable, mesh = family("comb")
    colours, value = np.asarray(mesh.visual.vertex_colors), mesh.vertex_attributes["value"]
    pale, dark = colours[np.argmin(value)], colours[np.argmax(value)]
    assert int(pale[:3].sum()) > int(dark[:3].sum()) + 200
    rgba = np.random.default_rng(2).integers(0, 256, (len(cable.parent), 4), np.uint8)
    mesh = membrane_mesh(cable, np.arange(len(cable.parent), dtype=float), rgba=rgba)
    assert np.array_equal(mesh.visual.vertex_colors, rgba[value.astype(int)])


# ---------------------------------------------------------------- files


@pytest.fixture(scope="module")
def shown():
    cable = cable_of(trees.with_axon())
    value = np.random.default_rng(3).normal(size=len(cable.parent))
    return cable, membrane_mesh(cable, value, label="ln attenuation\nto the soma")


@pytest.mark.parametrize("kind", MESH_KINDS)
def test_a_file_reads_back(shown, kind):
    _, mesh = shown
    back = read_back(mesh, kind)
    assert np.array_equal(back.faces, mesh.faces)
    np.testing.assert_allclose(back.vertices, mesh.vertices, rtol=1e-6, atol=1e-6)
    assert back.volume == pytest.approx(mesh.volume, rel=1e-5)


def test_ply_holds_value_part_and_colour(shown):
    _, mesh = shown
    data = mesh_bytes(mesh, "ply")
    assert np.array_equal(in_ply(mesh, "vertex", "value"), mesh.vertex_attributes["value"])
    np.testing.assert_allclose(in_ply(mesh, "vertex", "nz"), mesh.vertex_normals[:, 2], atol=1e-6)
    assert np.array_equal(in_ply(mesh, "face", "part"), mesh.face_attributes["part"])
    assert np.array_equal(read_back(mesh, "ply").visual.vertex_colors, mesh.visual.vertex_colors)
    head = data.split(b"end_header")[0].decode()
    assert "comment value is ln attenuation to the soma\n" in head
    assert "comment unit um\n" in head


def test_glb_holds_value_and_colour_in_linear_light(shown):
    _, mesh = shown
    back = read_back(mesh, "glb")
    value = back.vertex_attributes["_VALUE"].ravel()
    np.testing.assert_allclose(value, mesh.vertex_attributes["value"], rtol=1e-6)
    colour = np.asarray(back.visual.vertex_colors)[:, :3] / 255.0
    screen = np.where(colour <= 0.0031308, 12.92 * colour, 1.055 * colour ** (1 / 2.4) - 0.055)
    np.testing.assert_allclose(screen, np.asarray(mesh.visual.vertex_colors)[:, :3] / 255.0, atol=0.03)
    extras = head_of_glb(mesh_bytes(mesh, "glb"))["meshes"][0]["extras"]
    assert extras["value"] == "ln attenuation\nto the soma"
    assert extras["units"] == "micrometers"


def test_obj_holds_colour(shown):
    _, mesh = shown
    assert np.array_equal(read_back(mesh, "obj").visual.vertex_colors, mesh.visual.vertex_colors)
    first = mesh_bytes(mesh, "obj").split(b"\n")[0]
    assert first == b"# unit um; colours show ln attenuation to the soma"


def test_a_place_without_a_value_is_grey_and_no_nan_in_glb():
    cable = cable_of(trees.ball_and_stick())
    value = np.where(np.arange(len(cable.parent)) == 0, np.nan, 1e300)
    mesh = membrane_mesh(cable, value)
    data = mesh_bytes(mesh, "glb")
    extras = head_of_glb(data)["meshes"][0]["extras"]
    back = read_back(mesh, "glb").vertex_attributes["_VALUE"].ravel()
    none = np.isnan(mesh.vertex_attributes["value"])
    assert none.any()
    assert (back[none] == np.float32(extras["no_value"])).all()
    assert (back[~none] == np.finfo(np.float32).max).all()
    assert (np.ptp(np.asarray(mesh.visual.vertex_colors)[none][:, :3], axis=1) == 0).all()
    assert np.isnan(in_ply(mesh, "vertex", "value")[none]).all()


def test_the_same_cell_gives_the_same_bytes_in_any_process():
    code = """
import hashlib
from tests.showing.test_mesh import MESH_KINDS, family, mesh_bytes
print([hashlib.sha256(mesh_bytes(family("irregular with soma")[1], kind)).hexdigest() for kind in MESH_KINDS])
"""
    runs = [
        subprocess.run(
            [sys.executable, "-c", code], env={"PYTHONHASHSEED": seed, "PYTHONPATH": ":".join(sys.path)},
            check=True, capture_output=True, text=True,
        ).stdout
        for seed in ("1", "2")
    ]  # fmt: skip
    assert runs[0] == runs[1] != ""


# ---------------------------------------------------------------- size


def calls(function, *args):
    """Return how many functions Python and C call while a function runs."""
    seen = 0

    def count(_frame, _event, _arg):
        nonlocal seen
        seen += 1

    sys.setprofile(count)
    try:
        function(*args)
    finally:
        sys.setprofile(None)
    return seen


def test_faces_grow_with_the_samples_and_calls_do_not():
    cables = [cable_of(trees.deep_chain(samples)) for samples in (1_000, 2_000, 16_000)]
    values = [np.zeros(len(cable.parent)) for cable in cables]
    faces = [len(membrane_mesh(*case).faces) for case in zip(cables, values, strict=True)]
    n = int(sides(np.array(1.0)))
    assert [count - 2 * n for count in faces] == [2 * n * (len(cable.parent) - 1) for cable in cables]
    made = [calls(membrane_mesh, *case) for case in zip(cables, values, strict=True)]
    assert made[2] < 1.1 * made[0]


@pytest.mark.slow
def test_a_hundred_thousand_samples_are_drawn():
    cable, mesh = drawn(trees.deep_chain())
    assert len(mesh.faces) == 2 * sides(np.array(1.0)) * 100_000
    assert area_check(mesh, cable).agrees
