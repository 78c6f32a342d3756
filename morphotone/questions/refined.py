"""A portrait with its long frusta cut: between distant samples the voltage bends, and so must its line."""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.electrotonus import solve_cables
from morphotone.cable.sites import with_sites
from morphotone.questions.columns import hz_suffix
from morphotone.questions.portrait import COLOUR, Portrait

Index = NDArray[np.int64]
Real = NDArray[np.float64]

# Along 0.05 λ the logarithm of a voltage strays from a straight line by some 0.05²/8, or 0.0003.
_STEP = 0.05
_MOST_PIECES = 40


def refined(portrait: Portrait) -> Portrait:
    """Return the same cell with nodes between its samples where these are more than 0.05 λ apart.

    What is added is solved as exactly as the rest. Values that colour are known there if they are the
    attenuation toward the soma that is shown; any other value stands for its whole frustum.
    """
    cell, cable = portrait.cell, portrait.cell.cable
    pieces = np.clip(np.ceil(cell.L / _STEP), 1, _MOST_PIECES).astype(np.int64)
    pieces[0] = 1
    if (pieces == 1).all():
        return portrait
    cut = np.repeat(np.arange(len(pieces)), pieces - 1)
    first = np.cumsum(pieces - 1) - (pieces - 1)
    fraction = (np.arange(len(cut)) - first[cut] + 1) / pieces[cut]
    fine = with_sites(
        cable, np.append(cut, np.arange(len(pieces))), np.append(fraction, np.zeros(len(pieces)))
    )
    (known,) = solve_cables([(fine.cable,)], cell.electrotonus.cases)
    at_end = fine.node[len(cut) :]  # where the old nodes are now
    of = np.repeat(np.arange(len(pieces)), np.diff(at_end, prepend=-1))
    start, end = portrait.ends
    since, until = _shares(fine.cable.length, of)
    axis = (end - start)[of]
    finer = Portrait(
        cell=replace(cell, electrotonus=known),
        hz=portrait.hz,
        table=portrait.table,
        column=portrait.column,
        ends=(start[of] + since[:, None] * axis, start[of] + until[:, None] * axis),
        values=portrait.values[of],
        marks=portrait.marks,
    )
    if portrait.column == COLOUR + hz_suffix(portrait.hz):
        return replace(finer, values=finer.distances.to_soma)
    return finer


def _shares(length: Real, of: Index) -> tuple[Real, Real]:
    """Return where on its old frustum each piece starts and ends, as shares from the start."""
    total = np.bincount(of, weights=length)
    before = np.cumsum(length) - length
    along = before - before[np.searchsorted(of, of)]
    whole = np.where(total > 0, total, 1.0)[of]
    return along / whole, (along + length) / whole
