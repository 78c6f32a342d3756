"""What is read off the two sweeps: input and transfer impedance, attenuation both ways, X, λ."""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Column, Forest, membrane_of
from morphotone.cable.frustum import Rows, Values, electrotonic_lengths
from morphotone.cable.solved import Solved
from morphotone.cable.tree import Cable, build
from morphotone.errors import AssumptionError, ReadingError
from morphotone.reading.reconstruction import Reconstruction

Index = NDArray[np.int64]
Real = NDArray[np.float64]


DEFAULTS = Assumptions()

# In space constants; what is left of a steady signal across it is e^-1000. No neuron's step is that long.
_LONGEST_STEP = 1000.0


class Case(NamedTuple):
    """One choice of assumptions and frequency (Hz)."""

    assumptions: Assumptions
    hz: float


@dataclass(frozen=True, eq=False)
class Solution:
    """Many cells solved as one forest; arrays are by node, one cell after the other, one column per case.

    Attributes
    ----------
    forest : Forest
        The cells.
    groups : tuple of Solved
        Cases at rest apart from the others, since they need real arithmetic only.
    column : ndarray of int64, shape (cases,)
        Where each case stands among the columns of all groups.
    which : list of int
        Per case, which of the forest's assumptions it has.
    """

    forest: Forest
    groups: tuple[Solved, ...]
    column: Index
    which: list[int]

    def Z_in(self, nodes: Rows) -> Values:
        """Return input impedances of some nodes, MΩ."""
        places = self.forest.places[nodes]
        return self._side_by_side([group.Z_in_at(places) for group in self.groups])

    def Z_transfer(self, nodes: Rows) -> Values:
        """Return transfer impedances between some nodes and the soma, MΩ."""
        places = self.forest.places[nodes]
        return self._side_by_side([group.Z_transfer.take(places, axis=0) for group in self.groups])

    @cached_property
    def log_attenuation_to_soma(self) -> Real:
        """ln|V_site/V_soma| for current at the site."""
        return self._by_node(self._side_by_side([group.log_magnitude_to_soma for group in self.groups]))

    @cached_property
    def log_attenuation_from_soma(self) -> Real:
        """ln|V_soma/V_site| for current at the soma."""
        return self._by_node(self._side_by_side([group.log_magnitude_from_soma for group in self.groups]))

    @cached_property
    def distances(self) -> tuple[Real, Real]:
        """Path distance (µm) and X."""
        path, X = (self._by_node(values) for values in self.forest.distances())
        return path[:, self.which if path.shape[1] > 1 else [0] * len(self.which)], X[:, self.which]

    @cached_property
    def lambda_um(self) -> Real:
        """Local λ at 0 Hz, µm."""
        return self._by_node(self.forest.lambdas())[:, self.which]

    @cached_property
    def L(self) -> Real:
        """Electrotonic length of the frustum that ends at each node."""
        return self.forest.L_by_node[:, self.which]

    def _side_by_side(self, values: list[Values]) -> Values:
        together = np.concatenate(values, axis=1)
        in_order = (np.diff(self.column) > 0).all()
        return together if in_order else together.take(self.column, axis=1)

    def _by_node(self, by_place: Values) -> Values:
        by_node: Values = by_place.take(self.forest.places, axis=0)
        return by_node


@dataclass(frozen=True, eq=False)
class Electrotonus:
    """The electrotonic structure of one cell: arrays of shape (rows, cases), each found when first asked for.

    Rows are the samples of the file, in the order of the reconstruction, NaN where a sample is not
    analysed; as `solve_cables` gives it, rows are the nodes of ``cable``, of which node 0 is the soma,
    or without a soma the root sample.

    Attributes
    ----------
    cable : Cable
        The cell as frusta.
    cases : tuple of Case
        Assumptions and frequency of each column.
    solution : Solution
        The forest that the cell was solved in.
    rows : slice or ndarray of int64, shape (rows,)
        Which node of the forest each row is, -1 for none.
    """

    cable: Cable
    cases: tuple[Case, ...]
    solution: Solution
    rows: Rows

    @cached_property
    def Z_in(self) -> Values:
        """Input impedance, MΩ; complex128 if any case has a frequency, else float64."""
        return self._blanked(self.solution.Z_in(self.rows))

    @cached_property
    def Z_transfer(self) -> Values:
        """Transfer impedance to the soma (the same in both directions), MΩ; dtype as `Z_in`."""
        return self._blanked(self.solution.Z_transfer(self.rows))

    @cached_property
    def log_attenuation_to_soma(self) -> Real:
        """ln|V_site/V_soma| for current injected at the site."""
        return self._blanked(self.solution.log_attenuation_to_soma[self.rows])

    @cached_property
    def log_attenuation_from_soma(self) -> Real:
        """ln|V_soma/V_site| for current injected at the soma."""
        return self._blanked(self.solution.log_attenuation_from_soma[self.rows])

    @cached_property
    def path_um(self) -> Real:
        """Distance along the cable from the soma's surface, µm."""
        return self._blanked(self.solution.distances[0][self.rows])

    @cached_property
    def X(self) -> Real:
        """Electrotonic distance from the soma (0 Hz, whatever the case's frequency)."""
        return self._blanked(self.solution.distances[1][self.rows])

    @cached_property
    def L(self) -> Real:
        """Electrotonic length of the frustum that ends at the row (0 Hz); 0 at node 0."""
        return self._blanked(self.solution.L[self.rows])

    @cached_property
    def lambda_um(self) -> Real:
        """Space constant of an endless cylinder of the local diameter (0 Hz), µm; NaN at a soma."""
        return self._blanked(self.solution.lambda_um[self.rows])

    @property
    def hz(self) -> Real:
        """Frequency of each case, Hz, shape (cases,)."""
        return np.array([case.hz for case in self.cases])

    @property
    def attenuation_to_soma(self) -> Real:
        """|V_site/V_soma| for current injected at the site, shape (rows, cases)."""
        return np.exp(self.log_attenuation_to_soma)

    @property
    def attenuation_from_soma(self) -> Real:
        """|V_soma/V_site| for current injected at the soma, shape (rows, cases)."""
        return np.exp(self.log_attenuation_from_soma)

    @property
    def R_in_MOhm(self) -> Real:
        """|Z_in|, MΩ, shape (rows, cases)."""
        return np.abs(self.Z_in)

    @property
    def R_transfer_MOhm(self) -> Real:
        """|Z_transfer|, MΩ, shape (rows, cases)."""
        return np.abs(self.Z_transfer)

    def at(self, nodes: Index) -> "Electrotonus":
        """Return the same for some rows only, -1 being none."""
        rows = nodes + self.rows.start if isinstance(self.rows, slice) else self.rows[nodes]
        return replace(self, rows=np.where(nodes < 0, -1, rows))

    def by_sample(self) -> "Electrotonus":
        """Return the same with one row per sample of the file instead of one per node."""
        return self.at(self.cable.node)

    def _blanked(self, values: Values) -> Values:
        """Return values with NaN where a row is no node's."""
        if not isinstance(self.rows, slice):
            values[self.rows < 0] = np.nan
        return values


def solve(
    rec: Reconstruction,
    assumptions: Assumptions | Sequence[Assumptions] = DEFAULTS,
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
    return solve_cables([build_cases(rec, many)], cases_of(many, hz))[0].by_sample()


def cases_of(many: Sequence[Assumptions], hz: Sequence[float] | None = None) -> tuple[Case, ...]:
    """Return the cases, all frequencies of the first assumptions first, 0 Hz leading."""
    return tuple(Case(one, float(f)) for one in many for f in (0.0, *(one.hz if hz is None else hz)))


def build_cases(rec: Reconstruction, many: Sequence[Assumptions]) -> tuple[Cable, ...]:
    """Return a reconstruction's cable under each of several assumptions, built once where geometry agrees.

    Raises
    ------
    ReadingError
        As `morphotone.cable.tree.build`; or when a step is more than 1,000 λ long (reason ``step_endless``).
    AssumptionError
        When the assumptions give trees of different nodes.
    """
    built: list[tuple[Assumptions, Cable]] = []
    cables = []
    for one in many:
        cable = next((cable for known, cable in built if known.geometry == one.geometry), None)
        if cable is None:
            cable = build(rec, one)
            built.append((one, cable))
        if not np.array_equal(cable.node, built[0][1].node):
            raise AssumptionError(
                f"{rec.file}: these assumptions give trees of different nodes (soma, axon or orphans "
                "differ), expected the same tree in all cases; solve them one after the other"
            )
        _refuse_endless_step(rec, cable, one)
        cables.append(cable)
    return tuple(cables)


def _refuse_endless_step(rec: Reconstruction, cable: Cable, assumptions: Assumptions) -> None:
    """Refuse a cell with a step so long that its ends have nothing to do with each other."""
    R_i, leak, _ = membrane_of(cable.kind, assumptions)
    L = electrotonic_lengths(cable.r_start, cable.r_end, cable.length, R_i, leak)
    if L.max() > _LONGEST_STEP:
        at = int(L.argmax())
        sample = cable.sample[at]
        raise ReadingError(
            f"{rec.file}: line {rec.line[sample]}: the step to sample {rec.number[sample]} is "
            f"{cable.length[at]:.4g} um or {L[at]:.4g} space constants long, expected at most "
            f"{_LONGEST_STEP:,.0f}; mend the coordinates, or say the file's unit",
            "step_endless",
        )


def solve_cables(cells: Sequence[Sequence[Cable]], cases: Sequence[Case]) -> list[Electrotonus]:
    """Solve many cells at once, as one forest, each exactly as if it were alone; rows are nodes.

    Parameters
    ----------
    cells : sequence of sequence of Cable
        Per cell one cable per assumptions object, as `build_cases` returns them.
    cases : sequence of Case
        As `cases_of` returns them for the same assumptions.
    """
    many, _ = _distinct(cases)
    return solve_forest(Forest(cells, many), cases) if cells else []


def solve_forest(forest: Forest, cases: Sequence[Case]) -> list[Electrotonus]:
    """Solve the cells of a forest, each exactly as if it were alone; rows are nodes.

    Parameters
    ----------
    forest : Forest
        Under the assumptions of the cases, in the order of their appearance.
    cases : sequence of Case
        As `cases_of` returns them.
    """
    _, which = _distinct(cases)
    columns = [Column(one, 2j * np.pi * case.hz) for one, case in zip(which, cases, strict=True)]
    groups = [
        group
        for at_rest in (True, False)
        if (group := [i for i, case in enumerate(cases) if (case.hz == 0.0) is at_rest])
    ]
    solved = tuple(forest.solved([columns[i] for i in group]) for group in groups)
    solution = Solution(forest, solved, np.argsort(np.concatenate(groups)), which)
    return [
        Electrotonus(cables[0], tuple(cases), solution, slice(first, last))
        for cables, first, last in zip(forest.cells, forest.first[:-1], forest.first[1:], strict=True)
    ]


def _distinct(cases: Sequence[Case]) -> tuple[list[Assumptions], list[int]]:
    """Return the assumptions in order of appearance, and for each case which of them it has."""
    many: list[Assumptions] = []
    which = []
    for case in cases:
        if not many or case.assumptions is not many[-1]:
            many.append(case.assumptions)
        which.append(len(many) - 1)
    return many, which
