"""Published values for untapered cable: space constants, input resistance, attenuation, spines, fins."""

from math import cosh, pi, sinh, tanh

import numpy as np
import pytest

from tests import trees
from tests.outside.cells import R_infinity, cable_of_L, lambda_um, pi_of, solved
from tests.outside.published import (
    ASHCROFT,
    DATA_HANDBOOK,
    ERMENTROUT,
    GABBIANI_COX,
    LOOKED_UP_FORMULA,
    LOOKED_UP_VALUE,
    MEMORY,
    MEMORY_VALUE,
    RALL_1959,
    YOUNG_FREEDMAN,
    assert_published,
    rows,
)

# ---------------------------------------------------------------- space constant, semi-infinite cable

LAMBDA = [  # given: R_m ohm cm2, R_i ohm cm, d um; expected um
    *rows(
        ERMENTROUT,
        LOOKED_UP_FORMULA,
        1e-9,
        ("lam_10000_100_1", (10000, 100, 1), 500.0),
        ("lam_10000_100_4", (10000, 100, 4), 1000.0),
        ("lam_20000_200_4", (20000, 200, 4), 1000.0),
        ("lam_20000_100_2", (20000, 100, 2), 1000.0),
        ("lam_2500_70_1", (2500, 70, 1), 298.8071523),
    ),
    *rows(YOUNG_FREEDMAN, LOOKED_UP_FORMULA, 1e-8, ("YF_swc", (251.3274123, 100.5309649, 10), 250.0)),
    *rows(ASHCROFT, LOOKED_UP_VALUE, 0.003, ("Ash_lam", (3125, 149.4768, 86.805), 2130.0)),
    *rows(
        "Dayan & Abbott 2001, Theoretical Neuroscience, ch. 6",
        MEMORY_VALUE,
        1e-6,
        ("mem_DA_lam", (10000, 100, 4), 1000.0),  # r_m = 1 MOhm mm2, r_L = 1 kOhm mm, radius 2 um
    ),
    *rows(
        "Koch 1999, Biophysics of Computation, ch. 2",
        MEMORY_VALUE,
        1e-6,
        ("mem_Koch_lam", (20000, 200, 4), 1000.0),
    ),
    *rows(
        "Gerstner et al., Neuronal Dynamics, section 3.2",
        MEMORY_VALUE,
        0.03,
        ("mem_ND_lam", (30000, 100, 2), 1200.0),
    ),
    *rows(
        "Katz 1966, Nerve, Muscle and Synapse, table of cable constants",
        MEMORY_VALUE,
        0.081,  # within 8 % of the computed 5.4 mm
        ("mem_Katz_squid", (700, 30, 500), 5000.0),
    ),
    *rows(
        "Katz 1966, Nerve, Muscle and Synapse, table of cable constants",
        MEMORY_VALUE,
        0.01,
        ("mem_Katz_lobster", (2000, 60, 75), 2500.0),
        ("mem_Katz_crab", (5000, 60, 30), 2500.0),
    ),
    *rows(
        "Katz 1966, Nerve, Muscle and Synapse, table of cable constants",
        MEMORY_VALUE,
        0.035,
        ("mem_Katz_frog_muscle", (4000, 200, 75), 2000.0),
    ),
]


@pytest.mark.parametrize("row", LAMBDA)
def test_space_constant(row):
    R_m, R_i, d = row.given
    result = solved(trees.cylinder(700.0, d), R_m, R_i)
    assert_published(result.lambda_um[1, 0], row)
    assert_published(700.0 / result.X[1, 0], row)


R_INF = rows(  # given: R_m, R_i, d; expected MOhm
    ERMENTROUT,
    LOOKED_UP_FORMULA,
    1e-9,
    ("Rinf_10000_100_1", (10000, 100, 1), 636.6197724),
    ("Rinf_10000_100_4", (10000, 100, 4), 79.57747155),
    ("Rinf_20000_200_4", (20000, 200, 4), 159.1549431),
    ("Rinf_20000_100_2", (20000, 100, 2), 318.3098862),
    ("Rinf_2500_70_1", (2500, 70, 1), 266.3171578),
)


def R_in_of_a_very_long_cable(R_m, R_i, d):
    return solved(cable_of_L(30.0, R_m, R_i, d), R_m, R_i).R_in_MOhm[0, 0]


@pytest.mark.parametrize("row", R_INF)
def test_input_resistance_of_a_semi_infinite_cylinder(row):
    assert_published(R_in_of_a_very_long_cable(*row.given), row)


DOUBLED = rows(
    ERMENTROUT,
    LOOKED_UP_FORMULA,
    1e-9,
    ("Rinf_scale_d", ("R_in",), 0.3535533906),
    ("lam_scale_d", ("lambda",), 1.414213562),
)


@pytest.mark.parametrize("row", DOUBLED)
def test_double_the_diameter(row):
    if row.given == ("R_in",):
        ratio = R_in_of_a_very_long_cable(1e4, 100, 3.0) / R_in_of_a_very_long_cable(1e4, 100, 1.5)
    else:
        thin, thick = (solved(trees.cylinder(500.0, d)).lambda_um[1, 0] for d in (1.5, 3.0))
        ratio = thick / thin
    assert_published(ratio, row)


# ---------------------------------------------------------------- finite cables

SEALED = rows(
    "Gabbiani & Cox, Mathematics for Neuroscientists, sealed cable at x = 0: coth L; " + RALL_1959,
    LOOKED_UP_FORMULA,
    1e-9,
    ("Rin_sealed_0.1", (0.1,), 10.03331113),
    ("Rin_sealed_0.2", (0.2,), 5.066489563),
    ("Rin_sealed_0.5", (0.5,), 2.163953414),
    ("Rin_sealed_1", (1.0,), 1.313035285),
    ("Rin_sealed_1.5", (1.5,), 1.104791393),
    ("Rin_sealed_2", (2.0,), 1.037314721),
    ("Rin_sealed_3", (3.0,), 1.004969823),
)


@pytest.mark.parametrize("row", SEALED)
def test_input_resistance_of_a_sealed_cable(row):
    R_in = solved(cable_of_L(*row.given)).R_in_MOhm[:, 0] / R_infinity(1e4, 100, 4.0)
    assert_published(R_in[0], row)
    assert_published(R_in[1], row)


KILLED = rows(  # tanh L
    RALL_1959,
    MEMORY,
    1e-9,
    ("Rin_killed_0.1", (0.1,), 0.09966799462),
    ("Rin_killed_0.2", (0.2,), 0.1973753202),
    ("Rin_killed_0.5", (0.5,), 0.4621171573),
    ("Rin_killed_1", (1.0,), 0.761594156),
    ("Rin_killed_1.5", (1.5,), 0.9051482536),
    ("Rin_killed_2", (2.0,), 0.9640275801),
    ("Rin_killed_3", (3.0,), 0.9950547537),
)


@pytest.mark.parametrize("row", KILLED)
def test_input_resistance_with_a_killed_end(row):
    # A killed end is a short circuit: the end's shunt drops out of the π.
    axial, start, _ = pi_of(2.0, 2.0, row.given[0] * 1000.0, 100.0, 1e-4)
    assert_published(1 / (axial + start) / R_infinity(1e4, 100, 4.0), row)


ATTENUATION = rows(
    "Mechanical Engineer's Data Handbook p. 130: insulated-tip profile cosh m(L-x)/cosh mL; " + RALL_1959,
    LOOKED_UP_FORMULA,
    1e-9,
    ("att_sealed_0.1", (0.1,), 1.005004168),
    ("att_sealed_0.2", (0.2,), 1.020066756),
    ("att_sealed_0.5", (0.5,), 1.127625965),
    ("att_sealed_1", (1.0,), 1.543080635),
    ("att_sealed_1.5", (1.5,), 2.352409615),
    ("att_sealed_2", (2.0,), 3.762195691),
    ("att_sealed_3", (3.0,), 10.067662),
)


@pytest.mark.parametrize("row", ATTENUATION)
def test_steady_attenuation_to_a_sealed_end(row):
    result = solved(cable_of_L(*row.given))
    assert_published(result.attenuation_from_soma[1, 0], row)
    assert_published(result.attenuation_to_soma[1, 0], row)  # a cylinder is the same from both ends
    assert_published(np.exp(result.log_attenuation_from_soma[1, 0]), row)


TERMINATED = rows(  # given: B = G_L/G_inf, L, what; (B + tanh L)/(1 + B tanh L) and 1/(cosh L + B sinh L)
    RALL_1959 + "; boundary ratio B as in London et al. 1999, Table 1",
    MEMORY,
    1e-9,
    ("Gin_B0.25_L0.5", (0.25, 0.5, "G"), 0.638367064),
    ("Vratio_B0.25_L0.5", (0.25, 0.5, "V"), 0.794975885),
    ("Gin_B0.25_L1", (0.25, 1.0, "G"), 0.8497945208),
    ("Vratio_B0.25_L1", (0.25, 1.0, "V"), 0.5444010997),
    ("Gin_B0.25_L2", (0.25, 2.0, "G"), 0.978260141),
    ("Vratio_B0.25_L2", (0.25, 2.0, "V"), 0.2141827172),
    ("Gin_B4_L0.5", (4.0, 0.5, "G"), 1.566496858),
    ("Vratio_B4_L0.5", (4.0, 0.5, "V"), 0.3113318065),
    ("Gin_B4_L1", (4.0, 1.0, "G"), 1.176755057),
    ("Vratio_B4_L1", (4.0, 1.0, "V"), 0.1601566868),
    ("Gin_B4_L2", (4.0, 2.0, "G"), 1.022222984),
    ("Vratio_B4_L2", (4.0, 2.0, "V"), 0.05473562405),
    ("B1_identity", (1.0, 1.0, "V"), 0.3678794412),
)


@pytest.mark.parametrize("row", TERMINATED)
def test_cable_with_a_leaky_end(row):
    B, L, what = row.given
    G_inf = 1 / R_infinity(1e4, 100, 4.0)
    axial, start, end = pi_of(2.0, 2.0, L * 1000.0, 100.0, 1e-4)
    beyond = end + B * G_inf
    got = (start + axial * beyond / (axial + beyond)) / G_inf if what == "G" else axial / (axial + beyond)
    assert_published(got, row)


ALONG = rows(  # given: x um; radius 1 um, 1 mm, R_m 15000, R_i 300
    GABBIANI_COX,
    LOOKED_UP_FORMULA,
    1e-9,
    ("GC_0", (0.0,), 495.281296),
    ("GC_0.025", (250.0,), 349.2115177),
    ("GC_0.05", (500.0,), 313.4640842),
)


@pytest.mark.parametrize("row", ALONG)
def test_input_resistance_along_a_sealed_cable(row):
    result = solved(trees.cylinder(1000.0, 2.0, pieces=4), 15000.0, 300.0)
    R_in = result.R_in_MOhm[:, 0]
    assert_published(R_in[int(row.given[0] // 250)], row)
    np.testing.assert_allclose(R_in, R_in[::-1], rtol=1e-13)


GREEN = rows(  # sealed cylinder L = 1.5, d = 2 um, soma at X = 0, e at X = 1.2, l at X = 0.6
    "finite cable Green function",
    MEMORY,
    1e-9,
    ("K_is", ("transfer",), 110.4992722),
    ("K_ee", ("input",), 200.0761223),
) + rows(
    "Koch, Poggio & Torre 1982 Phil Trans R Soc B 298:227-264: K_is = K_il K_ls / K_ll for l on the path",
    MEMORY,
    1e-9,
    ("onpath_id", ("on path",), 110.4992722),
)


@pytest.mark.parametrize("row", GREEN)
def test_greens_function_of_a_sealed_cable(row):
    swc = cable_of_L(1.5, d=2.0, samples_at=(0.6, 1.2))
    result = solved(swc)
    if row.given == ("on path",):
        from_l = solved(trees.rerooted(swc, 2))  # the root comes first: samples 2, 1, 3, 4
        K_il, K_ll = from_l.R_transfer_MOhm[2, 0], from_l.R_in_MOhm[0, 0]
        got = K_il * result.R_transfer_MOhm[1, 0] / K_ll
    else:
        got = {"transfer": result.R_transfer_MOhm, "input": result.R_in_MOhm}[row.given[0]][2, 0]
    assert_published(got, row)


FIBRE = rows(ASHCROFT, LOOKED_UP_FORMULA, 1e-9, ("Ash_L", (1.3,), 0.7692307692))


@pytest.mark.parametrize("row", FIBRE)
def test_electrotonic_length_of_a_fibre_whose_lambda_is_known(row):
    lam = lambda_um(3125, 149.4768, 86.805)
    assert_published(solved(trees.cylinder(lam / row.given[0], 86.805), 3125, 149.4768).X[1, 0], row)


# ---------------------------------------------------------------- ladders and branch points

AXON = [  # given: R_m, expected; cylinder of 10 um, R_i 100.5309649: 6.4 kOhm per um in each rail
    *rows(YOUNG_FREEDMAN, LOOKED_UP_VALUE, 0.016, ("YF_RT", (251.3274123, "R"), 3.2)),
    *rows(YOUNG_FREEDMAN, LOOKED_UP_VALUE, 0.0125, ("YF_beta", (251.3274123, "beta"), 4.0e-3)),
    *rows(YOUNG_FREEDMAN, LOOKED_UP_VALUE, 0.015, ("YF_att", (251.3274123, "V"), 3.4e-4)),
    # shunt 3.3e12 ohm per um of a 10 um cylinder (circumference 31.4159 um)
    *rows(YOUNG_FREEDMAN, LOOKED_UP_VALUE, 0.024, ("YF_RTm", (3.3e12 * pi * 1e-7, "R"), 210.0)),
    *rows(YOUNG_FREEDMAN, LOOKED_UP_VALUE, 0.006, ("YF_attm", (3.3e12 * pi * 1e-7, "V"), 0.88)),
]


@pytest.mark.parametrize("row", AXON)
def test_axon_as_an_attenuator_chain(row):
    R_m, what = row.given
    lam = lambda_um(R_m, 100.5309649, 10.0)
    tree = trees.Tree()
    tree.add((0, 0, 0), 5.0)
    for k, x in enumerate(sorted((1.0, 2000.0, 40 * lam)), 1):
        tree.add((x, 0, 0), 5.0, k)
    result = solved(tree.text(), R_m, 100.5309649)
    V = 1 / result.attenuation_from_soma[:, 0]
    got = {"R": result.R_in_MOhm[0, 0], "beta": 1 / V[1] - 1, "V": V[2]}[what]
    assert_published(got, row)


def daughters_and_parent(d_daughters, d_parent):
    """Return R_in of semi-infinite daughters from one point, and of one semi-infinite parent."""
    lengths = [30 * lambda_um(1e4, 100, d) for d in d_daughters]
    together = solved(trees.unequal_cylinders(lengths, d_daughters)).R_in_MOhm[0, 0]
    return together, R_in_of_a_very_long_cable(1e4, 100, d_parent)


THREE_HALVES = [  # given: daughters um; expected parent um. R_in goes with d^(-3/2).
    *rows(
        "Ermentrout class notes, node14, worked example",
        LOOKED_UP_VALUE,
        2.5e-4,
        ("Erm_32", (1.0,) * 3, 2.08),
    ),
    *rows(
        "Ermentrout class notes, node14, worked example", LOOKED_UP_VALUE, 7e-4, ("Erm_32b", (2.08,) * 2, 3.3)
    ),
]


@pytest.mark.parametrize("row", THREE_HALVES)
def test_three_halves_power_rule(row):
    together, parent = daughters_and_parent(row.given, row.expected)
    assert_published(row.expected * (parent / together) ** (2 / 3), row)


# ---------------------------------------------------------------- spines, fins, the bare two-port

SPINES = "Stratford et al. 1989 (in The Computing Neuron); Holmes 1989; Rapp, Yarom & Segev 1992: area factor"
SPINY = rows(  # d 1 um, 100 um, one spine per um of 0.83 um2
    SPINES, MEMORY, 1e-9, ("F", ("F",), 1.264197206), ("F_equiv R_m/F", ("R_m/F",), 5099.264761)
) + rows(SPINES, MEMORY, 1e-9, ("F_equiv geometric", ("geometric",), 5099.264761))


@pytest.mark.parametrize("row", SPINY)
def test_spines_as_membrane_and_as_geometry(row):
    F = 1 + 100 * 0.83 / (pi * 1.0 * 100.0)
    if row.given == ("F",):
        shaft, spiny = (
            solved(trees.cylinder(100.0, 1.0), 1e12, 150.0, spine_factor=f).R_in_MOhm[0, 0] for f in (1.0, F)
        )
        got = shaft / spiny  # so tight that only the area counts
    elif row.given == ("R_m/F",):
        got = solved(trees.cylinder(100.0, 1.0), 20000.0, 150.0, spine_factor=F).R_in_MOhm[0, 0]
    else:
        got = solved(trees.cylinder(100 * F ** (2 / 3), F ** (1 / 3)), 20000.0, 150.0).R_in_MOhm[0, 0]
    assert_published(got, row)


FLUIDSPAD = "straight or pin fin, adiabatic tip, guideline table at fluidspad.com/calculators/fin-efficiency"
FINS = [  # given: mL; the fin's m is 1/lambda, its efficiency (G_in/G_inf)/L
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.0052, ("fin_0.2", (0.2,), 0.99)),
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.0055, ("fin_0.5", (0.5,), 0.92)),
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.0067, ("fin_1.0", (1.0,), 0.76)),
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.0085, ("fin_1.5", (1.5,), 0.60)),
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.011, ("fin_2.0", (2.0,), 0.48)),
    *rows(FLUIDSPAD, LOOKED_UP_VALUE, 0.015, ("fin_3.0", (3.0,), 0.33)),
    *rows(
        "shipcalculators.com, ht-fin-efficiency (cites Incropera)",
        LOOKED_UP_VALUE,
        6e-4,
        ("fin_0474", (0.474,), 0.931),
    ),
    *rows(
        DATA_HANDBOOK,
        LOOKED_UP_FORMULA,
        1e-9,
        ("fin_exact_0.2", (0.2,), 0.9868766011),
        ("fin_exact_0.5", (0.5,), 0.9242343145),
        ("fin_exact_1", (1.0,), 0.761594156),
        ("fin_exact_1.5", (1.5,), 0.6034321691),
        ("fin_exact_2", (2.0,), 0.48201379),
        ("fin_exact_3", (3.0,), 0.3316849179),
    ),
]


@pytest.mark.parametrize("row", FINS)
def test_fin_efficiency(row):
    (mL,) = row.given
    G_in = R_infinity(1e4, 100, 4.0) / solved(cable_of_L(mL)).R_in_MOhm[0, 0]
    assert_published(G_in / mL, row)


def test_two_port_of_a_transmission_line_abcd_from_memory():
    # A = D = cosh(gl), B = Z0 sinh(gl), C = sinh(gl)/Z0 and AD - BC = 1, at gl = 0.7 (standard two-port).
    L, R_inf = 0.7, R_infinity(1e4, 100, 4.0)
    axial, start, end = pi_of(2.0, 2.0, L * 1000.0, 100.0, 1e-4)
    A, D = 1 + end / axial, 1 + start / axial
    B, C = 1 / axial, start + end + start * end / axial
    np.testing.assert_allclose((A, D), cosh(L), rtol=1e-13)
    np.testing.assert_allclose((B, C), (R_inf * sinh(L), sinh(L) / R_inf), rtol=1e-13)
    assert abs(A * D - B * C - 1) < 1e-13
    assert np.isclose(C / A, tanh(L) / R_inf, rtol=1e-13)
