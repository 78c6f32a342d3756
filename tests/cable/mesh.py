"""The other way to the same modes: a mesh, and a matrix eigenproblem solved by scipy.

Each frustum of the literal cable (tests/definitions.py) becomes finite elements of degree 5 with nodes at
Gauss-Lobatto points, all integrals by Gauss's rule. With K the axial and G the leak matrix, uS, and C the
capacity, pF, modes are (K + G) v = q C v; the error of an eigenvalue falls like h^(2 degree) (Strang & Fix
1973, An Analysis of the Finite Element Method: attribution from memory).
"""

from dataclasses import dataclass

import numpy as np
import scipy.linalg
from scipy.sparse import coo_array
from scipy.sparse.linalg import eigsh

from tests.definitions import SOMA, cable_of

DEGREE = 5
RATIO = 0.2  # of the logarithms of the radii of an element, at the most
PER_MS = 1e3  # uS/pF = 1e6/s
MOHM_PER_MS = 1e3  # 1/pF = 1e12/F, and MOhm/ms = 1e9/F


@dataclass(frozen=True)
class Mesh:
    """Matrices of a cell, uS and pF; ``node`` by sample number, the soma or root sample is node 0."""

    conductance: coo_array
    capacity: coo_array
    node: dict


@dataclass(frozen=True)
class MeshModes:
    """Rates 1/tau (1/ms), ascending, and eigenvectors (nodes, k) with v'Cv = 1."""

    rate: np.ndarray
    vector: np.ndarray

    def amplitude(self, at, source=0):
        """Return the residues of Z between two nodes, MOhm/ms."""
        return MOHM_PER_MS * self.vector[at] * self.vector[source]


def mesh(swc, choices, step=0.25, fastest=0.0):
    """Return the mesh of SWC text; elements are shorter than ``step`` lambda at the fastest rate (1/ms)."""
    cable = cable_of(swc, choices)
    count = cable.node_count
    parts = []
    soma = choices.of(SOMA)
    area = float(cable.soma_area) * soma.F
    parts.append(([0], [[area / soma.R_m * 1e-2 + choices.soma_shunt_nS * 1e-3]], [[area * soma.C_m * 1e-2]]))
    for piece in cable.pieces:
        c = choices.of(piece.kind)
        r1, r2, h = (float(v) for v in (piece.r_start, piece.r_end, piece.h))
        L = 2 * h / (r1**0.5 + r2**0.5) * (2e-4 * c.R_i * c.F / c.R_m * np.hypot(1, (r2 - r1) / h)) ** 0.5
        L *= max(1.0, fastest * c.R_m * c.C_m * 1e-3) ** 0.5
        cuts = cuts_of(r1, r2, L / step)
        n = len(cuts) - 1
        here = piece.start
        for k in range(n):
            inner = list(range(count, count + DEGREE - 1))
            count += DEGREE - 1
            there = piece.end if k == n - 1 else count
            count += k < n - 1
            radii = r1 + (r2 - r1) * cuts[k], r1 + (r2 - r1) * cuts[k + 1]
            parts.append(([here, *inner, there], *element(*radii, h * (cuts[k + 1] - cuts[k]), c)))
            here = there
    return assembled(parts, count, cable.node)


def cuts_of(r1, r2, pieces):
    """Return where to cut a frustum: into equal parts, or if it tapers into parts of equal radius ratio."""
    if r1 == r2:
        return np.linspace(0.0, 1.0, int(np.ceil(pieces)) + 1)
    n = int(np.ceil(3 * pieces) + np.ceil(abs(np.log(r2 / r1)) / RATIO))
    return np.expm1(np.linspace(0.0, np.log(r2 / r1), n + 1)) / (r2 / r1 - 1.0)


def assembled(parts, count, node):
    rows = np.concatenate([np.repeat(at, len(at)) for at, _, _ in parts])
    columns = np.concatenate([np.tile(at, len(at)) for at, _, _ in parts])
    matrices = [
        coo_array((np.concatenate([np.ravel(p[i]) for p in parts]), (rows, columns)), shape=(count, count))
        for i in (1, 2)
    ]
    return Mesh(*matrices, node)


def lobatto():
    inner = np.polynomial.legendre.Legendre.basis(DEGREE).deriv().roots()
    return np.concatenate(([-1.0], np.sort(inner.real), [1.0]))  # numpy 2.5 gives real roots as complex


NODES = lobatto()
POINTS, WEIGHTS = np.polynomial.legendre.leggauss(DEGREE + 2)
BASIS = [np.polynomial.Polynomial.fit(NODES, row, DEGREE, domain=[-1, 1]) for row in np.eye(DEGREE + 1)]
VALUES = np.array([b(POINTS) for b in BASIS])
SLOPES = np.array([b.deriv()(POINTS) for b in BASIS])


def element(r1, r2, h, c):
    """Return axial + leak (uS) and capacity (pF) of one element."""
    r = r1 + (r2 - r1) * (POINTS + 1) / 2
    slant = np.hypot(1.0, (r2 - r1) / h)
    axial = (SLOPES * (WEIGHTS * np.pi * r**2 * 1e2 / c.R_i * 2 / h)) @ SLOPES.T
    axial -= np.diag(axial.sum(axis=1))  # no current at equal potential, to the last digit
    membrane = (VALUES * (WEIGHTS * 2 * np.pi * r * slant * h / 2 * c.F)) @ VALUES.T
    return axial + membrane / c.R_m * 1e-2, membrane * c.C_m * 1e-2


def sparse_modes(mesh, count):
    """Return the slowest modes by shift-and-invert Lanczos; multiple ones may be missed."""
    K, C = mesh.conductance.tocsc(), mesh.capacity.tocsc()
    start = np.random.default_rng(5).normal(size=K.shape[0])
    q, v = eigsh(K, count, M=C, sigma=0.0, tol=1e-14, v0=start)
    order = np.argsort(q)
    return MeshModes(PER_MS * q[order], v[:, order])


def dense_modes(mesh):
    """Return all modes of the mesh."""
    q, v = scipy.linalg.eigh(mesh.conductance.toarray(), mesh.capacity.toarray())
    return MeshModes(PER_MS * q, v)
