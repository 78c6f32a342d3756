"""The engine against the literal definitions at 50 digits, at every sample, over the named trees."""

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from mpmath import mp, mpf

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import solve
from morphotone.cable.frustum import pi_of_frusta
from morphotone.reading.reconstruction import reconstruct
from tests import definitions, trees
from tests.definitions import Choices, Constants, cable_of

DEFAULTS = Constants()
HZ = (0.0, 10.0, 100.0, 1000.0, 10000.0)
TOLERANCE = 1e-12
"""Relative, at every sample. Random cells deviate by 5e-14 at most."""


def engine(swc, assumptions, hz=HZ):
    """Solve SWC text and return the result with the row of each sample number."""
    rec = reconstruct(swc.encode(), file="tree.swc", cell="tree")
    result = solve(rec, replace(assumptions, hz=hz[1:]))
    return result, {int(number): row for row, number in enumerate(rec.number)}


@cache
def reference(swc, choices, hz):
    """Return the cable and its values by sample number, by the definitions."""
    cable = cable_of(swc, choices)
    return cable, definitions.electrotonus(cable, hz)


def deviation(got, expected):
    """Return |got - expected| / |expected| in multiple precision; both zero is no deviation."""
    if expected == 0:
        return float(abs(got))
    return float(abs(mp.mpmathify(complex(got)) - expected) / abs(expected))


def assert_equal_everywhere(swc, choices, assumptions, hz=HZ, tolerance=TOLERANCE):
    """Compare everything that is read off, at every sample and frequency; name the first that differs."""
    result, row = engine(swc, assumptions, hz)
    for case, f in enumerate(hz):
        cable, expected = reference(swc, choices, f)
        assert result.hz[case] == f
        for number in row:
            here = (row[number], case)
            if number not in expected:
                assert np.isnan(result.R_in_MOhm[here]), f"sample {number} is no part of the cable"
                continue
            value = expected[number]
            pairs = {
                "Z_in": (result.Z_in[here], value.Z_in),
                "Z_transfer": (result.Z_transfer[here], value.Z_transfer),
                "R_in": (result.R_in_MOhm[here], abs(value.Z_in)),
                "R_transfer": (result.R_transfer_MOhm[here], abs(value.Z_transfer)),
                "to soma": (result.attenuation_to_soma[here], abs(value.attenuation_to_soma)),
                "from soma": (result.attenuation_from_soma[here], abs(value.attenuation_from_soma)),
                "X": (result.X[here], cable.X[number]),
                "path": (_at(result.path_um, here), cable.path[number]),
            }
            for name, (got, wanted) in pairs.items():
                assert deviation(got, wanted) <= tolerance, (
                    f"{name} of sample {number} at {f} Hz: {got}, by definition {mp.nstr(wanted, 17)}"
                )
            for name, got, wanted in (
                ("log to", result.log_attenuation_to_soma[here], mp.log(abs(value.attenuation_to_soma))),
                (
                    "log from",
                    result.log_attenuation_from_soma[here],
                    mp.log(abs(value.attenuation_from_soma)),
                ),
            ):
                # At a frequency a logarithm may pass through zero; at 0 Hz even the smallest has its digits.
                scale = max(1.0, float(abs(wanted))) if f else float(abs(wanted))
                assert float(abs(mpf(float(got)) - wanted)) <= tolerance * scale, (
                    f"{name} of sample {number} at {f} Hz: {got}, by definition {mp.nstr(wanted, 17)}"
                )


def _at(values, here):
    """Return a value of a field by sample, or by sample and case."""
    return values[here] if values.ndim == 2 else values[here[0]]


def choices_and_assumptions(soma_rule="none", membrane=DEFAULTS, domains=None, **shared):
    """Say the same thing to the reference and to the engine."""
    domains = domains or {}
    asked = {kind: _membrane(c) for kind, c in domains.items()}
    rule = {} if soma_rule in ("sphere", "none") else {"soma_rule": soma_rule}
    choices = Choices(soma_rule=soma_rule, constants=membrane, domains=Frozen(domains), **shared)
    return choices, Assumptions(membrane=_membrane(membrane), domains=asked, **rule, **shared)


def _membrane(c):
    return Membrane(R_m_ohm_cm2=c.R_m, R_i_ohm_cm=c.R_i, C_m_uF_cm2=c.C_m, spine_factor=c.F)


class Frozen(dict):
    """A dict that can be part of a cache key."""

    def __hash__(self):
        return hash(tuple(sorted(self.items(), key=lambda item: item[0])))


# ---------------------------------------------------------------- whole trees


@pytest.mark.parametrize("family", trees.FAMILIES)
def test_every_family_with_the_defaults(family):
    build, rule = trees.FAMILIES[family]
    assert_equal_everywhere(build(), *choices_and_assumptions(rule))


@pytest.mark.parametrize("branch_start", ["parent radius", "own radius"])
@pytest.mark.parametrize("family", ["star", "caterpillar", "zero-length joints", "irregular with soma"])
def test_daughters_start_with_either_radius(family, branch_start):
    build, rule = trees.FAMILIES[family]
    both = choices_and_assumptions(rule, branch_start=branch_start)
    assert_equal_everywhere(build(), *both, hz=(0.0, 100.0))


def test_the_two_ways_to_start_a_branch_differ():
    swc = trees.star()
    literal, _ = engine(swc, Assumptions(), hz=(0.0,))
    own, _ = engine(swc, Assumptions(branch_start="own radius"), hz=(0.0,))
    assert not np.allclose(literal.R_in_MOhm, own.R_in_MOhm, rtol=1e-3)


TWO_SOMAS = "1 1 0 0 0 5 -1\n2 3 30 0 0 1 1\n3 1 60 0 0 4 2\n4 1 66 0 0 3 3\n5 3 90 0 0 1 4\n"


def test_a_second_soma_group_is_ordinary_cable():
    choices, assumptions = choices_and_assumptions("sphere", domains=DOMAINS)
    assert_equal_everywhere(TWO_SOMAS, choices, assumptions, hz=(0.0, 100.0))


@pytest.mark.parametrize("root", [2, 5, 9, 18])
def test_a_soma_that_is_not_the_root_becomes_it(root):
    swc = trees.irregular(18, 3, soma=True)
    choices, assumptions = choices_and_assumptions("sphere")
    result, row = engine(trees.rerooted(swc, root), assumptions, hz=(0.0, 100.0))
    for case, f in enumerate((0.0, 100.0)):
        for number, value in reference(swc, choices, f)[1].items():
            assert deviation(result.Z_in[row[number], case], value.Z_in) <= TOLERANCE
            assert deviation(result.Z_transfer[row[number], case], value.Z_transfer) <= TOLERANCE


def test_an_orphan_within_the_gap_is_joined_where_it_is_nearest():
    main = "1 1 0 0 0 7 -1\n2 3 20 0 0 1.5 1\n3 3 120 0 0 1 2\n"
    apart = main + "4 3 200 0 0 0.8 -1\n5 3 124 3 0 0.9 4\n6 3 300 10 0 0.5 4\n"
    joined = main + "5 3 124 3 0 0.9 3\n4 3 200 0 0 0.8 5\n6 3 300 10 0 0.5 4\n"
    choices, assumptions = choices_and_assumptions("sphere")
    result, row = engine(apart, replace(assumptions, orphans="joined", orphan_gap_um=5.5), hz=(0.0,))
    for number, value in reference(joined, choices, 0.0)[1].items():
        assert deviation(result.Z_in[row[number], 0], value.Z_in) <= TOLERANCE
    left_out, row = engine(apart, assumptions, hz=(0.0,))
    for number, value in reference(main, choices, 0.0)[1].items():
        assert deviation(left_out.Z_in[row[number], 0], value.Z_in) <= TOLERANCE
    assert np.isnan(left_out.Z_in[[row[4], row[5], row[6]]]).all()


def test_a_branch_point_stays_one_when_the_axon_is_left_out():
    swc = "1 3 0 0 0 1 -1\n2 3 100 0 0 1 1\n3 3 200 0 0 0.3 2\n4 2 100 50 0 0.2 2\n"
    both = choices_and_assumptions(branch_start="own radius", axon="left out")
    assert_equal_everywhere(swc, *both, hz=(0.0,))


DOMAINS = {
    1: Constants(3000.0, 150.0, 1.0, 1.0),
    2: Constants(50000.0, 70.0, 0.5, 1.0),
    4: Constants(12000.0, 200.0, 0.9, 1.8),
}


@pytest.mark.parametrize(
    ("axon", "cut"),
    [("kept", None), ("left out", None), ("cut", 0.0), ("cut", 40.0), ("cut", 150.0), ("cut", 1e6)],
)
def test_axon_and_constants_by_domain(axon, cut):
    shared = {"axon": axon} | ({} if cut is None else {"axon_cut_um": cut})
    choices, assumptions = choices_and_assumptions("sphere", domains=DOMAINS, **shared)
    assert_equal_everywhere(trees.with_axon(), choices, assumptions, hz=(0.0, 100.0))


@pytest.mark.parametrize("shunt", [0.1, 10.0, 1e4])
@pytest.mark.parametrize("family", ["ball and stick", "stem within the soma", "soma chain"])
def test_soma_shunt(family, shunt):
    build, rule = trees.FAMILIES[family]
    assert_equal_everywhere(build(), *choices_and_assumptions(rule, soma_shunt_nS=shunt), hz=(0.0, 1000.0))


@pytest.mark.parametrize(
    ("shrinkage", "factor", "offset"),
    [((1.1, 1.2, 2.5), 1.0, 0.0), ((1.0, 1.0, 1.0), 1.3, 0.0), ((1.25, 1.0, 1.0), 0.8, 0.1)],
)
@pytest.mark.parametrize("family", ["irregular with soma", "soma of three points", "star"])
def test_shrinkage_and_diameter_correction(family, shrinkage, factor, offset):
    build, rule = trees.FAMILIES[family]
    choices, assumptions = choices_and_assumptions(
        rule, shrinkage=shrinkage, diameter_factor=factor, diameter_offset_um=offset
    )
    assert_equal_everywhere(build(), choices, assumptions, hz=(0.0, 100.0))


@pytest.mark.parametrize("spines", [1.0, 1.7, 4.0])
def test_spine_factor_is_R_m_over_F_and_C_m_times_F(spines):
    folded = Constants(20000.0 / spines, 150.0, spines, 1.0)
    choices, _ = choices_and_assumptions(membrane=folded)
    _, assumptions = choices_and_assumptions(membrane=Constants(F=spines))
    assert_equal_everywhere(trees.star(3), choices, assumptions, hz=(0.0, 100.0))


@pytest.mark.parametrize(
    "constants", [Constants(500.0, 400.0, 2.0), Constants(200000.0, 50.0, 0.5), Constants(1e9, 100.0, 1.0)]
)
@pytest.mark.parametrize("family", ["extremes", "irregular with soma"])
def test_leaky_and_tight_membranes(family, constants):
    build, rule = trees.FAMILIES[family]
    assert_equal_everywhere(build(), *choices_and_assumptions(rule, constants), hz=(0.0, 100.0))


@pytest.mark.slow
@pytest.mark.parametrize("soma", [False, True])
@pytest.mark.parametrize("key", range(10, 22))
def test_larger_random_trees(key, soma):
    swc = trees.irregular(45, key, soma)
    assert_equal_everywhere(swc, *choices_and_assumptions("sphere" if soma else "none"))


# ---------------------------------------------------------------- one frustum

RATIOS = (1.0, 1.0 + 1e-12, 1.0001, 1.5, 2.0, 20.0)
LENGTHS = (1e-6, 1e-5, 1e-3, 0.1, 0.5, 1.0, 2.0, 5.0)


def length_of_L(L, r_start, r_end, R_m=20000.0, R_i=150.0):
    """Return the length (um) at which a frustum has the electrotonic length L, slant left aside."""
    return L * (np.sqrt(r_start) + np.sqrt(r_end)) / 2 * np.sqrt(R_m * 1e4 / (2 * R_i))


def assert_frusta_by_definition(ratios, lengths, hz, tolerance):
    """Compare axial admittance and both shunts, each as such, with the Bessel two-port at 50 digits."""
    for f in hz:
        g = 1.0 / 20000.0 + (2j * np.pi * f * 1e-6 if f else 0.0)
        exact_g = Constants().g(f)
        for ratio in ratios:
            for L in lengths:
                for r1, r2 in ((0.7, 0.7 * ratio), (0.7 * ratio, 0.7)):
                    h = length_of_L(L, r1, r2)
                    column = [np.array([[v]]) for v in (r1, r2, h, 150.0, g)]
                    got = pi_of_frusta(*column)
                    y11, y12, y22 = definitions.two_port(r1, r2, h, 150.0, exact_g)
                    wanted = (-y12, y11 + y12, y22 + y12)
                    for name, a, b in zip(("axial", "start", "end"), got, wanted, strict=True):
                        assert deviation(a[0, 0], b) <= tolerance, (
                            f"{name} of r {r1} to {r2}, length {h} um (L {L}), {f} Hz: "
                            f"{a[0, 0]}, by definition {mp.nstr(b, 17)}"
                        )


def test_one_frustum_over_lengths_ratios_and_frequencies():
    assert_frusta_by_definition(RATIOS, LENGTHS, (0.0, 100.0, 10000.0), 1e-13)


@pytest.mark.slow
def test_one_frustum_over_a_finer_grid():
    ratios = (
        *RATIOS,
        1 + 1e-9,
        1 + 1e-7,
        1 + 1e-5,
        1.001,
        1.01,
        1.019,
        1.021,
        1.1,
        1.3,
        1.9,
        2.1,
        5.0,
        100.0,
    )
    lengths = np.geomspace(1e-7, 10, 13)
    assert_frusta_by_definition(ratios, lengths, (0.0, 100.0, 10000.0), 1e-13)


# ---------------------------------------------------------------- the reference itself


@pytest.mark.parametrize("z", [0.001, 0.7, 3.0, 20.0, 119.0, 121.0, 3 + 2j, 30 + 30j])
def test_the_reference_K1_is_mpmaths(z):
    with mp.workdps(40):
        assert abs(definitions.bessel_K1(mp.mpmathify(z)) / mp.besselk(1, z) - 1) < mpf("1e-38")


def test_the_reference_taper_becomes_the_reference_cylinder():
    g = Constants().g(100.0)
    taper = definitions.two_port(1, 1 + mpf("1e-25"), 100, 150, g)
    straight = definitions.two_port(1, 1, 100, 150, g)
    for a, b in zip(taper, straight, strict=True):
        assert abs(a - b) / abs(b) < mpf("1e-20")


def test_the_reference_taper_solves_the_cable_equation():
    # (r^2 V')' = 2 R_i g sqrt(1 + r'^2) r V by mpmath's Taylor-series solver, from a sealed far end.
    r1, r2, h, g = mpf(2), mpf(1), mpf(300), Constants().g(0)
    slope = (r2 - r1) / h
    resistivity = mpf("1.5")  # 150 ohm cm in MOhm um
    weight = 2 * resistivity * g * mp.sqrt(1 + slope**2)

    def equation(u, y):  # u runs from the sealed end back to the start; y = (V, r^2 dV/du)
        r = r2 - slope * u
        return [y[1] / r**2, weight * r * y[0]]

    with mp.workdps(20):
        V, flux = mp.odefun(equation, 0, [mpf(1), mpf(0)])(h)
    y11, y12, y22 = definitions.two_port(r1, r2, h, 150, g)
    assert abs((y11 - y12**2 / y22) / (mp.pi * flux / resistivity / V) - 1) < mpf("1e-14")
    assert abs(-y12 / y22 * V - 1) < mpf("1e-14")
