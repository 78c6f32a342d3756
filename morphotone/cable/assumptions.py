"""What a run assumes and nobody measured: membrane, geometry, soma, axon, orphans, frequencies, vetting."""

from dataclasses import dataclass, field


@dataclass(frozen=True)
class Membrane:
    """Passive constants of one domain.

    Attributes
    ----------
    R_m_ohm_cm2 : float
        Specific membrane resistance, ohm cm2.
    R_i_ohm_cm : float
        Axial (cytoplasmic) resistivity, ohm cm.
    C_m_uF_cm2 : float
        Specific membrane capacitance, uF/cm2.
    spine_factor : float
        Area of shaft and spines over area of shaft, F >= 1: R_m/F and C_m F.
    """

    R_m_ohm_cm2: float = 20000.0
    R_i_ohm_cm: float = 150.0
    C_m_uF_cm2: float = 1.0
    spine_factor: float = 1.0


@dataclass(frozen=True)
class Assumptions:
    """Every choice a result depends on and the file does not hold."""

    membrane: Membrane = Membrane()
    domains: dict[int, Membrane] = field(default_factory=dict)
    unit_um: float = 1.0
    shrinkage: tuple[float, float, float] = (1.0, 1.0, 1.0)
    diameter_factor: float = 1.0
    diameter_offset_um: float = 0.0
    branch_start: str = "parent radius"
    soma_rule: str = "auto"
    soma_shunt_nS: float = 0.0
    axon: str = "kept"
    axon_cut_um: float | None = None
    orphans: str = "left out"
    orphan_gap_um: float | None = None
    hz: tuple[float, ...] = ()

    def of(self, kind: int) -> Membrane:
        """Return the membrane of a domain, by its SWC code."""
        return self.domains.get(kind, self.membrane)
