"""What is read off the two sweeps: input and transfer impedance, attenuation both ways, X, λ."""

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Column, Forest, Solved, membrane_of
from morphotone.cable.frustum import Values, electrotonic_lengths
from morphotone.cable.tree import Cable, build
from morphotone.errors import AssumptionError, ReadingError
from morphotone.reading.reconstruction import Reconstruction

Real = NDArray[np.float64]


DEFAULTS = Assumptions()

# In space constants; what is left of a steady signal across it is e^-1000. No neuron's step is that long.
_LONGEST_STEP = 1000.0


class Case(NamedTuple):
    """One choice of assumptions and frequency (Hz)."""

    assumptions: Assumptions
    hz: float


@dataclass(frozen=True, eq=False)
class Electrotonus:
    """The electrotonic structure of one cell, one column per case.

    Rows are the samples of the file, in the order of the reconstruction, NaN where a sample is not
    analysed; as `solve_cables` gives it, rows are the nodes of ``cable``, of which node 0 is the soma,
    or without a soma the root sample.

    Attributes
    ----------
    cable : Cable
        The cell as frusta.
    cases : tuple of Case
        Assumptions and frequency of each column.
    Z_in, Z_transfer : ndarray, shape (rows, cases)
        Input impedance, and transfer impedance to the soma (the same in both directions), MΩ;
        complex128 if any case has a frequency, else float64.
    log_attenuation_to_soma : ndarray, shape (rows, cases)
        ln|V_site/V_soma| for current injected at the site.
    log_attenuation_from_soma : ndarray, shape (rows, cases)
        ln|V_soma/V_site| for current injected at the soma.
    path_um : ndarray, shape (rows, cases)
        Distance along the cable from the soma's surface, µm.
    X : ndarray, shape (rows, cases)
        Electrotonic distance from the soma (0 Hz, whatever the case's frequency).
    lambda_um : ndarray, shape (rows, cases)
        Space constant of an endless cylinder of the local diameter (0 Hz), µm; NaN at a soma.
    """

    cable: Cable
    cases: tuple[Case, ...]
    Z_in: Values
    Z_transfer: Values
    log_attenuation_to_soma: Real
    log_attenuation_from_soma: Real
    path_um: Real
    X: Real
    lambda_um: Real

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

    def by_sample(self) -> "Electrotonus":
        """Return the same with one row per sample of the file instead of one per node."""
        node = self.cable.node
        arrays = [getattr(self, field.name).take(node, axis=0) for field in fields(self)[2:]]
        left_out = np.flatnonzero(node < 0)
        for values in arrays:
            values[left_out] = np.nan
        return Electrotonus(self.cable, self.cases, *arrays)


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
    if not cells:
        return []
    many, which = _distinct(cases)
    forest = Forest(cells, many)
    columns = [Column(one, 2j * np.pi * case.hz) for one, case in zip(which, cases, strict=True)]
    # Cases at rest apart from the others, since they need real arithmetic only.
    groups = [
        group
        for at_rest in (True, False)
        if (group := [i for i, case in enumerate(cases) if (case.hz == 0.0) is at_rest])
    ]
    parts = [forest.solved([columns[i] for i in group]) for group in groups]
    back = np.argsort(np.concatenate(groups))
    solved = Solved(*(np.concatenate(values, axis=1)[:, back] for values in zip(*parts, strict=True)))
    logarithms = (values.real for values in solved[2:])
    values_of_all = (*solved[:2], *logarithms, *(values[:, which] for values in forest.distances()))
    per_cell = zip(*(forest.by_cell(values) for values in values_of_all), strict=True)
    return [
        Electrotonus(cables[0], tuple(cases), *values) for cables, values in zip(cells, per_cell, strict=True)
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
