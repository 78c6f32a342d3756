"""Step responses of cables and lines: values from outside, through the same inversion."""

import numpy as np
import pytest
from scipy.optimize import brentq

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.contour import contour
from morphotone.cable.spectrum import MS_PER_S, forest_of, spectra
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.outside.published import MEMORY, assert_published, rows

CABLE_STEP = (
    "Jack, Noble & Tsien 1975, Electric Current Flow in Excitable Cells (cable step response); "
    "Hodgkin & Rushton 1946 Proc R Soc B 133:444-479"
)
RC_LINE = "Fourier series; rule of thumb 0.38 RC and 1.0 RC (Rabaey)"
TAU_MS = 10.0
ASSUMED = Assumptions(membrane=Membrane(R_m_ohm_cm2=1e4, R_i_ohm_cm=100.0))
LAMBDA_UM = 1e4 * np.sqrt(1e4 / 100 * 2e-4 / 4)


def response(swc, time, what):
    """Return what(Z_in, Z_transfer) times 1/s of all nodes, inverted at one time (ms)."""
    cable = build(reconstruct(swc.encode(), file="cell.swc", cell="cell"), ASSUMED)
    forest = forest_of([cable], ASSUMED)
    line = contour(time, time, 1e-12)
    ((Z_in, Z_transfer),) = spectra(
        forest, list(MS_PER_S * line.s), [forest.nodes[0]], ("Z_in", "Z_transfer")
    )
    F = np.ascontiguousarray(what(Z_in, Z_transfer)).view(np.float64)
    return F @ line.kernel(np.array([time]), 1 / line.s)[:, 0]


def infinite_cable(X):
    """Return 60 lambda with the root in the middle, and a last sample X away; for X = 0 at the root."""
    tree = trees.Tree()
    middle = tree.add((0, 0, 0), 1.0)
    site = tree.add((X * LAMBDA_UM, 0, 0), 1.0, middle)
    for way, last in ((-1, middle), (1, site)):
        for _ in range(30):
            last = tree.grow(last, (way * LAMBDA_UM, 0, 0), 1.0)
    return tree.text()


def step_at(X, T):
    """Return V(X, T)/V(0, ∞) of an infinite cable, current step at X = 0."""
    # V(0, ∞) is half the input resistance of a semi-infinite cylinder.
    V = response(infinite_cable(X), T * TAU_MS, lambda Z_in, Z_transfer: Z_transfer)[1 if X else 0]
    R_infinity = 2 * np.sqrt(1e4 * 100.0) / (np.pi * (2e-4) ** 1.5) / 1e6
    return V / (R_infinity / 2)


STEPS = rows(  # given: X, T
    CABLE_STEP,
    MEMORY,
    1e-8,
    ("step_X0_T0.5", (0.0, 0.5), 0.6826894921),
    ("step_X0_T1", (0.0, 1.0), 0.8427007929),
    ("step_X0_T2", (0.0, 2.0), 0.9544997361),
    ("step_X0.5_T0.5", (0.5, 0.5), 0.309246729),
    ("step_X0.5_T1", (0.5, 1.0), 0.4553760784),
    ("step_X0.5_T2", (0.5, 2.0), 0.5620788048),
    ("step_X1_T0.5", (1.0, 0.5), 0.1220984503),
    ("step_X1_T1", (1.0, 1.0), 0.2336124405),
    ("step_X1_T2", (1.0, 2.0), 0.3264228249),
    ("step_X2_T0.5", (2.0, 0.5), 0.01149718144),
    ("step_X2_T1", (2.0, 1.0), 0.05038561852),
    ("step_X2_T2", (2.0, 2.0), 0.1038891572),
)


@pytest.mark.parametrize("row", STEPS)
def test_current_step_on_an_infinite_cable(row):
    assert_published(step_at(*row.given), row)


HALF_TIMES = rows(
    CABLE_STEP,
    MEMORY,
    1e-8,
    ("thalf_X1", (1.0,), 0.7398186465),
    ("thalf_X2", (2.0,), 1.243256822),
    ("thalf_X4", (4.0,), 2.245937509),
)


@pytest.mark.parametrize("row", HALF_TIMES)
def test_time_to_half_the_steady_voltage(row):
    (X,) = row.given
    half = np.exp(-X) / 2
    assert_published(brentq(lambda T: step_at(X, T) - half, 0.1, 10, xtol=1e-12), row)


LINES = rows(
    RC_LINE, MEMORY, 1e-8, ("rcline_t0.5", (0.5,), 0.3787478383), ("rcline_t0.9", (0.9,), 1.031104982)
)


@pytest.mark.parametrize("row", LINES)
def test_open_RC_line(row):
    # A cylinder of L = 1e-5 leaks nothing: voltage step at the near end, L² τ = RC.
    (level,) = row.given
    L = 1e-5
    swc = trees.cylinder(L * LAMBDA_UM, 2.0)

    def above(t_RC):
        V = response(swc, t_RC * L**2 * TAU_MS, lambda Z_in, Z_transfer: Z_transfer / Z_in[0])
        return V[1] - level

    assert_published(brentq(above, 0.05, 5, xtol=1e-12), row)
