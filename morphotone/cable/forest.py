"""Many cells as one set of arrays in order of elimination, solved for all cases at once."""

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.cutting import cut
from morphotone.cable.frustum import Values, electrotonic_lengths, pi_of_frusta
from morphotone.cable.solved import Solved
from morphotone.cable.sweeps import path_sums, schedule, sweep
from morphotone.cable.tree import Cable
from morphotone.reading.soma import SOMA
from morphotone.units import (
    FARAD_PER_MICROFARAD,
    MICROSIEMENS_PER_NANOSIEMENS,
    MICROSIEMENS_PER_S_CM2_UM2,
    UM_PER_CM,
)

Index = NDArray[np.int64]
Real = NDArray[np.float64]


# A frustum longer than this many λ is cut before it is solved: at 10 kHz λ is some 35 times shorter, and
# across 700 λ the axial admittance, and with it every trace of the far end, is too small for a double.
_LONGEST = 8.0
_MOST_PIECES = (
    1000  # 8,000 λ in one step is no neuron's; what is longer still has an end, but an infinite attenuation
)


class Column(NamedTuple):
    """One case as the engine has it: which assumptions, and the complex frequency s (1/s)."""

    which: int
    s: complex


class Membrane(NamedTuple):
    """Passive constants with the spine factor F in them; shape (1,) where all rows agree, else (rows,)."""

    R_i: Real  # ohm cm
    leak: Real  # F/R_m, S/cm2
    capacity: Real  # F·C_m, F/cm2


def membrane_of(kind: Index, assumptions: Assumptions) -> Membrane:
    """Return the constants of each type code under given assumptions."""
    domains = [code for code in assumptions.domains if (kind == code).any()]
    which = np.zeros(len(kind) if domains else 1, np.int64)
    for index, code in enumerate(domains, start=1):
        which[kind == code] = index
    constants = [
        (m.R_i_ohm_cm, m.spine_factor / m.R_m_ohm_cm2, m.spine_factor * m.C_m_uF_cm2 * FARAD_PER_MICROFARAD)
        for m in (assumptions.membrane, *(assumptions.of(code) for code in domains))
    ]
    return Membrane(*np.array(constants)[which].T)


class Forest:
    """Many cells under several assumptions, ready to be solved; arrays are by place in order of elimination.

    Parameters
    ----------
    cells : sequence of sequence of Cable
        Per cell one cable per assumptions object, all with the same nodes.
    many : sequence of Assumptions
        The assumptions; their frequencies are not used here.
    """

    def __init__(self, cells: Sequence[Sequence[Cable]], many: Sequence[Assumptions]) -> None:
        self.cells, self.many = cells, tuple(many)
        frusta = _frusta_of(cells, self.many)
        self.plan = schedule(frusta.parent)
        order = self.plan.order
        self.kind, self.cell = frusta.kind[order], frusta.cell[order]
        self.r_start, self.r_end, self.length, self.L = (
            values.take(order, axis=0) for values in (frusta.r_start, frusta.r_end, frusta.length, frusta.L)
        )
        self.length[len(order) - self.plan.roots :] = 1.0  # no frustum there; any length will do
        self.L_by_node = frusta.L_of_whole
        self.places = self.plan.place[frusta.ends]  # by node, one cell after the other
        self.first = np.cumsum([0, *(len(cables[0].parent) for cables in cells)])
        self.nodes = np.split(self.places, self.first[1:-1])  # places, by cell
        self.at_root = self.places[self.first[:-1]]
        self.soma_area = np.array([[cable.traced.soma.area for cable in cables] for cables in cells])

    def constants(self, columns: Sequence[Column], code: Index | None = None) -> tuple[Values, Values]:
        """Return R_i (ohm cm) and g(s) = F·(1/R_m + s·C_m) (S/cm2), shape (1 or n, columns).

        By place, or for the type codes given; real where no s has an imaginary part.
        """
        kind = self.kind if code is None else code
        per_column = [membrane_of(kind, self.many[column.which]) for column in columns]
        R_i, leak, capacity = (
            np.stack(np.broadcast_arrays(*values), axis=1) for values in zip(*per_column, strict=True)
        )
        s = np.array([column.s for column in columns])
        s = s if np.iscomplex(s).any() else s.real
        return R_i, leak + s * capacity if s.any() else leak

    def geometry(self, columns: Sequence[Column]) -> tuple[Real, Real, Real]:
        """Return r_start, r_end, length, each (n, 1) or (n, columns)."""
        if self.r_start.shape[1] == 1:
            return self.r_start, self.r_end, self.length
        which = [column.which for column in columns]
        return self.r_start[:, which], self.r_end[:, which], self.length[:, which]

    def solved(self, columns: Sequence[Column]) -> Solved:
        """Return impedances and attenuations, in real arithmetic if every s is real."""
        R_i, g = self.constants(columns)
        first_root = len(self.kind) - self.plan.roots
        pieces = pi_of_frusta(*self.geometry(columns), R_i, g)
        for part, value in zip(pieces, (1.0, 0.0, 0.0), strict=True):
            part[first_root:] = value  # no frustum there
        looks = sweep(self.plan, pieces, self.load(columns, g.dtype))
        return Solved(self.plan, self.at_root[self.cell], pieces, looks)

    def load(self, columns: Sequence[Column], dtype: np.dtype[np.generic]) -> Values:
        """Return the soma's membrane and the shunt at the roots, µS, by place; 0 elsewhere."""
        _, g = self.constants(columns, np.full(1, SOMA))
        which = [column.which for column in columns]
        shunt = np.array([self.many[column.which].soma_shunt_nS for column in columns])
        load = np.zeros((len(self.kind), len(columns)), dtype)
        membrane = MICROSIEMENS_PER_S_CM2_UM2 * self.soma_area[:, which] * g
        load[self.at_root] = membrane + MICROSIEMENS_PER_NANOSIEMENS * shunt
        return load

    def distances(self) -> tuple[Real, Real]:
        """Return path distance (µm) and X by place, shape (places, 1 or assumptions) and (…, assumptions)."""
        lengths = self.length.shape[1]
        sums = path_sums(self.plan, np.concatenate((self.length, self.L), axis=1))
        return sums[:, :lengths], sums[:, lengths:]

    def lambdas(self) -> Real:
        """Return λ = sqrt((R_m/R_i)(d/4)) with the local diameter d, µm, by place and assumptions.

        NaN at a soma.
        """
        R_i, leak = self.constants([Column(which, 0.0) for which in range(len(self.many))])
        radius = self.r_end.copy()  # at root samples their own
        for place, cables in zip(self.at_root, self.cells, strict=True):
            traced = cables[0].traced
            radius[place] = np.nan if len(traced.soma.members) else traced.radius[traced.root]
        lambdas: Real = np.sqrt(UM_PER_CM * radius / (2.0 * R_i * leak))
        return lambdas

    def by_cell(self, values: NDArray[Any]) -> list[NDArray[Any]]:
        """Cut an array by place into one by node per cell."""
        return [values.take(places, axis=0) for places in self.nodes]


class _Frusta(NamedTuple):
    """The frusta of a forest in the order of the cells' nodes.

    Geometry has shape (n, 1), or (n, assumptions) where it differs between assumptions.
    """

    parent: Index
    kind: Index
    r_start: Real
    r_end: Real
    length: Real
    L: Real  # electrotonic length, shape (n, assumptions)
    cell: Index
    ends: Index  # where each node of the cells stands, one cell after the other
    L_of_whole: Real  # by node: of its frustum before any was cut


def _frusta_of(cells: Sequence[Sequence[Cable]], many: Sequence[Assumptions]) -> _Frusta:
    """Return the frusta of many cells one after the other, those too long for double precision cut."""
    first = [cables[0] for cables in cells]
    offsets = np.cumsum([0, *(len(cable.parent) for cable in first)])
    parent = np.concatenate(
        [np.where(c.parent < 0, -1, c.parent + offset) for c, offset in zip(first, offsets, strict=False)]
    )
    alike = all(cable is cables[0] for cables in cells for cable in cables)
    columns = 1 if alike else len(many)
    r_start, r_end, length = (
        np.stack(
            [np.concatenate([getattr(cables[c], name) for cables in cells]) for c in range(columns)], axis=1
        )
        for name in ("r_start", "r_end", "length")
    )
    kind = np.concatenate([cable.kind for cable in first])
    cell = np.repeat(np.arange(len(cells)), np.diff(offsets))
    L = _lengths(kind, r_start, r_end, length, many)
    whole = _Frusta(parent, kind, r_start, r_end, length, L, cell, np.arange(len(parent)), L)
    pieces = np.ceil(L.max(axis=1) / _LONGEST)
    if not (pieces > 1).any():
        return whole
    parts = cut(parent, r_start, r_end, length, np.clip(pieces, 1, _MOST_PIECES).astype(np.int64))
    kind, sides = kind[parts.of], (parts.r_start, parts.r_end, parts.length)
    return _Frusta(parts.parent, kind, *sides, _lengths(kind, *sides, many), cell[parts.of], parts.ends, L)


def _lengths(kind: Index, r_start: Real, r_end: Real, length: Real, many: Sequence[Assumptions]) -> Real:
    """Return the electrotonic length of each frustum at 0 Hz, shape (n, assumptions)."""
    R_i, leak = (
        np.stack(np.broadcast_arrays(*values), axis=1)
        for values in list(zip(*(membrane_of(kind, one) for one in many), strict=True))[:2]
    )
    return electrotonic_lengths(r_start, r_end, length, R_i, leak)
