"""Electrotonic length by peeling, and how far a cell is from what that takes.

L = π/sqrt(τ0/τ1 − 1) holds for a sealed cylinder, and so for a cell that is equivalent to one (Rall 1969,
Biophys J 9:1483–1508). Holmes, Segev & Rall 1992 (J Neurophysiol 68:1401–1420; attribution from memory) show
what becomes of it in real dendrites: with a soma, a shunt, unequal or unsymmetrical trees, τ1 belongs to
charge that moves between trees, and the length is closer to one from tip to tip than to one from soma to tip.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Forest
from morphotone.cable.tree import Cable

Real = NDArray[np.float64]

# How far a cell may be from each condition before it is said. Our own; at these L is off by some 5 %.
_SPREAD = 0.1  # of the tips' X, standard deviation over mean
_SOMA_SHARE = 0.05  # of the membrane
_UNSEEN = 0.01  # of mode 0's amplitude at the soma


@dataclass(frozen=True)
class Peeled:
    """Electrotonic length from two time constants, and the tips' actual one.

    Attributes
    ----------
    L : float
        π/sqrt(τ0/τ1 − 1); NaN with fewer than two time constants.
    X_tips : float
        Mean X of the tips; NaN without any.
    warnings : tuple of str
        One sentence per condition of the formula that the cell does not meet.
    """

    L: float
    X_tips: float
    warnings: tuple[str, ...]


def peel(cable: Cable, assumptions: Assumptions, tau_ms: Real, amplitude_soma: Real) -> Peeled:
    """Return the electrotonic length by peeling beside the tips' mean X.

    Parameters
    ----------
    cable : Cable
        The cell.
    assumptions : Assumptions
        Those of the time constants.
    tau_ms, amplitude_soma : ndarray, shape (k,)
        Time constants, descending, ms, and their amplitudes at the soma, MΩ/ms.
    """
    X = _X_of_tips(cable, assumptions)
    L = float(np.pi / np.sqrt(tau_ms[0] / tau_ms[1] - 1.0)) if len(tau_ms) > 1 else np.nan
    found = (*_of_the_cell(cable, assumptions, X), *_of_the_modes(amplitude_soma))
    return Peeled(L, float(X.mean()) if len(X) else np.nan, found)


def _X_of_tips(cable: Cable, assumptions: Assumptions) -> Real:
    """Return X of every node that no frustum starts from, the soma apart."""
    forest = Forest([(cable,)], (assumptions,))
    _, X = forest.distances()
    nodes = np.arange(1, len(cable.parent))
    tips: Real = forest.by_cell(X)[0][np.setdiff1d(nodes, cable.parent), 0]
    return tips


def _of_the_cell(cable: Cable, assumptions: Assumptions, X: Real) -> Iterator[str]:
    """Yield what in the cell breaks a condition."""
    membranes = {assumptions.of(int(code)) for code in np.unique(cable.kind)}
    if len(membranes) > 1:
        yield "R_m, R_i, C_m or spines differ between domains; peeling takes one uniform membrane"
    if assumptions.soma_shunt_nS > 0.0:
        yield (
            f"a shunt of {assumptions.soma_shunt_nS:g} nS is at the soma; peeling takes an undamaged one, "
            "and with a shunt τ0 is shorter than R_m·C_m"
        )
    soma = cable.traced.soma.area
    share = soma / (soma + sum(part.sum() for part in cable.areas())) if soma else 0.0
    if share > _SOMA_SHARE:
        yield (
            f"the soma has {100.0 * share:.0f} % of the membrane; peeling takes a cylinder without one and "
            "comes out too long"
        )
    if len(X) and X.std() > _SPREAD * X.mean():
        yield (
            f"tips lie from X = {X.min():.2f} to {X.max():.2f}; peeling takes trees that end at one X, as "
            "those equivalent to a cylinder do"
        )


def _of_the_modes(amplitude_soma: Real) -> Iterator[str]:
    """Yield what in the modes breaks a condition."""
    if len(amplitude_soma) > 1 and amplitude_soma[1] < _UNSEEN * amplitude_soma[0]:
        yield (
            "τ1 belongs to charge that moves between trees and leaves the soma at rest, or nearly; it cannot "
            "be peeled from a recording there, and its length is one from tip to tip"
        )
