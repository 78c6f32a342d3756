"""The literal definitions at a complex frequency s instead of a frequency in Hz."""

from dataclasses import dataclass

from mpmath import mp, mpf

from tests import definitions
from tests.definitions import Constants


@dataclass(frozen=True)
class AtRate(Constants):
    """Constants whose admittance is asked for at a complex frequency s (1/s)."""

    def g(self, s):
        """Return F (1/R_m + s C_m), uS/um2."""
        per_cm2 = mpf(self.F) * (1 / mpf(self.R_m) + mp.mpmathify(s) * mpf(self.C_m) * mpf("1e-6"))
        return per_cm2 * definitions.US_UM2_PER_S_CM2
