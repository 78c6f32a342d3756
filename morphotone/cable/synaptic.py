"""The synaptic current that transients answer to."""

from dataclasses import dataclass

import numpy as np

from morphotone.cable.contour import Complex
from morphotone.errors import AssumptionError

# No current in a neuron is outside; well inside what the inversion was tried on.
_SHORTEST_MS, _LONGEST_MS = 1e-6, 1e6


@dataclass(frozen=True)
class SynapticCurrent:
    """A current i(t) ∝ e^{−t/decay} − e^{−t/rise}, or (t/rise)·e^{−t/rise} when the two are equal.

    Rall 1967, J Neurophysiol 30:1138–1168, for the alpha function.

    Attributes
    ----------
    rise_ms, decay_ms : float
        Time constants, ms; equal for an alpha function, which peaks at the rise time.
    """

    rise_ms: float
    decay_ms: float

    def __post_init__(self) -> None:
        for name, value in (("rise", self.rise_ms), ("decay", self.decay_ms)):
            if not _SHORTEST_MS <= value <= _LONGEST_MS:  # NaN fails too
                raise AssumptionError(
                    f"{name} time {value!r} ms of the synaptic current, expected a number from "
                    f"{_SHORTEST_MS:g} to {_LONGEST_MS:g} ms"
                )
        if self.rise_ms > self.decay_ms:
            raise AssumptionError(
                f"rise time {self.rise_ms!r} ms is longer than the decay time {self.decay_ms!r} ms, expected "
                "rise < decay, or both equal for an alpha function; exchange them if their order was mistaken"
            )

    @property
    def peak_time_ms(self) -> float:
        """When the current is greatest, ms: rise·decay/(decay − rise)·ln(decay/rise), or the rise time."""
        excess = (self.decay_ms - self.rise_ms) / self.rise_ms
        return self.decay_ms * (float(np.log1p(excess)) / excess if excess else 1.0)

    @property
    def charge_fC(self) -> float:
        """Charge of a current with a peak of 1 pA, fC (pA·ms).

        A current of charge 1 has its peak of e^{−t/decay}/decay where both exponentials, each divided by
        its time constant, are equal.
        """
        return self.decay_ms * float(np.exp(self.peak_time_ms / self.decay_ms))

    def transform(self, s: Complex) -> Complex:
        """Return the Laplace transform for charge 1: 1/((1 + s·rise)(1 + s·decay)); s in 1/ms."""
        return 1.0 / ((1.0 + s * self.rise_ms) * (1.0 + s * self.decay_ms))
