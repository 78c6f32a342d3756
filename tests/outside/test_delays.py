"""Delays of cylinders and of Rall's neuron: values from outside."""

from math import pi

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.delays import delays
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.outside.cells import cable_of_L, pi_of
from tests.outside.published import (
    DERIVED,
    LOOKED_UP_VALUE,
    MEMORY,
    RALL_RINZEL,
    assert_published,
    rows,
)

AGMON_SNIR = (
    "Agmon-Snir & Segev 1993, Signal delay and input synchronization in passive dendritic structures, "
    "J Neurophysiol 70:2066-2085"
)
AGMON_SNIR_PAGES = "H. Agmon-Snir, NIDDK MRB pages on decision points (mrb.niddk.nih.gov/hagai/publ/decpoi)"
R_M, R_I, C_M = 1e4, 100.0, 1.0
TAU_MS = 10.0
ASSUMED = Assumptions(membrane=Membrane(R_m_ohm_cm2=R_M, R_i_ohm_cm=R_I, C_m_uF_cm2=C_M))


def delays_of(swc, assumptions=ASSUMED):
    """Return the delays by sample of SWC text."""
    rec = reconstruct(swc.encode(), file="cell.swc", cell="cell")
    (result,) = delays([build(rec, assumptions)], assumptions)
    return result.by_sample()


# ---------------------------------------------------------------- very long cylinders

LONG = rows(AGMON_SNIR, MEMORY, 1e-9, ("LD_inf", ("local",), 0.5), ("PD_inf", ("propagation",), 0.5))


@pytest.mark.parametrize("row", LONG)
@pytest.mark.parametrize("X", [0.5, 1.0, 2.0])
def test_very_long_cylinder(row, X):
    # The middle of 40 lambda, and a site X away from it.
    tree = trees.Tree()
    lam = 1e4 * np.sqrt(R_M / R_I * 4e-4 / 4)
    middle = tree.add((0, 0, 0), 2.0)
    site = tree.grow(middle, (X * lam, 0, 0), 2.0)
    tree.grow(site, (20 * lam, 0, 0), 2.0)
    tree.grow(middle, (-20 * lam, 0, 0), 2.0)
    result = delays_of(tree.text())
    per = result.local_ms[1] if row.given == ("local",) else result.propagation_ms[1] / X
    assert_published(per / TAU_MS, row)


# ---------------------------------------------------------------- finite cylinders

SEALED = rows(  # given: L, what
    AGMON_SNIR,
    MEMORY,
    1e-9,
    ("LD_sealed_L0.5", (0.5, "local"), 0.9254590641),
    ("PD_sealed_L0.5", (0.5, "propagation"), 0.1155292893),
    ("LD_sealed_L1", (1.0, "local"), 0.7757205648),
    ("PD_sealed_L1", (1.0, "propagation"), 0.380797078),
    ("LD_sealed_L2", (2.0, "local"), 0.5732871407),
    ("PD_sealed_L2", (2.0, "propagation"), 0.9640275801),
)


@pytest.mark.parametrize("row", SEALED)
def test_sealed_cylinder(row):
    L, what = row.given
    result = delays_of(cable_of_L(L, R_M, R_I))
    assert_published(getattr(result, f"{what}_ms")[1] / TAU_MS, row)


KILLED = rows(
    AGMON_SNIR,
    MEMORY,
    1e-9,
    ("LD_killed_L0.5", (0.5,), 0.07454093588),
    ("LD_killed_L1", (1.0,), 0.2242794352),
    ("LD_killed_L2", (2.0,), 0.4267128593),
)


@pytest.mark.parametrize("row", KILLED)
def test_killed_end(row):
    # The far end at rest: what enters is axial + shunt at the near end; -arg(1/Y)/omega, omega tau = 1e-10.
    (L,) = row.given
    d = 4.0
    h = L * 1e4 * np.sqrt(R_M / R_I * d * 1e-4 / 4)
    step = 1e-10
    axial, start, _ = pi_of(d / 2, d / 2, h, R_I, (1 + 1j * step) / R_M)
    assert_published(np.angle(axial + start) / step, row)


ISOPOTENTIAL = rows(AGMON_SNIR_PAGES, LOOKED_UP_VALUE, 1e-9, ("LD_iso", (), 1.0))


@pytest.mark.parametrize("row", ISOPOTENTIAL)
def test_isopotential_cell(row):
    result = delays_of("1 1 0 0 0 10 -1\n2 3 5 0 0 1 1\n")
    assert_published(result.local_ms[0] / TAU_MS, row)


RC_LINE = rows(
    "distributed open RC line, EEL7312 slides after Rabaey", LOOKED_UP_VALUE, 1e-9, ("elmore_inf", (), 0.5)
)


@pytest.mark.parametrize("row", RC_LINE)
def test_short_cylinder_is_an_open_RC_line(row):
    # L = 1e-5: next to no leak; voltage at the near end to voltage at the far end, Elmore's delay RC/2.
    h, d = 0.5 * 1e4 * np.sqrt(R_M / R_I * 1e-4 / 4) * 2e-5, 1.0
    R_MOhm = R_I * h / (pi * (d / 2) ** 2) * 1e-2
    C_nF = C_M * pi * d * h * 1e-5
    result = delays_of(trees.cylinder(h, d))
    assert_published(result.net_ms[1] / (R_MOhm * C_nF), row)


# ---------------------------------------------------------------- Rall's neuron

RALLS_NEURON = rows(  # given: what, which end
    f"{AGMON_SNIR} applied to the neuron of {RALL_RINZEL}",
    DERIVED,
    1e-8,
    ("RRp_LD_at_terminal", ("local", "terminal"), 0.1458125468),
    ("RRp_LD_at_soma", ("local", "soma"), 0.7757205648),
    ("RRp_TD_terminal_soma", ("total", "terminal"), 1.156517643),
)


@pytest.mark.parametrize("row", RALLS_NEURON)
def test_ralls_neuron(row):
    # Six trees, three orders of symmetric branching, lengths 250, 198.4, 157.5, 125 um: L = 1 in all.
    what, where = row.given
    swc = trees.rall_neuron(trees=6, orders=3, L=1.0, d=4.0, R_m=R_M, R_i=R_I)
    result = delays_of(swc)
    at = 0 if where == "soma" else -1
    assert_published(getattr(result, f"{what}_ms")[at] / TAU_MS, row)
