"""The engine against scikit-rf: cable as a cascade of distributed lossy lines.

scikit-rf's distributed-circuit media take R', G', C' per metre; a cable has R' = R_i/(pi r^2),
G' = 2 pi r/R_m, C' = 2 pi r C_m and no inductance. Its scattering matrices, cascades and shunts share
nothing with nodal admittances.
"""

import numpy as np
import pytest
import skrf
from skrf.media import DistributedCircuit

from tests import trees
from tests.outside.cells import solved

HZ = (1.0, 10.0, 100.0, 1000.0, 10000.0)
R_M, R_I, C_M = 20000.0, 150.0, 1.0
PORT_OHM = 1e8  # near the lines' own impedances


def line_of(d, length):
    """Return the two-port of a cylinder (um) and its medium."""
    r = d / 2 * 1e-6
    medium = DistributedCircuit(
        skrf.Frequency.from_f(np.array(HZ), unit="Hz"),
        z0_port=PORT_OHM,
        R=R_I * 1e-2 / (np.pi * r**2),
        G=2 * np.pi * r / (R_M * 1e-4),
        C=2 * np.pi * r * C_M * 1e-2,
        L=0.0,
    )
    return medium, medium.line(length * 1e-6, "m")


def by_scattering(swc):
    """Return Z_in at the root (MOhm) and V_root/V_i at every sample, current injected at the root."""
    rows = trees.rows_of(swc)
    children = {row.number: [c for c in rows if c.parent == row.number] for row in rows}
    attenuation = {}

    def side(child, parent):
        """Return the one-port that a parent sees of a child's line and everything beyond."""
        h = np.linalg.norm(np.subtract(child.at, parent.at))
        if h == 0.0:  # coincident: no line between them
            attenuation[child.number] = np.ones(len(HZ))
            return beyond(child, line_of(2 * child.r, 1.0)[0])
        assert parent.r == child.r, "a uniform line has one diameter"
        medium, line = line_of(2 * child.r, h)
        load = beyond(child, medium)
        attenuation[child.number] = (line ** medium.shunt(load)).a[:, 0, 0]
        return line**load

    def beyond(row, medium):
        """Return all children of a sample in parallel, an open end if there are none."""
        load = medium.open()
        for child in children[row.number]:
            load = medium.shunt(side(child, row)) ** load
        return load

    def collect(row, so_far):
        result[row.number] = so_far
        for child in children[row.number]:
            collect(child, so_far * attenuation[child.number])

    root = rows[0]
    medium, _ = line_of(1.0, 1.0)
    Z_in = beyond(root, medium).z[:, 0, 0] / 1e6
    result = {}
    collect(root, np.ones(len(HZ), complex))
    return Z_in, np.array([result[row.number] for row in rows])


def untapered_fork(key):
    """Return a random tree of cylinders: every branch starts with a sample of its own radius."""
    rng = np.random.default_rng(key)
    tree = trees.Tree()
    ends = [tree.add((0, 0, 0), 1.0)]
    for _ in range(9):
        at, r = int(rng.choice(ends)), float(rng.uniform(0.2, 2.0))
        start = tree.grow(at, (0, 0, 0), r)
        step = rng.normal(size=3)
        ends.append(tree.grow(start, step / np.linalg.norm(step) * 10 ** rng.uniform(0, 2.9), r))
    return tree.text()


@pytest.mark.parametrize(
    "swc",
    [
        trees.cylinder(600.0, 2.0),
        trees.cylinder(600.0, 2.0, pieces=6),
        untapered_fork(3),
        trees.unequal_cylinders(),
        trees.rall_neuron(trees=2, orders=2),
        untapered_fork(1),
        untapered_fork(2),
    ],
    ids=["cylinder", "cut cylinder", "random 3", "unequal cylinders", "Rall", "random 1", "random 2"],
)
def test_cascade_of_lossy_lines(swc):
    Z_in, attenuation = by_scattering(swc)
    result = solved(swc, R_M, R_I, C_M, hz=HZ)
    np.testing.assert_allclose(result.Z_in[0, 1:], Z_in, rtol=1e-11)
    np.testing.assert_allclose(result.attenuation_from_soma[:, 1:], np.abs(attenuation), rtol=1e-10)
    np.testing.assert_allclose(result.Z_transfer[:, 1:], Z_in / attenuation, rtol=1e-10)
