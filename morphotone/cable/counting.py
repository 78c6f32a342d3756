"""How many of a cell's modes are slower than a given rate, by counting negative pivots.

On the negative real axis, s = −q, the nodal admittances Y(s) of a cell are a real symmetric matrix.  A
mode of the cell is a q at which Y is singular, and the number of modes with a smaller rate is the number
of Y's negative eigenvalues, as long as no piece resonates on its own with both ends held (Wittrick &
Williams 1971, Q J Mech Appl Math 24:263–284: attribution from memory).  By Sylvester's law of inertia it is
also the number of negative pivots of any elimination, here that of `morphotone.cable.sweeps`: nodes are
folded out of their stream, or hung with the folded stream on their parent node, each with one pivot.

At 0 Hz the sweeps join πs, whose terms are positive there.  On the negative axis an admittance of a piece
grows without bound where the piece resonates, and in an unbranched cable this is where the modes are: half of
all digits would go.  So pieces are joined here as chain matrices,

    (V, I) at the parent = [[A, B], [C, D]]·(V, I) at the node,

whose entries are entire functions of s, sums and products of those of the parts, and never divided by.  With
B = 1/axial the pivot of folding a node is B/(B₁·B₂), of hanging one with load y (A + B·y)/B; for the
count only their signs matter, and up to a positive factor without zeros det Y is the product of all A + B·y
and of what the root sees.

A piece with both ends held resonates from L·sqrt(q·τ − 1) = π on.  Pieces are cut to a third of that, which
changes nothing else.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.cutting import cut
from morphotone.cable.forest import Forest, membrane_of
from morphotone.cable.frustum import Pi, Values, electrotonic_lengths, pi_of_frusta
from morphotone.cable.sweeps import Schedule
from morphotone.cable.tree import Cable
from morphotone.reading.soma import SOMA
from morphotone.units import MICROSIEMENS_PER_NANOSIEMENS, MICROSIEMENS_PER_S_CM2_UM2

Index = NDArray[np.int64]
Real = NDArray[np.float64]

# Of a piece: |Θ| at the fastest rate, as the first resonance is at π; L, so short that a forest cuts none.
_LONGEST, _LONGEST_AT_REST = 1.0, 4.0
_LARGE = 1e100


class Counted(NamedTuple):
    """Per cell and column: how many modes are slower; ln|det Y|, up to a smooth term."""

    slower: Index
    log_det: Real


class Chain(NamedTuple):
    """Chain matrices of pieces, from the node to its parent: A and D without unit, B in MΩ, C in µS."""

    A: Values
    B: Values
    C: Values
    D: Values


class Folded(NamedTuple):
    """By place: whether the pivot is negative; ln of the factor of det Y; what the node sees away, µS."""

    negative: NDArray[np.bool_]
    log_factor: Real
    load: Values


@dataclass(frozen=True, eq=False)
class Lineup:
    """Cells side by side, each of them asked at values of s of its own.

    Attributes
    ----------
    forest : Forest
        The cells, their frusta cut where they would resonate.
    assumptions : Assumptions
        What holds for all of them.
    ends : tuple of ndarray of int64
        Per cell, for each node of its cable, the node in the cable that was cut.
    """

    forest: Forest
    assumptions: Assumptions
    ends: tuple[Index, ...]

    def counted(self, rate: Real) -> Counted:
        """Return what the pivots at s = −rate tell.

        Parameters
        ----------
        rate : ndarray, shape (cells, columns)
            Rates q, 1/s, not above those the lineup was made for.
        """
        folded = self._folded(-rate)
        places = np.concatenate(self.forest.nodes)
        starts = np.cumsum([0, *(len(nodes) for nodes in self.forest.nodes[:-1])])
        return Counted(
            np.add.reduceat(folded.negative[places], starts, axis=0, dtype=np.int64),
            np.add.reduceat(folded.log_factor[places], starts, axis=0),
        )

    def soma_impedance(self, s: Values) -> Values:
        """Return the input impedance at the soma, MΩ, for s (1/s) of shape (cells, columns)."""
        impedance: Values = 1.0 / self._folded(s).load[self.forest.at_root]
        return impedance

    def _folded(self, s: Values) -> Folded:
        """Return the elimination at s of shape (cells, columns)."""
        forest = self.forest
        cable = len(forest.cell) - forest.plan.roots
        R_i, leak, capacity = (
            part[:, None] if len(part) == 1 else part[:cable, None]
            for part in membrane_of(forest.kind, self.assumptions)
        )
        start, end, length = (part[:cable] for part in (forest.r_start, forest.r_end, forest.length))
        pieces = pi_of_frusta(start, end, length, R_i, leak + capacity * s[forest.cell[:cable]])
        return fold(forest.plan, chain_of(pieces), self._load(s))

    def _load(self, s: Values) -> Values:
        """Return the soma's membrane and the shunt at the roots, µS, by place; 0 elsewhere."""
        _, leak, capacity = membrane_of(np.full(1, SOMA), self.assumptions)
        load = np.zeros((len(self.forest.kind), s.shape[1]), s.dtype)
        shunt = MICROSIEMENS_PER_NANOSIEMENS * self.assumptions.soma_shunt_nS
        membrane = MICROSIEMENS_PER_S_CM2_UM2 * self.forest.soma_area * (leak + capacity * s)
        load[self.forest.at_root] = membrane + shunt
        return load


def line_up(cells: Sequence[Cable], assumptions: Assumptions, fastest: Sequence[float]) -> Lineup:
    """Return cells side by side.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` returns them under these assumptions.
    assumptions : Assumptions
        Membrane and shunt are used.
    fastest : sequence of float
        Per cell the greatest |s| that it will be asked at, 1/s.
    """
    finer = [_finer(cable, assumptions, rate) for cable, rate in zip(cells, fastest, strict=True)]
    forest = Forest([(cable,) for cable, _ in finer], (assumptions,))
    return Lineup(forest, assumptions, tuple(ends for _, ends in finer))


def _finer(cable: Cable, assumptions: Assumptions, rate: float) -> tuple[Cable, Index]:
    """Return a cable cut so that no piece resonates, and the new number of each of its nodes."""
    R_i, leak, capacity = membrane_of(cable.kind, assumptions)
    geometry = cable.r_start, cable.r_end, cable.length
    theta = electrotonic_lengths(*geometry, R_i, np.maximum(capacity * rate - leak, 0.0)) / _LONGEST
    at_rest = electrotonic_lengths(*geometry, R_i, leak) / _LONGEST_AT_REST
    pieces = np.ceil(np.maximum(np.maximum(theta, at_rest), 1.0)).astype(np.int64)
    start, end, length = (part[:, None] for part in geometry)
    parts = cut(cable.parent, start, end, length, pieces)
    finer = replace(
        cable,
        parent=parts.parent,
        kind=cable.kind[parts.of],
        r_start=parts.r_start[:, 0],
        r_end=parts.r_end[:, 0],
        length=parts.length[:, 0],
        sample=cable.sample[parts.of],
        node=np.where(cable.node < 0, -1, parts.ends[cable.node]),
    )
    return finer, parts.ends


def chain_of(pieces: Pi) -> Chain:
    """Return the chain matrices of pieces that run from the parent (start) to the node (end)."""
    B = 1.0 / pieces.axial
    A = 1.0 + pieces.end * B
    return Chain(A, B, pieces.start * A + pieces.end, 1.0 + pieces.start * B)


def fold(plan: Schedule, chain: Chain, load: Values) -> Folded:
    """Eliminate all nodes but the roots; tell the sign of every pivot and the size of det Y.

    Parameters
    ----------
    plan : Schedule
        Of the forest.
    chain : Chain, each (nodes − roots, columns)
        By place: the piece between the node and its parent; overwritten.
    load : ndarray, shape (nodes, columns)
        By place: admittance from the node to ground that is no piece's, µS; overwritten.
    """
    negative = np.zeros(load.shape, bool)
    log_factor = np.zeros(load.shape)
    for first, last, parent, child, groups in plan.steps:
        at = slice(first, last)
        upper = Chain(*(part[at] for part in chain))
        if child is None:
            fall = _never_zero(upper.A + upper.B * load[at])
            negative[at] = _opposite(fall, upper.B)
            log_factor[at] += np.log(np.abs(fall))
            load[parent[groups]] += np.add.reduceat((upper.C + upper.D * load[at]) / fall, groups, axis=0)
            continue
        lower = Chain(*(part[child] for part in chain))
        joined, log_size = _moderate(_joined(upper, load[at], lower))
        negative[at] = _opposite(joined.B, upper.B) ^ (lower.B.real < 0.0)
        log_factor[at] += log_size
        for part, new in zip(chain, joined, strict=True):
            part[child] = new
    roots = slice(len(load) - plan.roots, None)
    load[roots] = _never_zero(load[roots])
    negative[roots] = load[roots].real < 0.0
    log_factor[roots] += np.log(np.abs(load[roots]))
    return Folded(negative, log_factor, load)


def _joined(upper: Chain, load: Values, lower: Chain) -> Chain:
    """Return the product of two chain matrices with a load between them, B at resonance moved off zero."""
    A, C = upper.A + upper.B * load, upper.C + upper.D * load
    return Chain(
        A * lower.A + upper.B * lower.C,
        _never_zero(A * lower.B + upper.B * lower.D),
        C * lower.A + upper.D * lower.C,
        C * lower.B + upper.D * lower.D,
    )


def _moderate(chain: Chain) -> tuple[Chain, Real]:
    """Return chain matrices scaled down where double precision could end, and ln of the scale.

    Only cable far leakier than the rest, hundreds of λ long, gets there.
    """
    size = np.abs(chain.A) + np.abs(chain.D)
    large = size > _LARGE
    if not large.any():
        return chain, np.zeros_like(size)
    scale = np.where(large, size, 1.0)
    return Chain(*(part / scale for part in chain)), np.log(scale)


def _opposite(one: Values, other: Values) -> NDArray[np.bool_]:
    """Say where signs differ."""
    differ: NDArray[np.bool_] = (one.real < 0.0) ^ (other.real < 0.0)
    return differ


def _never_zero(values: Values) -> Values:
    """Return values with exact zeros moved by rounding's amount: counts a hair away are as good."""
    moved: Values = np.where(values == 0.0, np.finfo(np.float64).eps, values)
    return moved
