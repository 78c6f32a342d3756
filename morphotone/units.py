"""Factors between units.

Lengths are in µm, R_m in ohm cm2, R_i in ohm cm, C_m in µF/cm2; conductances come out
in µS, impedances in MΩ.
"""

from typing import Final

# Membrane: (S/cm2)·µm2 = 1e-8 S.
MICROSIEMENS_PER_S_CM2_UM2: Final = 1e-2
# Axial: µm2/(ohm cm·µm) = 1e-4 S.
MICROSIEMENS_PER_UM_OHM_CM: Final = 1e2
# 2·R_i·g has the unit 1/cm.
PER_UM_PER_CM: Final = 1e-4
UM_PER_CM: Final = 1e4
# C_m as F/cm2, so that s·C_m is in S/cm2 with s in 1/s.
FARAD_PER_MICROFARAD: Final = 1e-6
MICROSIEMENS_PER_NANOSIEMENS: Final = 1e-3
NANOSIEMENS_PER_MICROSIEMENS: Final = 1e3
# (F/cm2)·µm2 = 1e-8 F.
PICOFARAD_PER_F_CM2_UM2: Final = 1e4
MS_PER_S: Final = 1e3
