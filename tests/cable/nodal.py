"""The dense way: the nodal admittance matrix of a whole cell, for numpy.linalg."""

import numpy as np

from morphotone.cable.forest import membrane_of
from morphotone.cable.frustum import pi_of_frusta


def admittances(cable, assumptions, hz=0.0):
    """Return the nodal admittance matrix of a cable, uS, shape (nodes, nodes)."""
    count = len(cable.parent)
    kind = np.append(1, cable.kind[1:])  # node 0 carries the soma's membrane
    R_i, leak, capacity = (np.broadcast_to(values, count) for values in membrane_of(kind, assumptions))
    g = leak + 2j * np.pi * hz * capacity if hz else leak
    geometry = (values[1:, None] for values in (cable.r_start, cable.r_end, cable.length))
    axial, start, end = (part[:, 0] for part in pi_of_frusta(*geometry, R_i[1:, None], g[1:, None]))
    Y = np.zeros((count, count), g.dtype)
    here, there = cable.parent[1:], np.arange(1, count)
    np.add.at(Y, (here, here), axial + start)
    np.add.at(Y, (there, there), axial + end)
    np.add.at(Y, (here, there), -axial)
    np.add.at(Y, (there, here), -axial)
    Y[0, 0] += 1e-2 * cable.traced.soma.area * g[0] + 1e-3 * assumptions.soma_shunt_nS
    return Y


def impedances(cable, assumptions, hz=0.0):
    """Return the impedance matrix, MOhm: numpy's inverse of the admittances."""
    return np.linalg.inv(admittances(cable, assumptions, hz))
