"""Delays against derivatives at 50 digits, and the laws they obey."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from mpmath import mp, mpf

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.delays import delays
from morphotone.cable.electrotonus import solve
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import definitions, trees
from tests.cable.at_rate import AtRate
from tests.cable.test_laws import with_gauss_points, with_short_pieces
from tests.definitions import Choices, cable_of

modest = settings(deadline=None, max_examples=15, derandomize=True)
keys = st.integers(0, 10_000)
DEFAULTS = Assumptions()
TAU_MS = 20.0
FIELDS = ("total_ms", "local_ms", "propagation_ms", "net_ms")


def read(swc):
    return reconstruct(swc.encode(), file="tree.swc", cell="tree")


def solved(swc, assumptions=DEFAULTS):
    """Return the delays by sample number of a file that counts from 1."""
    rec = read(swc)
    (result,) = delays([build(rec, assumptions)], assumptions)
    by_sample = result.by_sample()
    row = np.argsort(rec.number)
    return {name: getattr(by_sample, name)[row] for name in (*FIELDS, "R_in_MOhm", "C_in_pF")}


# ---------------------------------------------------------------- against the definitions


STEP = mpf("1e-14")  # 1/s: the difference quotient is off by (STEP τ)², and keeps 30 of 50 digits


def reference(swc, choices):
    """Return sample number -> the four delays, ms, as symmetric difference quotients of ln Z at 50 digits."""
    cable = cable_of(swc, choices)
    up, down = (definitions.impedance_matrix(cable, s) for s in (STEP, -STEP))

    def late(i, j):
        return -(mp.log(up[i, j]) - mp.log(down[i, j])) / (2 * STEP) * 1000

    return {
        number: (late(i, 0), late(i, i), late(i, 0) - late(i, i), late(i, 0) - late(0, 0))
        for number, i in cable.node.items()
    }


def assert_as_defined(swc, choices, assumptions):
    """Each to 1e-12, the smallest propagation delay included."""
    result = solved(swc, assumptions)
    for number, expected in reference(swc, choices).items():
        for name, wanted in zip(FIELDS, map(float, expected), strict=True):
            assert abs(result[name][number - 1] - wanted) <= 1e-12 * abs(wanted), (name, number, wanted)


@pytest.mark.parametrize("family", trees.FAMILIES)
def test_every_family_as_defined(family):
    builder, rule = trees.FAMILIES[family]
    assert_as_defined(builder(), Choices(soma_rule=rule, constants=AtRate()), DEFAULTS)


def test_constants_by_domain_spines_and_a_shunt_as_defined():
    domains = {
        2: AtRate(R_m=15000.0, C_m=0.8),
        4: AtRate(R_i=90.0, C_m=1.3, F=1.7),
    }
    choices = Choices("sphere", AtRate(R_m=12000.0), domains, soma_shunt_nS=4.0)
    assumptions = Assumptions(
        membrane=Membrane(R_m_ohm_cm2=12000.0),
        domains={
            2: Membrane(R_m_ohm_cm2=15000.0, C_m_uF_cm2=0.8),
            4: Membrane(R_i_ohm_cm=90.0, C_m_uF_cm2=1.3, spine_factor=1.7),
        },
        soma_shunt_nS=4.0,
    )
    assert_as_defined(trees.with_axon(), choices, assumptions)


# ---------------------------------------------------------------- laws


@modest
@given(key=keys, a=st.integers(1, 30), b=st.integers(1, 30))
def test_total_delay_is_the_same_in_both_directions(key, a, b):
    # Agmon-Snir & Segev 1993, abstract: TD(y, x) = TD(x, y).
    swc = trees.irregular(30, key)
    from_a, from_b = (solved(trees.rerooted(swc, number)) for number in (a, b))
    assert np.isclose(from_a["total_ms"][b - 1], from_b["total_ms"][a - 1], rtol=1e-12, atol=0)
    np.testing.assert_allclose(from_a["local_ms"], from_b["local_ms"], rtol=1e-12)


@modest
@given(key=keys, a=st.integers(1, 30), b=st.integers(1, 30))
def test_net_delay_is_propagation_the_other_way(key, a, b):
    # H. Agmon-Snir, NIDDK MRB pages (mrb.niddk.nih.gov/hagai/publ/decpoi/Cost.html): NDD(d, s) = PD(s, d).
    swc = trees.irregular(30, key)
    from_a, from_b = (solved(trees.rerooted(swc, number)) for number in (a, b))
    assert np.isclose(from_a["net_ms"][b - 1], from_b["propagation_ms"][a - 1], rtol=1e-12, atol=0)


@modest
@given(key=keys, site=st.integers(1, 14))
def test_mean_delay_over_all_membrane_is_tau(key, site):
    # Charge balance: weighted with area times transfer resistance, whatever the site.
    text, weight = with_gauss_points(with_short_pieces(trees.irregular(14, key), site))
    rec = read(text)
    (result,) = delays([build(rec, DEFAULTS)], DEFAULTS)
    by_sample = result.by_sample()
    area = np.array([weight.get(int(number), 0.0) for number in rec.number])
    R = solve(rec, DEFAULTS).Z_transfer[:, 0]
    assert np.isclose(np.average(by_sample.total_ms, weights=area * R), TAU_MS, rtol=1e-9, atol=0)


@pytest.mark.parametrize("C_m", [0.5, 1.0, 3.0])
def test_delays_scale_with_C_m(C_m):
    swc = trees.irregular(30, 4, soma=True)
    one, other = (solved(swc, Assumptions(membrane=Membrane(C_m_uF_cm2=c))) for c in (1.0, C_m))
    for name in FIELDS:
        np.testing.assert_allclose(other[name], C_m * one[name], rtol=1e-12, atol=0)


def test_one_sphere_has_the_membrane_time_constant_and_its_capacitance():
    r = 10.0
    result = solved(f"1 1 0 0 0 {r} -1\n2 3 {r / 2} 0 0 1 1\n")  # a stem that ends within the soma
    assert np.isclose(result["total_ms"][0], TAU_MS, rtol=1e-14, atol=0)
    assert np.isclose(result["local_ms"][0], TAU_MS, rtol=1e-14, atol=0)
    assert result["propagation_ms"][0] == result["net_ms"][0] == 0.0
    assert np.isclose(result["C_in_pF"][0], 4 * np.pi * r**2 * 1e-2, rtol=1e-13, atol=0)


def test_input_capacitance_at_the_soma_is_below_the_whole_membrane():
    swc = trees.ball_and_stick()
    whole = (4 * np.pi * 10.0**2 + np.pi * 2.0 * 600.0) * 1e-2
    result = solved(swc)
    assert 4 * np.pi * 10.0**2 * 1e-2 < result["C_in_pF"][0] < whole
    tight = solved(swc, Assumptions(membrane=Membrane(R_i_ohm_cm=1e-6)))
    assert np.isclose(tight["C_in_pF"][0], whole, rtol=1e-7, atol=0)


# ---------------------------------------------------------------- per cell, company


def test_mean_over_the_membrane_and_greatest():
    # Two cylinders of one size from the root: by hand, weights of ends and middle 1 : 2 : 1.
    swc = trees.cylinder(1000.0, 4.0, pieces=2)
    (result,) = delays([build(read(swc), DEFAULTS)], DEFAULTS)
    total = result.total_ms
    assert np.isclose(result.membrane_mean_ms(), (total[0] + 2 * total[1] + total[2]) / 4, rtol=1e-14)
    assert result.greatest_ms() == total[2] == total.max()


def test_mean_over_the_membrane_counts_the_soma():
    (result,) = delays([build(read(trees.ball_and_stick(pieces=1)), DEFAULTS)], DEFAULTS)
    soma, stick = 4 * np.pi * 100.0, np.pi * 2.0 * 600.0
    expected = ((soma + stick / 2) * result.total_ms[0] + stick / 2 * result.total_ms[1]) / (soma + stick)
    assert np.isclose(result.membrane_mean_ms(), expected, rtol=1e-13)


def test_samples_that_are_left_out_have_no_delay():
    assumptions = Assumptions(axon="left out")
    rec = read(trees.with_axon())
    (result,) = delays([build(rec, assumptions)], assumptions)
    by_sample = result.by_sample()
    axon = rec.kind == trees.AXON
    for name in FIELDS:
        np.testing.assert_array_equal(np.isnan(getattr(by_sample, name)), axon)
    assert np.isfinite(by_sample.greatest_ms())


def test_a_forest_is_each_cell_alone_bit_for_bit():
    cells = [build(read(builder()), DEFAULTS) for builder, _ in trees.FAMILIES.values()]
    for cable, together in zip(cells, delays(cells, DEFAULTS), strict=True):
        (alone,) = delays([cable], DEFAULTS)
        for name in FIELDS:
            np.testing.assert_array_equal(getattr(together, name), getattr(alone, name))


def test_no_cells_no_delays():
    assert delays([], DEFAULTS) == []
