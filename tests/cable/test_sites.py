"""Sites as nodes: a cut inside a frustum gives the place a node and leaves every other number alone."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.delays import delays
from morphotone.cable.electrotonus import cases_of, solve, solve_cables
from morphotone.cable.sites import with_sites
from morphotone.cable.tree import build
from morphotone.questions.branches import branches_of
from morphotone.reading.reconstruction import reconstruct
from tests import trees

DEFAULTS = Assumptions()
HZ = (100.0,)
FIELDS = (
    *("Z_in", "Z_transfer", "attenuation_to_soma", "attenuation_from_soma"),
    *("log_attenuation_to_soma", "log_attenuation_from_soma", "X", "path_um", "lambda_um"),
)
CUT = {name: builder for name, (builder, _) in trees.FAMILIES.items()} | {
    "irregular, 300 samples": lambda: trees.irregular(300, 4),
    "irregular with soma, 300 samples": lambda: trees.irregular(300, 5, soma=True),
}


def read(swc):
    return reconstruct(swc.encode(), file="tree.swc", cell="tree")


def solved(cable):
    """Return the electrotonus by node at 0 and 100 Hz."""
    return solve_cables([(cable,)], cases_of([DEFAULTS], HZ))[0]


def random_places(cable, count, key=1):
    rng = np.random.default_rng(key)
    return rng.integers(1, len(cable.parent), count), rng.random(count)


# ---------------------------------------------------------------- nothing else changes


@pytest.mark.parametrize("name", CUT)
def test_cuts_at_a_thousand_random_fractions_leave_every_number_of_every_sample(name):
    whole = build(read(CUT[name]()), DEFAULTS)
    cut = with_sites(whole, *random_places(whole, 1000)).cable
    assert len(cut.parent) == len(whole.parent) + 1000
    before, after = solved(whole).by_sample(), solved(cut).by_sample()
    for field in FIELDS:
        # Logarithms next to 0 are small differences of phases at 100 Hz; the attenuations are what is asked.
        atol = 1e-12 if field.startswith("log") else 0.0
        np.testing.assert_allclose(
            getattr(after, field), getattr(before, field), rtol=1e-12, atol=atol, err_msg=field
        )


@pytest.mark.parametrize("name", CUT)
def test_cuts_leave_delays_and_membrane(name):
    whole = build(read(CUT[name]()), DEFAULTS)
    cut = with_sites(whole, *random_places(whole, 1000, 2)).cable
    before, after = (delays([cable], DEFAULTS)[0] for cable in (whole, cut))
    for field in ("total_ms", "local_ms"):
        np.testing.assert_allclose(
            getattr(after.by_sample(), field), getattr(before.by_sample(), field), rtol=1e-11
        )
    np.testing.assert_allclose(sum(map(np.sum, cut.areas())), sum(map(np.sum, whole.areas())), rtol=1e-12)


def test_cuts_leave_branches_and_their_numbers():
    whole = build(read(trees.irregular(200, 3, soma=True)), DEFAULTS)
    sited = with_sites(whole, *random_places(whole, 500, 3))
    before, after = branches_of(whole.parent), branches_of(sited.cable.parent)
    np.testing.assert_array_equal(after.parent, before.parent)
    np.testing.assert_array_equal(after.order, before.order)
    np.testing.assert_allclose(after.total(sited.cable.length), before.total(whole.length), rtol=1e-13)
    nodes, _ = random_places(whole, 500, 3)
    np.testing.assert_array_equal(after.of_node[sited.node], before.of_node[nodes])


def test_a_frustum_without_a_site_keeps_its_very_numbers():
    whole = build(read(trees.irregular(100, 6, soma=True)), DEFAULTS)
    cut = with_sites(whole, np.array([7, 7, 9]), np.array([0.2, 0.7, 0.4])).cable
    others = np.setdiff1d(np.arange(len(whole.parent)), [7, 9])
    place = cut.node[whole.sample[others]]
    for field in ("kind", "r_start", "r_end", "length", "sample"):
        np.testing.assert_array_equal(getattr(cut, field)[place], getattr(whole, field)[others])


# ---------------------------------------------------------------- the numbers at the site


@pytest.mark.parametrize("share", [0.1, 0.35, 0.5, 0.999])
@pytest.mark.parametrize("number", [4, 6, 9, 12])
def test_a_site_has_the_numbers_of_a_sample_put_there_in_the_file(number, share):
    swc = trees.irregular(18, 3, soma=True)
    rec = read(swc)
    assert rec.parent[number - 1] > 0, "a stem does not run on its parent's taper"
    cable = build(rec, DEFAULTS)
    sited = with_sites(cable, cable.node[[number - 1]], np.array([1.0 - share]))
    with_sample = read(trees.cut_frustum(swc, number, share))
    added = int(np.flatnonzero(with_sample.number == with_sample.number.max())[0])
    expected, got = solve(with_sample, DEFAULTS, HZ), solved(sited.cable)
    for field in FIELDS:
        np.testing.assert_allclose(
            getattr(got, field)[sited.node[0]], getattr(expected, field)[added], rtol=1e-11, err_msg=field
        )


def test_input_resistance_inside_a_sealed_cylinder():
    """R_∞/(tanh L1 + tanh L2) (Rall 1977, Handbook of Physiology, The Nervous System I:39–97; by hand)."""
    R_m, R_i = DEFAULTS.membrane.R_m_ohm_cm2, DEFAULTS.membrane.R_i_ohm_cm
    cable = build(read(trees.cylinder(1000.0, 4.0)), DEFAULTS)
    sited = with_sites(cable, np.array([1]), np.array([0.3]))  # 700 µm from the root
    space_constant = np.sqrt(R_m / R_i * 4e-4 / 4) * 1e4  # µm
    endless = 2 * np.sqrt(R_m * R_i) / (np.pi * (4e-4) ** 1.5) * 1e-6  # MΩ
    expected = endless / (np.tanh(700 / space_constant) + np.tanh(300 / space_constant))
    result = solved(sited.cable)
    assert result.Z_in[sited.node[0], 0].real == pytest.approx(expected, rel=1e-12)
    assert result.X[sited.node[0], 0] == pytest.approx(700 / space_constant, rel=1e-12)
    assert result.path_um[sited.node[0], 0] == pytest.approx(700, rel=1e-14)


def test_radius_and_path_inside_a_taper():
    cable = build(read(trees.frustum(200.0, 4.0, 1.0)), DEFAULTS)
    sited = with_sites(cable, np.array([1]), np.array([0.25]))
    node = sited.node[0]
    assert sited.cable.length[node] == 150.0
    assert sited.cable.r_end[node] == 0.25 * 2.0 + 0.75 * 0.5


# ---------------------------------------------------------------- several, equal, at ends


def test_several_sites_in_one_frustum_stand_in_order_along_it():
    cable = build(read(trees.cylinder(100.0, 2.0)), DEFAULTS)
    fraction = np.array([0.5, 0.9, 0.1, 0.5, 0.25])
    sited = with_sites(cable, np.ones(5, np.int64), fraction)
    assert len(sited.cable.parent) == 2 + 4
    assert sited.node[0] == sited.node[3]
    path = solved(sited.cable).path_um[sited.node, 0]
    np.testing.assert_allclose(path, 100 * (1 - fraction), rtol=1e-14)
    assert (sited.cable.parent < np.arange(6)).all()


def test_both_ends_of_a_frustum_give_nodes_that_exist():
    cable = build(read(trees.irregular(30, 2)), DEFAULTS)
    node = np.arange(1, len(cable.parent))
    at_end = with_sites(cable, node, np.zeros(len(node)))
    at_start = with_sites(cable, node, np.ones(len(node)))
    for sited, expected in ((at_end, node), (at_start, cable.parent[1:])):
        np.testing.assert_array_equal(sited.node, expected)
        for field in ("parent", "r_start", "r_end", "length", "node"):
            np.testing.assert_array_equal(getattr(sited.cable, field), getattr(cable, field))


@pytest.mark.parametrize("fraction", [1e-300, 1e-17, 1 - 2.0**-53])
def test_a_place_within_rounding_of_an_end_is_the_end(fraction):
    cable = build(read(trees.cylinder(100.0, 2.0, 2)), DEFAULTS)
    sited = with_sites(cable, np.array([2]), np.array([fraction]))
    assert len(sited.cable.parent) == 3
    assert sited.node[0] == (2 if fraction < 0.5 else 1)


def test_the_soma_and_places_on_it():
    cable = build(read(trees.ball_and_stick()), DEFAULTS)
    sited = with_sites(cable, np.array([0, 1, 0]), np.array([0.0, 1.0, 0.0]))
    assert sited.node.tolist() == [0, 0, 0]
    assert len(sited.cable.parent) == len(cable.parent)


def test_no_sites_at_all():
    cable = build(read(trees.star()), DEFAULTS)
    sited = with_sites(cable, np.empty(0, np.int64), np.empty(0))
    assert len(sited.node) == 0
    np.testing.assert_array_equal(sited.cable.parent, cable.parent)


def test_samples_keep_their_nodes_and_left_out_ones_stay_without():
    cable = build(read(trees.with_axon()), Assumptions(axon="left out"))
    sited = with_sites(cable, *random_places(cable, 50))
    np.testing.assert_array_equal(sited.cable.node < 0, cable.node < 0)
    kept = cable.node >= 0
    np.testing.assert_array_equal(sited.cable.sample[sited.cable.node[kept]], cable.sample[cable.node[kept]])


@pytest.mark.parametrize(
    ("node", "fraction"), [(5, 0.0), (-1, 0.0), (1, -0.1), (1, 1.1), (1, np.nan), (0, 0.5)]
)
def test_a_place_that_is_none_is_refused(node, fraction):
    cable = build(read(trees.cylinder(100.0, 2.0, 4)), DEFAULTS)
    with pytest.raises(
        ValueError, match=r"read node .* expected a node from 0 to 4 and a fraction from 0 to 1"
    ):
        with_sites(cable, np.array([1, node]), np.array([0.5, fraction]))
