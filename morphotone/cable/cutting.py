"""Frusta cut into pieces of equal L, which changes nothing but the number of nodes."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

Index = NDArray[np.int64]
Real = NDArray[np.float64]


class Cut(NamedTuple):
    """Frusta after cutting, in the order of those they come from.

    Attributes
    ----------
    of : ndarray of int64, shape (pieces,)
        The frustum each piece is part of.
    parent : ndarray of int64, shape (pieces,)
        The piece it follows, -1 at roots.
    r_start, r_end, length : ndarray, shape (pieces, columns)
        Radii and axial length, µm.
    ends : ndarray of int64, shape (frusta,)
        The last piece of each frustum, whose end is the frustum's.
    """

    of: Index
    parent: Index
    r_start: Real
    r_end: Real
    length: Real
    ends: Index


def cut(parent: Index, r_start: Real, r_end: Real, length: Real, pieces: Index) -> Cut:
    """Cut each frustum into so many pieces; one that stays whole keeps its very numbers.

    Along a linear taper L grows with the square root of the radius.

    Parameters
    ----------
    parent : ndarray of int64, shape (frusta,)
        The frustum each one follows, smaller than its own number; -1 at roots.
    r_start, r_end, length : ndarray, shape (frusta, columns)
        Radii and axial length, µm.
    pieces : ndarray of int64, shape (frusta,)
        How many, 1 or more.
    """
    ends = np.cumsum(pieces) - 1
    of = np.repeat(np.arange(len(pieces)), pieces)
    step = np.arange(len(of)) - (ends - pieces + 1)[of]
    begin, finish = (((step + more) / pieces[of])[:, None] for more in (0, 1))
    root_start, root_end = np.sqrt(r_start)[of], np.sqrt(r_end)[of]
    root_begin, root_finish = ((1.0 - part) * root_start + part * root_end for part in (begin, finish))
    share = (finish - begin) * (root_begin + root_finish) / (root_start + root_end)
    above = parent[of]
    heads = np.where(above < 0, -1, ends[above])
    return Cut(
        of,
        np.where(step > 0, np.arange(-1, len(of) - 1), heads),
        np.where(begin == 0.0, r_start[of], root_begin**2),
        np.where(finish == 1.0, r_end[of], root_finish**2),
        length[of] * share,
        ends,
    )
