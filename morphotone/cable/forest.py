"""Many cells as one set of arrays in order of elimination, solved for all cases at once."""

from collections.abc import Sequence
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.cutting import cut
from morphotone.cable.frustum import Pi, Values, electrotonic_lengths, pi_of_frusta
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


class Solved(NamedTuple):
    """By place, one column per case asked: impedances in MΩ, natural logarithms of the attenuations.

    ln(V_site/V_soma) for current at the site and ln(V_soma/V_site) for current at the soma; complex where
    s is, the imaginary part being the phase summed along the path.
    """

    Z_in: Values
    Z_transfer: Values
    log_attenuation_to_soma: Values
    log_attenuation_from_soma: Values


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
        self.kind = frusta.kind[order]
        self.r_start, self.r_end, self.length = (
            values[order] for values in (frusta.r_start, frusta.r_end, frusta.length)
        )
        sizes = [len(cables[0].parent) for cables in cells]
        self.nodes = np.split(self.plan.place[frusta.ends], np.cumsum(sizes)[:-1])  # places, by cell
        self.at_root = np.array([places[0] for places in self.nodes])
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
        """Return impedances and log-attenuations, in real arithmetic if every s is real.

        Z_in = 1/(admittance away + admittance toward the soma).  Over one frustum V_parent/V =
        1 + (shunt + away)/axial for current at the soma, and V/V_parent = 1 + (shunt + beyond)/axial
        for current at the site; both are 1 plus a positive number at 0 Hz, and their logarithms add up
        along the path (Zador, Agmon-Snir & Segev 1995, J Neurosci 15:1669–1682).
        """
        R_i, g = self.constants(columns)
        first_root = len(self.kind) - self.plan.roots
        pieces = _frusta_only(first_root, self.geometry(columns), R_i, g)
        looks = sweep(self.plan, pieces, self.load(columns, g.dtype))
        far = pieces.start + looks.beyond
        toward = pieces.end + pieces.axial * (far / (pieces.axial + far))
        toward[first_root:] = 0.0
        z_in = 1.0 / (looks.away + toward)
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):  # where nothing gets through
            fall_from = (pieces.end + looks.away) / pieces.axial
            fall_to = far / pieces.axial
        log_from = path_sums(self.plan, np.log1p(fall_from))
        log_to = path_sums(self.plan, np.log1p(fall_to))
        at_soma = z_in[self._root_of_place()]
        return Solved(z_in, at_soma * np.exp(-log_from), log_to, log_from)

    def load(self, columns: Sequence[Column], dtype: np.dtype[np.generic]) -> Values:
        """Return the soma's membrane and the shunt at the roots, µS, by place; 0 elsewhere."""
        _, g = self.constants(columns, np.full(1, SOMA))
        which = [column.which for column in columns]
        shunt = np.array([self.many[column.which].soma_shunt_nS for column in columns])
        load = np.zeros((len(self.kind), len(columns)), dtype)
        membrane = MICROSIEMENS_PER_S_CM2_UM2 * self.soma_area[:, which] * g
        load[self.at_root] = membrane + MICROSIEMENS_PER_NANOSIEMENS * shunt
        return load

    def distances(self) -> tuple[Real, Real, Real]:
        """Return path distance (µm), X and λ (µm; NaN at a soma), by place and assumptions.

        λ = sqrt((R_m/R_i)(d/4)) with the local diameter d.
        """
        columns = [Column(which, 0.0) for which in range(len(self.many))]
        r_start, r_end, length = self.geometry(columns)
        R_i, leak = self.constants(columns)
        x = electrotonic_lengths(r_start, r_end, length, R_i, leak)
        sums = path_sums(self.plan, np.concatenate((length + np.zeros_like(x), x), axis=1))
        lambdas = np.sqrt(UM_PER_CM * self._local_radius() / (2.0 * R_i * leak))
        return sums[:, : len(columns)], sums[:, len(columns) :], lambdas

    def _local_radius(self) -> Real:
        """Return the radius at the end of each frustum, at root samples their own, at somata NaN, µm."""
        radius = self.r_end.copy()
        for place, cables in zip(self.at_root, self.cells, strict=True):
            traced = cables[0].traced
            radius[place] = np.nan if len(traced.soma.members) else traced.radius[traced.root]
        return radius

    def _root_of_place(self) -> Index:
        """Return for each place the place of its root."""
        root = np.arange(len(self.kind))
        for step in reversed(self.plan.steps):
            root[step.first : step.last] = root[step.parent]
        return root

    def by_cell(self, values: NDArray[Any]) -> list[NDArray[Any]]:
        """Cut an array by place into one by node per cell."""
        return [values[places] for places in self.nodes]


class _Frusta(NamedTuple):
    """The frusta of a forest in the order of the cells' nodes.

    Geometry has shape (n, 1), or (n, assumptions) where it differs between assumptions.
    """

    parent: Index
    kind: Index
    r_start: Real
    r_end: Real
    length: Real
    ends: Index  # where each node of the cells stands, one cell after the other


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
        np.concatenate([np.stack([getattr(c, name) for c in cables[:columns]], axis=1) for cables in cells])
        for name in ("r_start", "r_end", "length")
    )
    kind = np.concatenate([cable.kind for cable in first])
    whole = _Frusta(parent, kind, r_start, r_end, length, np.arange(len(parent)))
    R_i, leak = (
        np.stack(np.broadcast_arrays(*values), axis=1)
        for values in list(zip(*(membrane_of(kind, one) for one in many), strict=True))[:2]
    )
    pieces = np.ceil(electrotonic_lengths(r_start, r_end, length, R_i, leak).max(axis=1) / _LONGEST)
    if not (pieces > 1).any():
        return whole
    parts = cut(parent, r_start, r_end, length, np.clip(pieces, 1, _MOST_PIECES).astype(np.int64))
    return _Frusta(parts.parent, kind[parts.of], parts.r_start, parts.r_end, parts.length, parts.ends)


def _frusta_only(first_root: int, geometry: tuple[Real, Real, Real], R_i: Values, g: Values) -> Pi:
    """Return the πs of all frusta, and at the roots, where there is none, an axial admittance of 1."""
    rows = slice(0, first_root)
    constants = [values if len(values) == 1 else values[rows] for values in (R_i, g)]
    frusta = pi_of_frusta(*(part[rows] for part in geometry), *constants)
    padding = np.zeros((len(geometry[0]) - first_root, frusta.axial.shape[1]), frusta.axial.dtype)
    return Pi(
        *(np.concatenate((part, padding + fill)) for part, fill in zip(frusta, (1.0, 0.0, 0.0), strict=True))
    )
