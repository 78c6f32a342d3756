"""Delays in a passive tree: how much later the centroid of the voltage comes than that of the current.

Definitions and names: Agmon-Snir & Segev 1993, J Neurophysiol 70:2066–2085.  The centroid of V(t) lies
behind that of the current by −d ln Z/ds at s = 0, whatever the current's course, so that all delays are
derivatives of what the two sweeps give.  They are taken by a complex step (Squire & Trapp 1998, SIAM Rev
40:110–112): at s = iε, ln Z(iε) = ln Z(0) + iε·d ln Z/ds − ε²/2·d² ln Z/ds² − …, so −arg(Z)/ε is the delay up
to a relative error of (ετ)², without the difference of two nearly equal numbers.  With ετ of 1e-10 that is
1e-20, and one complex column gives every delay of every sample.

Propagation and net delay are derivatives of the two attenuations' logarithms, sums of positive terms along
the path: next to the soma they lose no digit, as the differences total − local would.
"""

from collections.abc import Sequence
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Column, Forest
from morphotone.cable.frustum import Values
from morphotone.cable.solved import Solved
from morphotone.cable.spectrum import forest_of, slowest_ms
from morphotone.cable.tree import Cable
from morphotone.units import MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_STEP = 1e-10  # ε times the slowest membrane time constant
PF_PER_NF = 1e3  # ms/MΩ is nF


@dataclass(frozen=True, eq=False)
class Delays:
    """Delays of one cell, arrays of shape (rows,), each found when first asked for.

    Rows are the nodes of the cable (node 0 is the soma), or samples after `by_sample`.

    Attributes
    ----------
    cable : Cable
        The cell.
    solved : Solved
        The forest that the cell is in, at s = iε.
    step : float
        ε, 1/ms.
    places : ndarray of int64, shape (rows,)
        Where in the forest each row is, -1 for none.
    """

    cable: Cable
    solved: Solved
    step: float
    places: Index

    @cached_property
    def total_ms(self) -> Real:
        """Current at the site, voltage at the soma, or the other way round: −d ln Z_i,soma/ds."""
        return self._local_at_soma_ms + self.net_ms

    @cached_property
    def local_ms(self) -> Real:
        """Current and voltage at the site: −d ln Z_ii/ds."""
        return self._blanked(-np.angle(self._Z_in) / self.step)

    @cached_property
    def propagation_ms(self) -> Real:
        """Voltage at the site to voltage at the soma, for current at the site: total − local there."""
        return self._blanked(self.solved.phase_to_soma[self.places, 0] / self.step)

    @cached_property
    def net_ms(self) -> Real:
        """Net dendritic delay: how much later the soma responds than to the same current at the soma."""
        return self._blanked(self.solved.phase_from_soma[self.places, 0] / self.step)

    @cached_property
    def R_in_MOhm(self) -> Real:
        """Input resistance."""
        return self._blanked(self._Z_in.real)

    @property
    def C_in_pF(self) -> Real:
        """Effective input capacitance of each row, pF: local delay over input resistance.

        The capacitance of a single compartment with the same resistance and the same centroid.
        """
        return PF_PER_NF * self.local_ms / self.R_in_MOhm

    def membrane_mean_ms(self) -> float:
        """Return the mean of the total delay over the membrane, soma included, ms; rows must be nodes.

        Each frustum's area is shared between its ends as `Cable.areas` does.
        """
        start, end = self.cable.areas()
        area = end.copy()
        area[0] = self.cable.traced.soma.area
        whole = area.sum() + start.sum()
        total = (area * self.total_ms).sum() + (start * self.total_ms[self.cable.parent]).sum()
        return float(total / whole) if whole else float(self.total_ms[0])

    def greatest_ms(self) -> float:
        """Return the greatest total delay of any node, ms."""
        return float(np.nanmax(self.total_ms))

    def at(self, rows: Index) -> "Delays":
        """Return the same for some rows only, -1 being none."""
        return replace(self, places=np.where(rows < 0, -1, self.places[rows]))

    def by_sample(self) -> "Delays":
        """Return the same with one row per sample of the file, NaN where a sample is not analysed."""
        return self.at(self.cable.node)

    @cached_property
    def _Z_in(self) -> Values:
        return self.solved.Z_in_at(self.places)[:, 0]

    @cached_property
    def _local_at_soma_ms(self) -> float:
        root = self.solved.root[self.places[:1]]
        return float(-np.angle(self.solved.Z_in_at(root)[0, 0]) / self.step)

    def _blanked(self, values: Real) -> Real:
        values[self.places < 0] = np.nan
        return values


def delays(cells: Sequence[Cable], assumptions: Assumptions) -> list[Delays]:
    """Return the delays of many cells, each exactly as if it were alone; rows are nodes.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` makes them under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; frequencies are not used.
    """
    return delays_in(forest_of(cells, assumptions)) if cells else []


def delays_in(forest: Forest) -> list[Delays]:
    """Return the delays of the cells of a forest under its first assumptions; rows are nodes."""
    step = _STEP / slowest_ms(forest.many[0])  # ε in 1/ms
    solved = forest.solved([Column(0, 1j * MS_PER_S * step)])
    return [
        Delays(cables[0], solved, step, places)
        for cables, places in zip(forest.cells, forest.nodes, strict=True)
    ]
