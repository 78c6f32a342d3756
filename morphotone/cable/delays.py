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
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Solved
from morphotone.cable.spectrum import forest_of, slowest_ms, spectra
from morphotone.cable.tree import Cable
from morphotone.units import MS_PER_S

Real = NDArray[np.float64]

_STEP = 1e-10  # ε times the slowest membrane time constant
PF_PER_NF = 1e3  # ms/MΩ is nF


@dataclass(frozen=True, eq=False)
class Delays:
    """Delays of one cell, by node of the cable (node 0 is the soma), or by sample after `by_sample`.

    Attributes
    ----------
    cable : Cable
        The cell.
    total_ms : ndarray, shape (rows,)
        Current at the site, voltage at the soma, or the other way round: −d ln Z_i,soma/ds.
    local_ms : ndarray, shape (rows,)
        Current and voltage at the site: −d ln Z_ii/ds.
    propagation_ms : ndarray, shape (rows,)
        Voltage at the site to voltage at the soma, for current at the site: total − local there.
    net_ms : ndarray, shape (rows,)
        Net dendritic delay: how much later the soma responds than to the same current at the soma,
        total − local at the soma.
    R_in_MOhm : ndarray, shape (rows,)
        Input resistance.
    """

    cable: Cable
    total_ms: Real
    local_ms: Real
    propagation_ms: Real
    net_ms: Real
    R_in_MOhm: Real

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
        np.add.at(area, self.cable.parent[1:], start[1:])
        return float(np.average(self.total_ms, weights=area)) if area.any() else float(self.total_ms[0])

    def greatest_ms(self) -> float:
        """Return the greatest total delay of any node, ms."""
        return float(np.nanmax(self.total_ms))

    def by_sample(self) -> "Delays":
        """Return the same with one row per sample of the file, NaN where a sample is not analysed."""
        node = self.cable.node
        arrays = [getattr(self, field.name)[node] for field in fields(self)[1:]]
        for values in arrays:
            values[node < 0] = np.nan
        return Delays(self.cable, *arrays)


def delays(cells: Sequence[Cable], assumptions: Assumptions) -> list[Delays]:
    """Return the delays of many cells, each exactly as if it were alone; rows are nodes.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` makes them under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; frequencies are not used.
    """
    if not cells:
        return []
    forest = forest_of(cells, assumptions)
    step = _STEP / slowest_ms(assumptions)  # ε in 1/ms
    solved = spectra(forest, [1j * MS_PER_S * step], forest.nodes, Solved._fields)
    return [
        _delays(cable, Solved(*(values[:, 0] for values in of_cell)), step)
        for cable, of_cell in zip(cells, solved, strict=True)
    ]


def _delays(cable: Cable, solved: Solved, step: float) -> Delays:
    """Read the delays of one cell off what was solved at s = iε."""
    local, total = (-np.angle(Z) / step for Z in (solved.Z_in, solved.Z_transfer))
    propagation, net = (log.imag / step for log in solved[2:])
    return Delays(cable, total, local, propagation, net, solved.Z_in.real)
