"""What is read off the two sweeps over a forest, each quantity when it is first asked for."""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.frustum import Pi, Values
from morphotone.cable.sweeps import Looks, Schedule, path_sums

Index = NDArray[np.int64]
Real = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Solved:
    """A forest solved in some cases; arrays are by place, shape (places, cases), impedances in MΩ.

    Attributes
    ----------
    plan : Schedule
        The order of elimination.
    root : ndarray of int64, shape (places,)
        The place of the root of each place's cell.
    pieces : Pi
        What lies between each node and its parent, µS.
    looks : Looks
        What each node sees in both directions, µS.

    Notes
    -----
    Over one frustum V_parent/V = 1 + (shunt + away)/axial for current at the soma, and V/V_parent =
    1 + (shunt + beyond)/axial for current at the site; both are 1 plus a positive number at 0 Hz, and their
    logarithms add up along the path (Zador, Agmon-Snir & Segev 1995, J Neurosci 15:1669–1682).
    """

    plan: Schedule
    root: Index
    pieces: Pi
    looks: Looks

    def Z_in_at(self, places: Index) -> Values:
        """Return input impedances: 1 over the admittance away plus the admittance toward the soma."""
        axial, start, end = (part.take(places, axis=0) for part in self.pieces)
        far = start + self.looks.beyond.take(places, axis=0)
        toward = end + axial * (far / (axial + far))
        impedance: Values = 1.0 / (self.looks.away.take(places, axis=0) + toward)
        return impedance

    @cached_property
    def Z_in(self) -> Values:
        """Input impedance."""
        return self.Z_in_at(np.arange(len(self.root)))

    @cached_property
    def Z_transfer(self) -> Values:
        """Transfer impedance to the soma, the same in both directions."""
        at_roots = np.zeros_like(self.looks.away)
        roots = np.arange(len(self.root) - self.plan.roots, len(self.root))
        at_roots[roots] = self.Z_in_at(roots)
        transfer: Values = at_roots.take(self.root, axis=0) * np.exp(-self.log_attenuation_from_soma)
        return transfer

    @cached_property
    def log_attenuation_to_soma(self) -> Values:
        """ln(V_site/V_soma) for current at the site, its imaginary part the phase summed along the path."""
        return self._logarithm(self.log_magnitude_to_soma, "phase_to_soma")

    @cached_property
    def log_attenuation_from_soma(self) -> Values:
        """ln(V_soma/V_site) for current at the soma, its imaginary part the phase summed along the path."""
        return self._logarithm(self.log_magnitude_from_soma, "phase_from_soma")

    @property
    def log_magnitude_to_soma(self) -> Real:
        """ln|V_site/V_soma| for current at the site."""
        return self._log_magnitudes[:, : self.looks.away.shape[1]]

    @property
    def log_magnitude_from_soma(self) -> Real:
        """ln|V_soma/V_site| for current at the soma."""
        return self._log_magnitudes[:, self.looks.away.shape[1] :]

    @cached_property
    def phase_to_soma(self) -> Real:
        """Phase of V_site/V_soma for current at the site, summed along the path."""
        return self._phase(self._through_to_soma)

    @cached_property
    def phase_from_soma(self) -> Real:
        """Phase of V_soma/V_site for current at the soma, summed along the path."""
        return self._phase(self._through_from_soma)

    @cached_property
    def _log_magnitudes(self) -> Real:
        """The two logarithms side by side, so that one walk along the paths serves both."""
        axial = self.pieces.axial
        magnitudes = np.empty((len(axial), 2 * axial.shape[1]))
        to_soma, from_soma = np.split(magnitudes, 2, axis=1)
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):  # where nothing gets through
            if np.iscomplexobj(axial):
                size = np.abs(axial)
                np.divide(np.abs(axial + self._through_to_soma), size, out=to_soma)
                np.divide(np.abs(axial + self._through_from_soma), size, out=from_soma)
                np.log(magnitudes, out=magnitudes)
            else:
                np.divide(self._through_to_soma, axial, out=to_soma)
                np.divide(self._through_from_soma, axial, out=from_soma)
                np.log1p(magnitudes, out=magnitudes)
        return path_sums(self.plan, magnitudes)

    @property
    def _through_to_soma(self) -> Values:
        """What the current toward the soma flows into beyond the piece, µS."""
        through: Values = self.pieces.start + self.looks.beyond
        return through

    @property
    def _through_from_soma(self) -> Values:
        """What the current away from the soma flows into beyond the piece, µS."""
        through: Values = self.pieces.end + self.looks.away
        return through

    def _phase(self, through: Values) -> Real:
        with np.errstate(divide="ignore", over="ignore", invalid="ignore"):
            return path_sums(self.plan, np.angle(1.0 + through / self.pieces.axial))

    def _logarithm(self, magnitude: Real, phase: str) -> Values:
        """Return the complex logarithm, or the real one where all is real."""
        if not np.iscomplexobj(self.looks.away):
            return magnitude
        logarithm = np.empty(magnitude.shape, np.complex128)
        logarithm.real, logarithm.imag = magnitude, getattr(self, phase)
        return logarithm
