"""Time constants of cylinders, with and without a soma or a clamp, and of several from one origin."""

from math import pi, sqrt, tanh

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.modes import time_constants
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.outside.cells import R_infinity, cable_of_L, lambda_um
from tests.outside.published import (
    ASHCROFT,
    LOOKED_UP_FORMULA,
    LOOKED_UP_VALUE,
    MEMORY,
    assert_published,
    rows,
)

RALL_1969 = (
    "W. R. Holmes, 'Electrotonic length, formulas and estimates', Encyclopedia of Computational Neuroscience "
    "(Springer), 10.1007/978-1-4614-7320-6_480-1, quoting Rall 1969 Biophys J 9:1483-1508: "
    "tau_n = tau_0/(1 + (n pi/L)^2)"
)
RALL_1969_CLAMP = "Rall 1969 Biophys J 9:1483-1508 (abstract: clamp gives different constants): 1 + (pi/2L)^2"
RALL_1969_SOMA = "Rall 1969 Biophys J 9:1483-1508 (lumped soma): alpha L cot(alpha L) = -rho L coth L"
HOLMES_SEGEV_RALL = (
    "Holmes, Segev & Rall 1992, Interpretation of time constant and electrotonic length estimates in "
    "multicylinder or branched neuronal structures, J Neurophysiol 68:1401-1420"
)
UNIFORM = Assumptions(membrane=Membrane(1e4, 100.0))


def modes_of(swc, assumptions=UNIFORM, count=3):
    cable = build(reconstruct(swc.encode(), file="cell.swc", cell="cell"), assumptions)
    return time_constants([cable], assumptions, count)[0]


def ratio(swc, k=1):
    """Return tau0/tau_k."""
    tau = modes_of(swc).tau_ms
    return tau[0] / tau[k]


# ---------------------------------------------------------------- one cylinder

SEALED = rows(  # given: L
    RALL_1969,
    LOOKED_UP_FORMULA,
    1e-9,
    ("tau01_L0.5", (0.5,), 40.4784176),
    ("tau01_L0.75", (0.75,), 18.54596338),
    ("tau01_L1", (1.0,), 10.8696044),
    ("tau01_L1.25", (1.25,), 7.316546817),
    ("tau01_L1.5", (1.5,), 5.386490845),
    ("tau01_L2", (2.0,), 3.4674011),
    ("tau01_L3", (3.0,), 2.096622711),
    ("tau01_L4", (4.0,), 1.616850275),
)


@pytest.mark.parametrize("row", SEALED)
def test_sealed_cylinder(row):
    (L,) = row.given
    assert_published(ratio(cable_of_L(L)), row)


CLAMPED = rows(  # given: L
    RALL_1969_CLAMP,
    MEMORY,
    1e-9,
    ("tauclamp_L0.5", (0.5,), 10.8696044),
    ("tauclamp_L0.75", (0.75,), 5.386490845),
    ("tauclamp_L1", (1.0,), 3.4674011),
    ("tauclamp_L1.25", (1.25,), 2.579136704),
    ("tauclamp_L1.5", (1.5,), 2.096622711),
    ("tauclamp_L2", (2.0,), 1.616850275),
    ("tauclamp_L3", (3.0,), 1.274155678),
    ("tauclamp_L4", (4.0,), 1.154212569),
)


@pytest.mark.parametrize("row", CLAMPED)
def test_cylinder_whose_near_end_is_held(row):
    # Held by a shunt of 1e12 nS at the root, some 1e10 times the cylinder's own conductance.
    (L,) = row.given
    held = Assumptions(membrane=UNIFORM.membrane, soma_shunt_nS=1e12)
    assert_published(10.0 / modes_of(cable_of_L(L), held).tau_ms[0], row)


PEELED = rows(RALL_1969, LOOKED_UP_FORMULA, 1e-8, ("Lfromtau", (10.86960440,), 1.0))


@pytest.mark.parametrize("row", PEELED)
def test_length_by_peeling(row):
    (tau_ratio,) = row.given
    swc = cable_of_L(1.0)
    assert abs(ratio(swc) - tau_ratio) < 1e-8
    assert_published(modes_of(swc).peeled.L, row)


# ---------------------------------------------------------------- with a soma

SOMA = rows(  # given: L, rho
    RALL_1969_SOMA,
    MEMORY,
    1e-8,
    ("soma_tau01_L1_rho1", (1.0, 1.0), 5.513072749),
    ("soma_tau01_L1_rho5", (1.0, 5.0), 8.537785309),
    ("soma_tau01_L1_rho10", (1.0, 10.0), 9.541478768),
    ("soma_tau01_L1.5_rho5", (1.5, 5.0), 4.51983267),
    ("soma_tau01_L1.5_rho10", (1.5, 10.0), 4.906086493),
    ("soma_tau01_L2_rho4", (2.0, 4.0), 2.980492303),
)


@pytest.mark.parametrize("row", SOMA)
def test_lumped_soma_and_one_cylinder(row):
    # G_soma = 4 pi r^2/R_m, so that the cylinder's tanh L/R_inf is rho times that.
    L, rho = row.given
    d = 2.0
    G_soma = tanh(L) / R_infinity(1e4, 100.0, d) / rho  # uS
    radius = sqrt(G_soma * 1e-6 * 1e4 * 1e8 / (4 * pi))
    swc = trees.ball_and_stick(radius, L * lambda_um(1e4, 100.0, d), d, pieces=1)
    modes = modes_of(swc)
    assert modes.tau_ms[0] == 10.0
    assert_published(modes.tau_ms[0] / modes.tau_ms[1], row)
    assert modes.peeled.L > L
    assert "% of the membrane" in modes.peeled.warnings[0]


# ---------------------------------------------------------------- several from one origin

SEVERAL = rows(  # given: diameters, Ls, which k
    HOLMES_SEGEV_RALL,
    MEMORY,
    1e-8,
    ("two_cyl_uneq", ((2.0, 1.0), (0.8, 1.3), 1), 2.826653028),
    ("three_cyl_1", ((2.0, 1.0, 1.5), (0.5, 0.8, 1.2), 1), 3.444681167),
    ("three_cyl_2", ((2.0, 1.0, 1.5), (0.5, 0.8, 1.2), 2), 5.937261778),
) + rows(
    HOLMES_SEGEV_RALL + " (tip-to-tip length)",
    MEMORY,
    1e-9,
    ("tour_equal", ((2.0, 2.0), (0.8, 1.3), 1), 3.238005533),
)


@pytest.mark.parametrize("row", SEVERAL)
def test_cylinders_from_one_origin(row):
    diameters, Ls, k = row.given
    lengths = [L * lambda_um(1e4, 100.0, d) for d, L in zip(diameters, Ls, strict=True)]
    assert_published(ratio(trees.unequal_cylinders(lengths, diameters), k), row)


EQUAL = rows(
    HOLMES_SEGEV_RALL + "; Rall 1969; degeneracy N - 1",
    MEMORY,
    1e-9,
    *((f"Ntrees_odd N={N} orders={orders}", (N, orders), 3.4674011) for N in (2, 3, 6) for orders in (0, 3)),
)


@pytest.mark.parametrize("row", EQUAL)
def test_equal_trees(row):
    N, orders = row.given
    modes = modes_of(trees.rall_neuron(N, orders))
    assert_published(modes.tau_ms[0] / modes.tau_ms[1], row)
    assert modes.multiplicity.tolist()[:2] == [1, N - 1]
    assert abs(modes.peeled.L - 2.0) < 1e-8  # from tip to tip, and said so
    assert abs(modes.peeled.X_tips - 1.0) < 1e-12
    assert "from tip to tip" in modes.peeled.warnings[-1]


# ---------------------------------------------------------------- tau0

PUBLISHED_TAU = [  # given: R_m, C_m, R_i
    *rows(
        ASHCROFT + ": C_m 12.2 uF/cm2, G_m 0.32 mmho/cm2",
        LOOKED_UP_FORMULA,
        1e-9,
        ("Ash_tau", (1e3 / 0.32, 12.2, 149.0), 38.125),
    ),
    *rows(
        "Koch, Poggio & Torre 1982 Phil Trans R Soc B 298:227-264, abstract",
        LOOKED_UP_FORMULA,
        1e-9,
        ("KPT_tau", (2500.0, 2.0, 70.0), 5.0),
    ),
    *rows(
        "H. Agmon-Snir, NIDDK MRB pages on decision points, Sync.html: defaults",
        LOOKED_UP_VALUE,
        1e-9,
        ("AS_tau", (20000.0, 1.0, 100.0), 20.0),
    ),
    *rows(
        "Passive cable properties of hippocampal CA3 pyramidal neurons, Cell Mol Neurobiol "
        "(10.1007/BF00736038), abstract: tau 23.6 ms; the R_m that goes with C_m = 1 uF/cm2",
        LOOKED_UP_VALUE,
        1e-9,
        ("CA3_tau", (23600.0, 1.0, 150.0), 23.6),
    ),
]


@pytest.mark.parametrize("row", PUBLISHED_TAU)
def test_tau0_of_a_uniform_cell_is_R_m_C_m(row):
    R_m, C_m, R_i = row.given
    modes = modes_of(trees.irregular(20, 4, True), Assumptions(membrane=Membrane(R_m, R_i, C_m)), 1)
    assert_published(modes.tau_ms[0], row)


UNEVEN = rows(
    "London, Meunier & Segev 1999 J Neurosci 19:8219-8233, abstract, point 4",
    LOOKED_UP_VALUE,
    0.0,
    ("inv_tau0 basal leakier", (trees.BASAL,), 10.0),
    ("inv_tau0 apical leakier", (trees.APICAL,), 10.0),
)


@pytest.mark.parametrize("row", UNEVEN)
def test_the_same_leak_unevenly_spread_gives_a_larger_tau0(row):
    (leaky,) = row.given
    swc = trees.irregular(30, 6, False)
    cable = build(reconstruct(swc.encode(), file="cell.swc", cell="cell"), UNIFORM)
    area = np.sum(cable.areas(), axis=0)
    here, there = area[cable.kind == leaky].sum(), area[cable.kind != leaky].sum()
    # A tenth more leak in one domain, as much less in the others.
    uneven, rest = Membrane(1e4 / 1.1, 100.0), Membrane(1e4 / (1.0 - 0.1 * here / there), 100.0)
    tau0 = modes_of(swc, Assumptions(membrane=rest, domains={leaky: uneven}), 1).tau_ms[0]
    assert tau0 > row.expected * (1 + 1e-5), row.source
