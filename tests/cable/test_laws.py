"""Laws of THEORY section 7 that hold for every passive tree, whatever its shape."""

from dataclasses import replace

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import build_cases, cases_of, solve, solve_cables
from morphotone.reading.reconstruction import reconstruct
from tests import trees

modest = settings(deadline=None, max_examples=25, derandomize=True)
keys = st.integers(0, 10_000)
DEFAULTS = Assumptions()
R_M, R_I = 20000.0, 150.0
MOHM_UM2 = R_M * 1e2
"""R_m in MOhm um2."""


def read(swc):
    """Return the reconstruction of SWC text."""
    return reconstruct(swc.encode(), file="tree.swc", cell="tree")


def by_number(values, rec):
    """Return rows of a field in the order of sample numbers, so that reorderings can be compared."""
    return values[np.argsort(rec.number)]


FIELDS = ("Z_in", "Z_transfer", "attenuation_to_soma", "attenuation_from_soma", "X", "path_um", "lambda_um")


def table(swc, assumptions=DEFAULTS, fields=FIELDS):
    """Solve and return the named fields, rows in the order of sample numbers."""
    rec = read(swc)
    result = solve(rec, assumptions)
    return {name: by_number(getattr(result, name), rec) for name in fields}


def assert_same(one, other, rtol, skip=()):
    for name in set(one) - set(skip):
        np.testing.assert_allclose(one[name], other[name], rtol=rtol, atol=0, err_msg=name)


def irregular(key, samples=30, soma=False):
    return trees.irregular(samples, key, soma)


# ---------------------------------------------------------------- reciprocity, charge


@modest
@given(key=keys, a=st.integers(1, 30), b=st.integers(1, 30))
def test_reciprocity(key, a, b):
    # Z between a and b, once read with a as the root and once with b.
    swc = irregular(key)
    assumptions = Assumptions(hz=(10.0, 1000.0))
    from_a = table(trees.rerooted(swc, a), assumptions)
    from_b = table(trees.rerooted(swc, b), assumptions)
    np.testing.assert_allclose(from_a["Z_transfer"][b - 1], from_b["Z_transfer"][a - 1], rtol=1e-11)
    np.testing.assert_allclose(from_a["Z_in"], from_b["Z_in"], rtol=1e-11)


NODES, WEIGHTS = np.polynomial.legendre.leggauss(6)


def with_gauss_points(swc):
    """Cut every frustum at Gauss-Legendre points; return the text and the area weight of each sample, um2.

    Cutting changes nothing, so that the potentials at the points are exact and the integral over the
    membrane is a weighted sum.
    """
    rows, weight, by = [], {}, {row.number: row for row in trees.rows_of(swc)}
    shares = (NODES + 1) / 2
    for end in by.values():
        last = end.parent
        if end.parent != -1 and by[end.parent].kind != trees.SOMA:
            start = by[end.parent]
            h = np.linalg.norm(np.subtract(end.at, start.at))
            slant = np.hypot(h, end.r - start.r) if h > 0 else 0.0
            for k, (share, w) in enumerate(zip(shares, WEIGHTS / 2, strict=True)):
                number = 1000 * end.number + k
                at = tuple((1 - share) * a + share * b for a, b in zip(start.at, end.at, strict=True))
                r = float((1 - share) * start.r + share * end.r)
                rows.append(trees.Row(number, end.kind, tuple(map(float, at)), r, last))
                weight[number] = w * 2 * np.pi * r * slant
                last = number
        rows.append(replace(end, parent=last))
    return trees.text_of(rows), weight


@modest
@given(key=keys, site=st.integers(1, 14))
def test_transfer_resistance_integrated_over_the_membrane_is_R_m(key, site):
    # Uniform R_m, sealed ends: the leak of the whole membrane is the injected current.
    swc, weight = with_gauss_points(with_short_pieces(irregular(key, 14), site))
    rec = read(swc)
    R = solve(rec, Assumptions()).R_transfer_MOhm[:, 0]
    area = np.array([weight.get(int(number), 0.0) for number in rec.number])
    assert np.isclose((R * area).sum(), MOHM_UM2, rtol=1e-9, atol=0)


def with_short_pieces(swc, root):
    """Re-root, then halve every frustum once, so that six points integrate each half exactly enough."""
    swc = trees.rerooted(swc, root)
    for row in trees.rows_of(swc):
        if row.parent != -1:
            swc = trees.cut_frustum(swc, row.number, 0.5)
    return swc


@pytest.mark.parametrize("shunt", [0.0, 3.0])
def test_leak_of_soma_stems_and_shunt_is_the_injected_current(shunt):
    # Ball and stick: soma leak + cylinder leak + shunt current, for 1 nA at the soma.
    radius, length, d = 10.0, 600.0, 2.0
    swc = trees.ball_and_stick(radius, length, d, pieces=1)
    text, weight = with_gauss_points(swc)
    rec = read(text)
    R = solve(rec, Assumptions(soma_shunt_nS=shunt)).R_transfer_MOhm[:, 0]
    area = np.array([weight.get(int(number), 0.0) for number in rec.number])
    soma = int(np.flatnonzero(rec.kind == trees.SOMA)[0])
    leak = (R * area).sum() / MOHM_UM2 + R[soma] * (4 * np.pi * radius**2 / MOHM_UM2 + shunt * 1e-3)
    assert np.isclose(leak, 1.0, rtol=1e-12, atol=0)


# ---------------------------------------------------------------- the same neuron, written differently


@modest
@given(key=keys, which=st.integers(2, 20), share=st.floats(0.001, 0.999))
def test_cutting_a_frustum_anywhere_changes_nothing(key, which, share):
    swc = irregular(key, 20)
    row = trees.rows_of(swc)[which - 1]
    start = trees.rows_of(swc)[row.parent - 1]
    # A point far from the origin rounds away from a very short frustum's axis: that is another cable.
    h = float(np.linalg.norm(np.subtract(row.at, start.at)))
    assume(h > 1e-3 * (1 + np.abs(row.at).max()))
    assumptions = Assumptions(hz=(100.0,))
    whole = table(swc, assumptions)
    parts = table(trees.cut_frustum(swc, which, share), assumptions)
    assert_same(whole, {name: values[:20] for name, values in parts.items()}, 1e-12)


@pytest.mark.parametrize("share", [1e-6, 0.1, 0.5, 0.9, 1 - 1e-6])
@pytest.mark.parametrize("ends", [(1.0, 1.0), (2.0, 0.5), (0.5, 2.0), (0.05, 5.0), (1.0, 1.0 + 1e-9)])
@pytest.mark.parametrize("length", [0.01, 30.0, 1000.0, 20000.0])
def test_cutting_one_frustum(length, ends, share):
    swc = trees.frustum(length, *ends)
    assumptions = Assumptions(hz=(100.0,))
    whole, parts = table(swc, assumptions), table(trees.cut_frustum(swc, 2, share), assumptions)
    assert_same(whole, {name: values[:2] for name, values in parts.items()}, 1e-12)


def test_cutting_one_frustum_two_thousand_times():
    # Not a discretisation: many pieces give what one gives, but for rounding of the coordinates.
    swc = trees.frustum(1000.0, 4.0, 0.5)
    rows = [trees.Row(1, 3, (0.0, 0.0, 0.0), 2.0, -1)]
    for k in range(1, 2049):
        rows.append(trees.Row(k + 1, 3, (1000.0 * k / 2048, 0.0, 0.0), 2.0 - 1.75 * k / 2048, k))
    whole, parts = table(swc), table(trees.text_of(rows))
    assert_same(whole, {name: values[[0, -1]] for name, values in parts.items()}, 1e-11)


@modest
@given(key=keys, soma=st.booleans(), shuffle=st.randoms(use_true_random=False))
def test_renumbering_changes_nothing_at_all(key, soma, shuffle):
    swc = irregular(key, 20, soma)
    numbers = list(range(1, 21))
    new = sorted(shuffle.sample(range(1, 10_000), 20))
    assert_same(table(swc), table(trees.renumbered(swc, dict(zip(numbers, new, strict=True)))), 0)


@modest
@given(key=keys, soma=st.booleans(), shuffle=st.randoms(use_true_random=False))
def test_reordering_the_rows_changes_nothing(key, soma, shuffle):
    swc = irregular(key, 20, soma)
    order = list(range(20))
    shuffle.shuffle(order)
    assert_same(table(swc), table(trees.reordered(swc, order)), 1e-13)


@modest
@given(key=keys, soma=st.booleans(), mirror=st.booleans(), turn=keys)
def test_rotating_mirroring_and_translating_change_nothing(key, soma, mirror, turn):
    swc = irregular(key, 20, soma)
    moved = trees.moved(swc, trees.orthogonal(turn, mirror), (120.0, -75.0, 33.0))
    # Coordinates near 1000 um round at 1e-13 um; the shortest pieces are 5 nm.
    assert_same(table(swc), table(moved), 1e-9)


# ---------------------------------------------------------------- attenuation at 0 Hz


def assert_attenuation_at_least_one(swc, assumptions=DEFAULTS):
    rec = read(swc)
    result = solve(rec, assumptions)
    to, away = result.attenuation_to_soma[:, 0], result.attenuation_from_soma[:, 0]
    assert (to >= 1.0).all()
    assert (away >= 1.0).all()
    assert (result.log_attenuation_to_soma >= 0.0).all()
    assert (result.log_attenuation_from_soma >= 0.0).all()
    child = np.flatnonzero(rec.parent >= 0)
    parent = rec.parent[child]
    assert (away[child] >= away[parent]).all(), "from the soma, farther out is never less"
    assert (to[child] >= to[parent]).all(), "toward the soma, farther out is never less"
    R = result.R_transfer_MOhm[:, 0]
    assert (result.R_in_MOhm[:, 0] >= R).all()


@pytest.mark.parametrize("family", trees.FAMILIES)
def test_attenuation_is_at_least_one_exactly_in_every_family(family):
    assert_attenuation_at_least_one(trees.FAMILIES[family][0]())


@modest
@given(key=keys, soma=st.booleans(), tight=st.floats(2, 12))
def test_attenuation_is_at_least_one_exactly(key, soma, tight):
    # No tolerance, however tight the membrane: the sweeps only add, multiply and divide positive terms.
    membrane = Membrane(R_m_ohm_cm2=10.0**tight)
    assert_attenuation_at_least_one(irregular(key, 40, soma), Assumptions(membrane=membrane))


@modest
@given(key=keys)
def test_log_attenuation_toward_the_soma_adds_up_along_a_path(key):
    # Zador, Agmon-Snir & Segev 1995 J Neurosci 15:1669, abstract: L_ik = L_ij + L_jk for j on the path.
    swc = irregular(key, 12)
    rows = trees.rows_of(swc)
    whole = table(swc, fields=("log_attenuation_to_soma",))["log_attenuation_to_soma"][:, 0]
    for row in rows[1:]:
        on_path = row.parent
        part = table(trees.rerooted(swc, on_path), fields=("log_attenuation_to_soma",))
        rest = part["log_attenuation_to_soma"][row.number - 1, 0]
        assert np.isclose(whole[row.number - 1], rest + whole[on_path - 1], rtol=1e-11, atol=1e-13)


# ---------------------------------------------------------------- scaling laws


@modest
@given(k=st.floats(0.1, 10), pieces=st.integers(1, 5))
def test_lengths_by_k_and_diameters_by_k_squared(k, pieces):
    swc = trees.rall_neuron(trees=3, orders=2)  # coincident starts: every piece untapered, no soma
    one, other = table(swc), table(trees.scaled(swc, k, k * k))
    assert_same(one, other, 1e-12, skip=("Z_in", "Z_transfer", "path_um", "lambda_um"))
    for name, power in (("Z_in", -3), ("Z_transfer", -3), ("path_um", 1), ("lambda_um", 1)):
        np.testing.assert_allclose(other[name], one[name] * k**power, rtol=1e-12, atol=0, err_msg=name)
    swc = trees.cylinder(pieces=pieces)
    np.testing.assert_allclose(table(trees.scaled(swc, k, k * k))["X"], table(swc)["X"], rtol=1e-12, atol=0)


@modest
@given(key=keys, R_m=st.floats(1e3, 1e6), R_i=st.floats(30, 500))
def test_X_scales_as_the_root_of_R_i_over_R_m(key, R_m, R_i):
    swc = irregular(key, 20)
    given_constants = Assumptions(membrane=Membrane(R_m_ohm_cm2=R_m, R_i_ohm_cm=R_i))
    one, other = table(swc), table(swc, given_constants)
    factor = np.sqrt(R_i / R_m / (R_I / R_M))
    np.testing.assert_allclose(other["X"], one["X"] * factor, rtol=1e-13, atol=0)
    np.testing.assert_allclose(other["lambda_um"], one["lambda_um"] / factor, rtol=1e-13, atol=0)


@modest
@given(k=st.floats(0.01, 100))
def test_R_m_and_R_i_together_only_scale_resistance(k):
    swc = irregular(7, 20)
    scaled = Assumptions(membrane=Membrane(R_m_ohm_cm2=R_M * k, R_i_ohm_cm=R_I * k))
    one, other = table(swc), table(swc, scaled)
    assert_same(one, other, 1e-12, skip=("Z_in", "Z_transfer"))
    np.testing.assert_allclose(other["Z_in"], one["Z_in"] * k, rtol=1e-12, atol=0)


@pytest.mark.parametrize("orders", [0, 1, 2, 3])
@pytest.mark.parametrize("hz", [0.0, 100.0])
def test_a_cell_by_Ralls_conditions_is_its_equivalent_cylinder(orders, hz):
    # Rall 1962: seen from the soma, trunk d^(3/2) = sum of the stems' d^(3/2), the same L.
    membrane = Membrane(R_m_ohm_cm2=1e4, R_i_ohm_cm=100.0)
    assumptions = Assumptions(membrane=membrane, hz=(hz,) if hz else ())
    stems, d, L = 3, 4.0, 1.2
    tree = table(trees.rall_neuron(stems, orders, L, d), assumptions)
    trunk = d * stems ** (2 / 3)
    lam = 1e4 * np.sqrt(1e4 / 100 * trunk * 1e-4 / 4)
    cylinder = table(trees.cylinder(L * lam, trunk), assumptions)
    for name in ("Z_in", "attenuation_from_soma", "Z_transfer"):
        rows = [0] if name == "Z_in" else [0, -1]
        np.testing.assert_allclose(tree[name][rows], cylinder[name][rows], rtol=1e-12, atol=0, err_msg=name)
    assert np.isclose(tree["X"][-1, 0], L, rtol=1e-13, atol=0)


# ---------------------------------------------------------------- limits


@modest
@given(key=keys, soma=st.booleans())
def test_low_frequency_becomes_0_Hz(key, soma):
    result = solve(read(irregular(key, 20, soma)), Assumptions(hz=(1e-9,)))
    for name in ("R_in_MOhm", "R_transfer_MOhm", "attenuation_to_soma", "attenuation_from_soma"):
        values = getattr(result, name)
        np.testing.assert_allclose(values[:, 1], values[:, 0], rtol=1e-12, atol=0, err_msg=name)


@pytest.mark.parametrize("d", [0.5, 2.0, 8.0])
def test_one_lambda_away_on_a_very_long_cable_a_factor_e(d):
    lam = 1e4 * np.sqrt(R_M / R_I * d * 1e-4 / 4)
    tree = trees.Tree()
    last = tree.add((0, 0, 0), d / 2)
    for k in (0.5, 1.0, 2.0, 40.0):
        last = tree.add((k * lam, 0, 0), d / 2, last)
    values = table(tree.text())
    expected = np.exp([0, 0.5, 1, 2])
    np.testing.assert_allclose(values["attenuation_from_soma"][:4, 0], expected, rtol=1e-12, atol=0)
    assert np.isclose(values["lambda_um"][1, 0], lam, rtol=1e-13, atol=0)


def test_a_very_tight_cell_is_isopotential():
    swc = irregular(5, 30)
    text, weight = with_gauss_points(swc)
    area = sum(weight.values())
    R = solve(read(text), Assumptions(membrane=Membrane(R_m_ohm_cm2=1e15))).R_transfer_MOhm
    np.testing.assert_allclose(R[:, 0], 1e17 / area, rtol=1e-5)


def test_a_chain_a_hundred_thousand_samples_deep():
    swc = trees.deep_chain()
    result = solve(read(swc), Assumptions(hz=(100.0,)))
    one = table(
        trees.cylinder(10_000.0, 2.0), Assumptions(hz=(100.0,)), fields=("Z_in", "attenuation_from_soma")
    )
    np.testing.assert_allclose(result.Z_in[[0, -1]], one["Z_in"], rtol=1e-9)
    np.testing.assert_allclose(result.attenuation_from_soma[-1], one["attenuation_from_soma"][-1], rtol=1e-9)
    assert (np.diff(result.attenuation_from_soma[:, 0]) >= 0).all()
    assert (np.diff(result.attenuation_to_soma[:, 0]) >= 0).all()


# ---------------------------------------------------------------- cases


CHOICES = [
    Assumptions(),
    Assumptions(membrane=Membrane(R_m_ohm_cm2=7000.0, spine_factor=1.5)),
    Assumptions(soma_shunt_nS=5.0, domains={4: Membrane(R_i_ohm_cm=90.0)}),
]
COLUMNS = (*FIELDS, "R_in_MOhm", "log_attenuation_to_soma", "log_attenuation_from_soma")


@pytest.mark.parametrize("soma", [False, True])
def test_every_case_as_if_it_were_alone(soma):
    rec = read(irregular(3, 40, soma))
    hz = (10.0, 500.0)
    together = solve(rec, CHOICES, hz=hz)
    np.testing.assert_array_equal(together.hz, [0.0, *hz] * 3)
    for k, choice in enumerate(CHOICES):
        alone = solve(rec, choice, hz=hz)
        for name in COLUMNS:
            values = getattr(together, name)
            assert values.shape == (40, 9)
            # Which series a frustum takes depends on all its cases: the last digit may differ.
            np.testing.assert_allclose(
                values[:, 3 * k : 3 * k + 3], getattr(alone, name), rtol=1e-13, atol=0, err_msg=name
            )


def test_a_forest_is_each_cell_alone_bit_for_bit():
    builders = [build for build, _ in trees.FAMILIES.values()]
    recs = [read(build()) for build in builders] + [
        read(irregular(key, 50, key % 2 == 0)) for key in range(12)
    ]
    hz = (10.0, 500.0)
    cells = [build_cases(rec, CHOICES) for rec in recs]
    together = solve_cables(cells, cases_of(CHOICES, hz))
    assert len(together) == len(recs)
    for rec, forested in zip(recs, together, strict=True):
        alone = solve(rec, CHOICES, hz=hz)
        for name in COLUMNS:
            np.testing.assert_array_equal(
                getattr(forested.by_sample(), name), getattr(alone, name), err_msg=name
            )
