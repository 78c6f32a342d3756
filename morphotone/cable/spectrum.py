"""A forest solved at many complex frequencies, kept at chosen nodes only."""

from collections.abc import Sequence
from typing import Any

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Column, Forest
from morphotone.cable.tree import Cable
from morphotone.units import FARAD_PER_MICROFARAD, MS_PER_S

Index = NDArray[np.int64]

_COLUMNS = 16  # solved at a time: with more, the sweeps leave the processor's cache


def forest_of(cells: Sequence[Cable], assumptions: Assumptions) -> Forest:
    """Return cells under one set of assumptions as a forest."""
    return Forest([[cable] for cable in cells], [assumptions])


def places_of(forest: Forest, nodes: Sequence[Index] | None) -> list[Index]:
    """Return per cell the places of the nodes asked for, of all nodes if none are."""
    if nodes is None:
        return list(forest.nodes)
    return [at[chosen] for at, chosen in zip(forest.nodes, nodes, strict=True)]


def spectra(
    forest: Forest, s: Sequence[complex], places: Sequence[Index], names: Sequence[str]
) -> list[list[NDArray[Any]]]:
    """Solve at complex frequencies, some at a time.

    Parameters
    ----------
    forest : Forest
        Under one set of assumptions.
    s : sequence of complex, shape (columns,)
        Complex frequencies, 1/s; all with an imaginary part, or none.
    places : sequence of ndarray of int64
        Per cell, the places to keep.
    names : sequence of str
        Fields of `morphotone.cable.solved.Solved` to keep.

    Returns
    -------
    list of list of ndarray, shape (places, columns)
        Per cell, the fields in the order named.

    Notes
    -----
    Fast currents reach frequencies at which a frustum is hundreds of space constants long and its axial
    admittance 0 in double precision: the attenuation is then infinite, and the transfer impedance 0.
    """
    kept: list[list[NDArray[Any]]] = []
    with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
        for start in range(0, len(s), _COLUMNS):
            solved = forest.solved([Column(0, each) for each in s[start : start + _COLUMNS]])
            fields = [getattr(solved, name) for name in names]
            kept = kept or [[np.empty((len(at), len(s)), f.dtype) for f in fields] for at in places]
            for cell, at in zip(kept, places, strict=True):
                for out, field in zip(cell, fields, strict=True):
                    out[:, start : start + _COLUMNS] = field[at]
    return kept


def slowest_ms(assumptions: Assumptions) -> float:
    """Return the greatest R_m·C_m of any domain, ms: no time constant of a cell is longer."""
    domains = (assumptions.membrane, *assumptions.domains.values())
    return max(MS_PER_S * FARAD_PER_MICROFARAD * d.R_m_ohm_cm2 * d.C_m_uF_cm2 for d in domains)
