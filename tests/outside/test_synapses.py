"""Synapses against values from outside: local saturation, shunting inhibition on and off the path.

All on one sealed cylinder of L = 1.5, d = 2 um, R_m = 10000 ohm cm2, R_i = 100 ohm cm, with the soma's end at
X = 0 and the excitatory synapse at X = 1.2 (1 nS, 60 mV).
"""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.circuit import alone, steady, veto
from morphotone.cable.pairs import coupling
from morphotone.cable.tree import build
from morphotone.reading.reconstruction import reconstruct
from tests.outside.cells import cable_of_L
from tests.outside.published import MEMORY, assert_published, rows

KOCH = (
    "Koch, Poggio & Torre 1982, Retinal ganglion cells: a functional interpretation of dendritic morphology, "
    "Phil Trans R Soc B 298:227-264; Koch 1999"
)
DISTAL = f"{KOCH} (abstract: inhibition distal to excitation much less effective)"
AT = {0.0: 0, 0.6: 1, 1.2: 2, 1.4: 3}
"""X of the sites and their nodes."""
ASSUMED = Assumptions(membrane=Membrane(1e4, 100.0, 1.0))


@pytest.fixture(scope="module")
def R():
    """Return the resistances between the sites at X = 0, 0.6, 1.2, 1.4, MOhm."""
    swc = cable_of_L(1.5, 1e4, 100.0, 2.0, samples_at=(0.6, 1.2, 1.4))
    cell = build(reconstruct(swc.encode(), file="cell.swc", cell="cell"), ASSUMED)
    return coupling(cell, ASSUMED, np.arange(4)).Z


TRANSFER = rows("finite cable Green function", MEMORY, 1e-9, ("K_is", (1.2, 0.0), 110.4992722))


@pytest.mark.parametrize("row", TRANSFER)
def test_transfer_resistance(R, row):
    i, s = (AT[X] for X in row.given)
    assert_published(R[i, s], row)
    assert_published(R[s, i], row)


THROUGH = rows(KOCH, MEMORY, 1e-9, ("onpath_id", (1.2, 0.6, 0.0), 110.4992722))


@pytest.mark.parametrize("row", THROUGH)
def test_a_site_on_the_path_passes_all_on(R, row):
    i, l, s = (AT[X] for X in row.given)  # noqa: E741 - as in the source: K_is = K_il K_ls / K_ll
    assert_published(R[i, l] * R[l, s] / R[l, l], row)


SATURATION = rows(
    "Rall & Rinzel 1973 (local saturation); elementary",
    MEMORY,
    1e-9,
    ("syn_local", "local_mV", 10.00317156),
    ("syn_soma", "soma_mV", 5.524613153),
)


@pytest.mark.parametrize("row", SATURATION)
def test_steady_excitation(R, row):
    e = [AT[1.2]]
    got = alone(R[np.ix_(e, e)], R[e, 0], np.array([1.0]), np.array([60.0]))
    assert_published(getattr(got, row.given)[0], row)


SHUNTS = rows(  # given: X of an inhibition of 10 nS with no driving force; expected mV at the soma
    DISTAL,
    MEMORY,
    1e-9,
    ("shunt_soma", 0.0, 1.632129997),
    ("shunt_onpath", 0.6, 2.082528286),
    ("shunt_at_e", 1.2, 2.07131935),
    ("shunt_distal", 1.4, 2.664553388),
)


@pytest.mark.parametrize("row", SHUNTS)
def test_shunting_inhibition(R, row):
    pair = [AT[1.2], AT[row.given]]
    synapses = R[np.ix_(pair, pair)], R[pair, 0], np.array([1.0, 10.0]), np.array([60.0, 0.0])
    assert_published(steady(*synapses).soma_mV, row)
    vetoed = veto(*synapses).vetoed[0, 0]
    assert_published((1 - vetoed) * alone(*synapses).soma_mV[0], row)
