"""Published values for tapering cable, conical fins, necks, areas.

The sources take membrane area as pi d dx; the cable of an SWC file has the slant as well. The values are
reached by giving R_m times the slant, which is the same equation. (Triangular and annular fins have other
geometries and no counterpart in a neuron's cable.)
"""

from math import hypot, pi

import pytest

from tests import trees
from tests.outside.cells import lambda_um, pi_of, solved
from tests.outside.published import (
    CONICAL_PIN,
    LOOKED_UP_FORMULA,
    MEMORY,
    MEMORY_VALUE,
    assert_published,
    rows,
)

TAPER = "linear-taper cable, Bessel functions of order 1 in 2a sqrt(y), a^2 = 4 R_i/(R_m d')"
TAPERS = rows(  # given: d_start, d_end um, length um, what; R_m 1e4, R_i 100, sealed at d_end
    TAPER,
    MEMORY,
    1e-8,
    ("frus_4_1_200_R", (4.0, 1.0, 200.0, "R"), 642.5393067),
    ("frus_4_1_200_V", (4.0, 1.0, 200.0, "V"), 0.9802953086),
    ("frus_4_1_1000_R", (4.0, 1.0, 1000.0, "R"), 154.5791654),
    ("frus_4_1_1000_V", (4.0, 1.0, 1000.0, "V"), 0.6384092466),
    ("frus_2_0.5_300_R", (2.0, 0.5, 300.0, "R"), 883.8878670),
    ("frus_2_0.5_300_V", (2.0, 0.5, 300.0, "V"), 0.9157036784),
) + rows(
    "conical pin fin analogy: Gardner 1945; Incropera Table 3.5; tip diameter 0",
    MEMORY,
    1e-8,
    ("cone_Rin", (4.0, 4e-5, 1000.0 * (1 - 1e-5), "R"), 183.7276206),  # cut 10 nm before the tip
)


def without_slant(d_start, d_end, length, R_m=1e4):
    """Return the R_m at which the slanted cable leaks like the source's."""
    return R_m * hypot(1.0, (d_start - d_end) / 2 / length)


@pytest.mark.parametrize("row", TAPERS)
def test_sealed_taper(row):
    d_start, d_end, length, what = row.given
    result = solved(trees.frustum(length, d_start, d_end), without_slant(d_start, d_end, length))
    R, V = result.R_in_MOhm[0, 0], 1 / result.attenuation_from_soma[1, 0]
    assert_published(R if what == "R" else V, row)


PINS = rows(  # given: mL, m = 1/lambda at the base; efficiency 2 I2(2mL)/(mL I1(2mL))
    CONICAL_PIN,
    MEMORY,
    1e-9,
    ("conepin_0.2", (0.2,), 0.9933992965),
    ("conepin_0.5", (0.5,), 0.9607748955),
    ("conepin_1", (1.0,), 0.8662548534),
    ("conepin_1.5", (1.5,), 0.7572315324),
    ("conepin_2", (2.0,), 0.6580472674),
    ("conepin_3", (3.0,), 0.5084840505),
)


@pytest.mark.parametrize("row", PINS)
def test_conical_pin_fin_is_a_conical_dendrite(row):
    d, share_left_out = 4.0, 1e-6  # a file's radii are positive: the cone is cut just before its tip
    h = row.given[0] * lambda_um(1e4, 100, d)
    cut = h * (1 - share_left_out), d, d * share_left_out
    G_in = 1 / solved(trees.frustum(*cut), without_slant(d, 0.0, h)).R_in_MOhm[0, 0]
    ideal = pi * d / 2 * h / 1e4 * 1e-2  # uS: the whole mantle (pi d h/2, no slant) at the base's potential
    assert_published(G_in / ideal, row)


HARRIS = "Harris et al. 1992, as tabulated (Table 1) at rupress.org/view-large/9628175; 4 R_i l/(pi d^2)"
AXIAL = [  # given: r_start, r_end, length um, R_i ohm cm; expected MOhm
    *rows(HARRIS, LOOKED_UP_FORMULA, 1e-9, ("neck_thin", (0.05, 0.05, 0.51, 100.0), 64.93521678)),
    *rows(HARRIS, LOOKED_UP_FORMULA, 1e-9, ("neck_mushroom", (0.1, 0.1, 0.43, 100.0), 13.68732511)),
    *rows("integral of R_i dx/(pi r^2)", MEMORY, 1e-9, ("frus_axial", (2.0, 0.5, 200.0, 100.0), 63.66197724)),
    *rows(
        "Dayan & Abbott 2001, Theoretical Neuroscience, ch. 5: radius 2 um, r_L 1 kOhm mm, 100 um",
        MEMORY_VALUE,
        0.006,
        ("mem_DA_RL", (2.0, 2.0, 100.0, 100.0), 8.0),
    ),
]


@pytest.mark.parametrize("row", AXIAL)
def test_axial_resistance(row):
    axial, _, _ = pi_of(*row.given, 1e-18)
    assert_published(1 / axial, row)


AREA = rows("elementary geometry", MEMORY, 1e-9, ("frus_area", (2.0, 0.5, 200.0), 1570.840505))


@pytest.mark.parametrize("row", AREA)
def test_membrane_area_of_a_frustum(row):
    # A membrane so tight that the piece is isopotential leaks by its area alone.
    _, start, end = pi_of(*row.given, 100.0, 1e-15)
    assert_published((start + end) / 1e-15 * 1e2, row)


SOMA = [  # given: the file, a stem's first sample within the soma (no cable); expected um2
    *rows(
        "INCF SWC specification, docs/source/swc.rst: one sample is a sphere",
        LOOKED_UP_FORMULA,
        1e-9,
        ("soma1_area", ("1 1 0 0 0 5 -1\n2 3 1 0 0 1 1\n",), 314.1592654),
    ),
    *rows(
        "NeuroMorpho.Org, soma format representation as of version 5.3: three samples",
        LOOKED_UP_FORMULA,
        1e-9,
        ("soma3_area", ("1 1 0 0 0 5 -1\n2 1 0 -5 0 5 1\n3 1 0 5 0 5 1\n4 3 1 0 0 1 1\n",), 314.1592654),
    ),
]


@pytest.mark.parametrize("row", SOMA)
def test_soma_area(row):
    R_in = solved(row.given[0], R_m=1e4).R_in_MOhm
    for R in R_in[:, 0]:
        assert_published(1e4 * 1e2 / R, row)
