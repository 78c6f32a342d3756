"""One analysed cell, and what several tables need of it, each derived once."""

from dataclasses import dataclass, field
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import Electrotonus
from morphotone.cable.forest import Membrane, membrane_of
from morphotone.cable.traced import AXON
from morphotone.cable.tree import Cable
from morphotone.questions.branches import Branches, branches_of
from morphotone.questions.time_axis import TimeAxis
from morphotone.reading.reconstruction import Reconstruction
from morphotone.reading.soma import SOMA
from morphotone.reading.vetting import Vetting
from morphotone.units import UM_PER_CM

Real = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Cell:
    """An analysed cell; arrays are by node, shape (nodes,), and node 0 has no frustum.

    Attributes
    ----------
    rec : Reconstruction
        As analysed.
    vetting : Vetting
        Its grade and findings.
    electrotonus : Electrotonus
        By node, the cases of one assumptions object, the first at 0 Hz.
    time : TimeAxis
        Delays, time constants, transients, as far as they were asked for.
    """

    rec: Reconstruction
    vetting: Vetting
    electrotonus: Electrotonus
    time: TimeAxis = field(default_factory=TimeAxis)

    @property
    def cable(self) -> Cable:
        """The cell as frusta."""
        return self.electrotonus.cable

    @property
    def assumptions(self) -> Assumptions:
        """What was assumed."""
        return self.electrotonus.cases[0].assumptions

    @cached_property
    def branches(self) -> Branches:
        """Its branches."""
        return branches_of(self.cable.parent)

    @cached_property
    def membrane(self) -> Membrane:
        """Passive constants of each frustum, broadcast to (nodes,)."""
        constants = membrane_of(self.cable.kind, self.assumptions)
        return Membrane(*(np.broadcast_to(values, self.cable.kind.shape) for values in constants))

    @cached_property
    def areas(self) -> tuple[Real, Real]:
        """Membrane that stands for the start and for the end of each frustum, µm2 (see `Cable.areas`)."""
        return self.cable.areas()

    @cached_property
    def area(self) -> Real:
        """Membrane of each frustum, µm2."""
        return self.areas[0] + self.areas[1]

    @cached_property
    def L(self) -> Real:
        """Electrotonic length of each frustum at 0 Hz."""
        return self.electrotonus.L[:, 0]

    @cached_property
    def R_in_MOhm(self) -> tuple[Real, Real]:
        """Input resistance at the soma and at the ends of branches, MΩ, shape (cases,), (branches, cases)."""
        R_in = self.electrotonus.at(np.append(0, self.branches.end)).R_in_MOhm
        return R_in[0], R_in[1:]

    @cached_property
    def lambdas(self) -> tuple[Real, Real]:
        """Least and greatest local λ of each frustum, µm: those of cylinders as thick as its two ends."""
        thin, thick = (choose(self.cable.r_start, self.cable.r_end) for choose in (np.minimum, np.maximum))
        per_root = np.sqrt(UM_PER_CM / (2.0 * self.membrane.R_i * self.membrane.leak))
        return np.sqrt(thin) * per_root, np.sqrt(thick) * per_root

    @cached_property
    def dendritic(self) -> Mask:
        """Frusta outside soma and axon."""
        dendritic: Mask = (self.cable.kind != SOMA) & (self.cable.kind != AXON)
        dendritic[0] = False
        return dendritic

    @cached_property
    def dendritic_membrane(self) -> Real:
        """Dendritic membrane that stands for each node, the starts of its daughters' frusta included, µm2."""
        at_start, at_end = (np.where(self.dendritic, part, 0.0) for part in self.areas)
        of_daughters = np.bincount(self.cable.parent[1:], weights=at_start[1:], minlength=len(at_end))
        return np.asarray(at_end + of_daughters)

    @cached_property
    def farthest_tip(self) -> int:
        """Node of the dendritic tip with the longest path; of all tips where no dendrite is."""
        tips = self.branches.end[self.branches.tips]
        if not len(tips):
            return 0
        dendritic = tips[self.dendritic[tips]]
        tips = dendritic if len(dendritic) else tips
        return int(tips[np.argmax(self.electrotonus.path_um[tips, 0])])
