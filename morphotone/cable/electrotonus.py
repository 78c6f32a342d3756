"""What is read off the two sweeps: input and transfer impedance, attenuation both ways, X, λ."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.frustum import Pi, Values, pi_of_frusta
from morphotone.cable.sweeps import Schedule, path_sums, schedule, sweep
from morphotone.cable.tree import Cable, build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import Reconstruction
from morphotone.reading.soma import SOMA
from morphotone.units import (
    FARAD_PER_MICROFARAD,
    MICROSIEMENS_PER_NANOSIEMENS,
    MICROSIEMENS_PER_S_CM2_UM2,
    PER_UM_PER_CM,
    UM_PER_CM,
)

Index = NDArray[np.int64]
Real = NDArray[np.float64]


class Case(NamedTuple):
    """One choice of assumptions and frequency (Hz)."""

    assumptions: Assumptions
    hz: float


@dataclass(frozen=True, eq=False)
class Electrotonus:
    """The electrotonic structure of one cell, by node and case.

    Arrays have one row per electrical node of ``cable`` and one column per case; ``at_samples`` spreads
    one over the samples of the file.  Node 0 is the soma, or without a soma the root sample.

    Attributes
    ----------
    cable : Cable
        The cell as frusta.
    cases : tuple of Case
        Assumptions and frequency of each column.
    Z_in, Z_transfer : ndarray, shape (nodes, cases)
        Input impedance, and transfer impedance to the soma (the same in both directions), MΩ;
        complex128 if any case has a frequency, else float64.
    log_attenuation_to_soma : ndarray, shape (nodes, cases)
        ln|V_site/V_soma| for current injected at the site.
    log_attenuation_from_soma : ndarray, shape (nodes, cases)
        ln|V_soma/V_site| for current injected at the soma.
    X : ndarray, shape (nodes, cases)
        Electrotonic distance from the soma (0 Hz, whatever the case's frequency).
    path_um : ndarray, shape (nodes, cases)
        Distance along the cable from the soma's surface, µm.
    lambda_um : ndarray, shape (nodes, cases)
        Space constant of an endless cylinder of the diameter at the node (0 Hz), µm; NaN at a soma.
    """

    cable: Cable
    cases: tuple[Case, ...]
    Z_in: Values
    Z_transfer: Values
    log_attenuation_to_soma: Real
    log_attenuation_from_soma: Real
    X: Real
    path_um: Real
    lambda_um: Real

    @property
    def attenuation_to_soma(self) -> Real:
        """|V_site/V_soma| for current injected at the site, shape (nodes, cases)."""
        return np.exp(self.log_attenuation_to_soma)

    @property
    def attenuation_from_soma(self) -> Real:
        """|V_soma/V_site| for current injected at the soma, shape (nodes, cases)."""
        return np.exp(self.log_attenuation_from_soma)

    @property
    def R_in_MOhm(self) -> Real:
        """|Z_in|, MΩ, shape (nodes, cases)."""
        return np.abs(self.Z_in)

    @property
    def R_transfer_MOhm(self) -> Real:
        """|Z_transfer|, MΩ, shape (nodes, cases)."""
        return np.abs(self.Z_transfer)

    def at_samples(self, by_node: NDArray[np.generic]) -> NDArray[np.generic]:
        """Return an array by node as one by sample of the file, NaN where a sample is not analysed."""
        spread = by_node[self.cable.node]
        left_out = self.cable.node < 0
        if left_out.any():
            spread = spread.astype(np.result_type(spread, np.float64))
            spread[left_out] = np.nan
        return spread


def solve(
    rec: Reconstruction,
    assumptions: Assumptions | Sequence[Assumptions] = Assumptions(),
    hz: Sequence[float] | None = None,
) -> Electrotonus:
    """Return the electrotonic structure of one reconstruction.

    Parameters
    ----------
    rec : Reconstruction
        As read by `morphotone.read`.
    assumptions : Assumptions or sequence of Assumptions
        Each gives one case per frequency; they may differ in anything that leaves the tree of nodes alike.
    hz : sequence of float, optional
        Frequencies besides 0 Hz; those of each assumptions object unless given.

    Raises
    ------
    ReadingError
        When the cell cannot be turned into cable (see `morphotone.cable.tree.build`).
    AssumptionError
        When several assumptions give trees of different nodes.
    """
    many = [assumptions] if isinstance(assumptions, Assumptions) else list(assumptions)
    return solve_cables([build_cases(rec, many)], cases_of(many, hz))[0]


def cases_of(many: Sequence[Assumptions], hz: Sequence[float] | None = None) -> tuple[Case, ...]:
    """Return the cases, all frequencies of the first assumptions first, 0 Hz leading."""
    return tuple(Case(one, float(f)) for one in many for f in (0.0, *(one.hz if hz is None else hz)))


def build_cases(rec: Reconstruction, many: Sequence[Assumptions]) -> tuple[Cable, ...]:
    """Return a reconstruction's cable under each of several assumptions, built once where geometry agrees."""
    built: list[tuple[Assumptions, Cable]] = []
    cables = []
    for one in many:
        geometry = replace(one, membrane=Membrane(), domains={}, hz=(), soma_shunt_nS=0.0)
        cable = next((cable for known, cable in built if known == geometry), None)
        if cable is None:
            cable = build(rec, geometry)
            built.append((geometry, cable))
        if not np.array_equal(cable.node, built[0][1].node):
            raise AssumptionError(
                f"{rec.file}: these assumptions give trees of different nodes (soma, axon or orphans "
                "differ), expected the same tree in all cases; solve them one after the other"
            )
        cables.append(cable)
    return tuple(cables)


def solve_cables(cells: Sequence[Sequence[Cable]], cases: Sequence[Case]) -> list[Electrotonus]:
    """Solve many cells at once, as one forest, each exactly as if it were alone.

    Parameters
    ----------
    cells : sequence of sequence of Cable
        Per cell one cable per assumptions object, as `build_cases` returns them.
    cases : sequence of Case
        As `cases_of` returns them for the same assumptions.
    """
    if not cells:
        return []
    forest = _Forest(cells, cases)
    at_rest = [column for column, case in enumerate(cases) if case.hz == 0.0]
    moving = [column for column, case in enumerate(cases) if case.hz != 0.0]
    shape = (len(forest.plan.order), len(cases))
    dtype = np.complex128 if moving else np.float64
    z_in, z_transfer = np.empty(shape, dtype), np.empty(shape, dtype)
    to_soma, from_soma = np.empty(shape), np.empty(shape)
    for columns in (at_rest, moving):
        if columns:
            solved = forest.solved(columns)
            for whole, part in zip((z_in, z_transfer, to_soma, from_soma), solved, strict=True):
                whole[:, columns] = part
    path, x = forest.distances()
    by_place = (z_in, z_transfer, to_soma, from_soma, x, path, forest.lambdas())
    return forest.by_cell([values[forest.plan.place] for values in by_place])


class _Forest:
    """Many cells as one set of arrays in order of elimination (by place), with the constants of the cases."""

    def __init__(self, cells: Sequence[Sequence[Cable]], cases: Sequence[Case]) -> None:
        self.cells, self.cases = cells, tuple(cases)
        sizes = [len(cables[0].parent) for cables in cells]
        self.offsets = np.concatenate(([0], np.cumsum(sizes)))
        parent = np.concatenate(
            [
                np.where(cables[0].parent < 0, -1, cables[0].parent + offset)
                for cables, offset in zip(cells, self.offsets, strict=False)
            ]
        )
        self.plan: Schedule = schedule(parent)
        self.at_root = self.plan.place[self.offsets[:-1]]
        order = self.plan.order
        self.kind = np.concatenate([cables[0].kind for cables in cells])[order]
        # One column of geometry where all assumptions agree on it, else one per assumptions object.
        alike = all(cable is cables[0] for cables in cells for cable in cables)
        columns = 1 if alike else len(cells[0])
        self.geometry_of = _assumptions_of_cases(self.cases) if columns > 1 else [0] * len(self.cases)
        self.r_start, self.r_end, self.length = (
            np.concatenate(
                [np.stack([getattr(cable, name) for cable in cables[:columns]], axis=1) for cables in cells]
            )[order]
            for name in ("r_start", "r_end", "length")
        )
        self.soma_area = np.array(
            [[cable.traced.soma.area for cable in cables[:columns]] for cables in cells]
        )
        self.has_soma = np.array([len(cables[0].traced.soma.members) > 0 for cables in cells])

    def constants(self, columns: Sequence[int], code: Index | None = None) -> tuple[Values, Values]:
        """Return R_i (ohm cm) and g(s) = F·(1/R_m + s·C_m) (S/cm2), (1 or n, columns).

        By place, or for the type codes given.
        """
        codes, which = np.unique(self.kind if code is None else code, return_inverse=True)
        per_code = [[self.cases[column].assumptions.of(int(c)) for column in columns] for c in codes]
        if all(row == per_code[0] for row in per_code):
            per_code, which = per_code[:1], np.zeros(1, np.int64)
        R_i = np.array([[m.R_i_ohm_cm for m in row] for row in per_code])
        leak = np.array([[m.spine_factor / m.R_m_ohm_cm2 for m in row] for row in per_code])
        omega = 2.0 * np.pi * np.array([self.cases[column].hz for column in columns])
        if not omega.any():
            return R_i[which], leak[which]
        charge = np.array(
            [[m.spine_factor * m.C_m_uF_cm2 * FARAD_PER_MICROFARAD for m in row] for row in per_code]
        )
        return R_i[which], (leak + 1j * omega * charge)[which]

    def geometry(self, columns: Sequence[int]) -> tuple[Real, Real, Real]:
        """Return r_start, r_end, length, each (n, 1) or (n, columns)."""
        if self.r_start.shape[1] == 1:
            return self.r_start, self.r_end, self.length
        which = [self.geometry_of[column] for column in columns]
        return self.r_start[:, which], self.r_end[:, which], self.length[:, which]

    def solved(self, columns: Sequence[int]) -> tuple[Values, Values, Real, Real]:
        """Return Z_in, Z_transfer and the log-attenuations toward and from the soma for some cases, by place.

        Z_in = 1/(admittance away + admittance toward the soma).  Over one frustum, for current at the
        soma, V_parent/V = 1 + (shunt + away)/axial; for current at the site, V/V_parent = 1 + (shunt + beyond)/
        axial; both are 1 plus a positive number at 0 Hz, and their logarithms add up along the path
        (Zador, Agmon-Snir & Segev 1995, J Neurosci 15:1669–1682).
        """
        R_i, g = self.constants(columns)
        first_root = len(self.kind) - self.plan.roots
        pieces = _frusta_only(first_root, self.geometry(columns), R_i, g)
        looks = sweep(self.plan, pieces, self.load(columns, g.dtype))
        far = pieces.start + looks.beyond
        toward = pieces.end + pieces.axial * (far / (pieces.axial + far))
        toward[first_root:] = 0.0
        z_in = 1.0 / (looks.away + toward)
        fall_from = (pieces.end + looks.away) / pieces.axial
        fall_to = far / pieces.axial
        log_from = path_sums(self.plan, np.log1p(fall_from))
        log_to = path_sums(self.plan, np.log1p(fall_to).real)
        at_soma = z_in[self._root_of_place()]
        return z_in, at_soma * np.exp(-log_from), log_to, log_from.real

    def load(self, columns: Sequence[int], dtype: np.dtype[np.generic]) -> Values:
        """Return the soma's membrane and shunt at the roots, µS, by place; 0 elsewhere."""
        _, g = self.constants(columns, np.full(1, SOMA))
        area = (
            self.soma_area
            if self.soma_area.shape[1] == 1
            else self.soma_area[:, [self.geometry_of[c] for c in columns]]
        )
        shunt = np.array([self.cases[column].assumptions.soma_shunt_nS for column in columns])
        load = np.zeros((len(self.kind), len(columns)), dtype)
        load[self.at_root] = MICROSIEMENS_PER_S_CM2_UM2 * area * g + np.where(
            self.has_soma[:, None], MICROSIEMENS_PER_NANOSIEMENS * shunt, 0.0
        )
        return load

    def distances(self) -> tuple[Real, Real]:
        """Return path distance (µm) and X of every place and case.

        Per frustum X = 2h/(√r1 + √r2)·sqrt(2·R_i·σ/R_m), exact for a linear taper.
        """
        every = range(len(self.cases))
        at_rest = _Forest.constants
        r_start, r_end, length = self.geometry(every)
        R_i, g = at_rest(self, every)
        slant = np.hypot(1.0, np.divide(r_end - r_start, length, out=np.zeros_like(length), where=length > 0))
        x = (
            2.0
            * length
            / (np.sqrt(r_start) + np.sqrt(r_end))
            * np.sqrt(2.0 * PER_UM_PER_CM * R_i * g.real * slant)
        )
        path = np.broadcast_to(length, x.shape)
        sums = path_sums(self.plan, np.concatenate((path, x), axis=1))
        return sums[:, : len(self.cases)], sums[:, len(self.cases) :]

    def lambdas(self) -> Real:
        """Return λ = sqrt((R_m/R_i)(d/4)), µm, by place and case; NaN at a soma."""
        every = range(len(self.cases))
        R_i, g = self.constants(every)
        r_end = self.geometry(every)[1].copy()
        roots = [[cable.traced.radius[cable.traced.root] for cable in cables] for cables in self.cells]
        r_end[self.at_root] = np.where(self.has_soma[:, None], np.nan, np.array(roots)[:, : r_end.shape[1]])
        return np.sqrt(UM_PER_CM * r_end / (2.0 * R_i * g.real))

    def _root_of_place(self) -> Index:
        cell = np.repeat(self.at_root, np.diff(self.offsets))
        return cell[self.plan.order]

    def by_cell(self, arrays: Sequence[Values]) -> list[Electrotonus]:
        """Cut arrays over the forest's nodes into one Electrotonus per cell."""
        return [
            Electrotonus(cables[0], self.cases, *(values[first:last] for values in arrays))
            for cables, first, last in zip(self.cells, self.offsets[:-1], self.offsets[1:], strict=True)
        ]


def _assumptions_of_cases(cases: Sequence[Case]) -> list[int]:
    """Return which assumptions object, in order of appearance, each case has."""
    seen: list[Assumptions] = []
    which = []
    for case in cases:
        if not seen or case.assumptions is not seen[-1]:
            seen.append(case.assumptions)
        which.append(len(seen) - 1)
    return which


def _frusta_only(first_root: int, geometry: tuple[Real, Real, Real], R_i: Values, g: Values) -> Pi:
    """Return the πs of all frusta, and at the roots, where there is none, an axial admittance of 1."""
    rows = slice(0, first_root)
    constants = [values if len(values) == 1 else values[rows] for values in (R_i, g)]
    frusta = pi_of_frusta(*(part[rows] for part in geometry), *constants)
    padding = np.zeros((len(geometry[0]) - first_root, frusta.axial.shape[1]), frusta.axial.dtype)
    return Pi(
        *(np.concatenate((part, padding + fill)) for part, fill in zip(frusta, (1.0, 0.0, 0.0), strict=True))
    )
