"""From SWC text and constants to results, in one call."""

from math import pi, sqrt

import numpy as np

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import solve
from morphotone.cable.frustum import pi_of_frusta
from morphotone.reading.reconstruction import reconstruct
from tests import trees


def solved(swc, R_m=1e4, R_i=100.0, C_m=1.0, hz=(), **choices):
    """Return the electrotonus of SWC text under uniform constants."""
    membrane = Membrane(R_m, R_i, C_m, choices.pop("spine_factor", 1.0))
    rec = reconstruct(swc.encode(), file="cell.swc", cell="cell")
    return solve(rec, Assumptions(membrane=membrane, hz=hz, **choices))


def lambda_um(R_m, R_i, d):
    """Return sqrt((R_m/R_i)(d/4)), um, by hand."""
    return 1e4 * sqrt(R_m / R_i * d * 1e-4 / 4)


def R_infinity(R_m, R_i, d):
    """Return 2 sqrt(R_m R_i)/(pi d^1.5), MOhm, by hand."""
    return 2 * sqrt(R_m * R_i) / (pi * (d * 1e-4) ** 1.5) / 1e6


def cable_of_L(L, R_m=1e4, R_i=100.0, d=4.0, samples_at=()):
    """Return an untapered cable of electrotonic length L with extra samples at given X."""
    lam = lambda_um(R_m, R_i, d)
    tree = trees.Tree()
    last = tree.add((0, 0, 0), d / 2)
    for X in (*samples_at, L):
        last = tree.add((X * lam, 0, 0), d / 2, last)
    return tree.text()


def pi_of(r1, r2, h, R_i, g):
    """Return (axial, start, end) of one frustum as plain numbers, uS."""
    two_port = pi_of_frusta(*(np.array([[value]]) for value in (r1, r2, h, R_i, g)))
    return tuple(part[0, 0] for part in two_port)
