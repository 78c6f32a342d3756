"""The slow literal reference: cable, node admittances and what is read off, at 50 digits.

Nothing here is shared with the package. From the rows of an SWC file the cable of THEORY section 2 is
built sample by sample, each frustum becomes a 2 x 2 admittance matrix from its two boundary-value problems
(Bessel functions for a taper, hyperbolic functions for a cylinder), the matrices are added up into the
node admittance matrix of the whole tree, and mpmath's LU solver injects a unit current at one node after
the other.

symbol  variable   meaning                                      unit
R_m     R_m        specific membrane resistance                 ohm cm2
R_i     R_i        axial resistivity                            ohm cm
C_m     C_m        specific membrane capacitance                uF/cm2
F       F          spine factor: R_m/F and C_m F
g       g          membrane admittance density F(1/R_m + s C_m)  uS/um2 in here
Z_ij    Z          transfer impedance                           MOhm
"""

from collections import Counter
from dataclasses import dataclass, field
from functools import cache

from mpmath import mp, mpc, mpf

DIGITS = 50
mp.dps = DIGITS

MOHM_UM_PER_OHM_CM = mpf("0.01")  # 1 ohm cm = 1e-6 MOhm * 1e4 um
US_UM2_PER_S_CM2 = mpf("0.01")  # 1 S/cm2 = 1e6 uS / 1e8 um2
SOMA, AXON = 1, 2


@dataclass(frozen=True)
class Constants:
    """Passive constants of one domain (ohm cm2, ohm cm, uF/cm2, none)."""

    R_m: float = 20000.0
    R_i: float = 150.0
    C_m: float = 1.0
    F: float = 1.0

    def g(self, hz):
        """Return the membrane admittance density F (1/R_m + 2 pi i f C_m), uS/um2; real at 0 Hz."""
        per_cm2 = mpf(self.F) / mpf(self.R_m)
        if hz:
            per_cm2 += mpf(self.F) * mpc(0, 2 * mp.pi * mpf(hz)) * mpf(self.C_m) * mpf("1e-6")
        return per_cm2 * US_UM2_PER_S_CM2


@dataclass(frozen=True)
class Choices:
    """Everything the file does not say; the soma rule is named by the caller, never guessed here."""

    soma_rule: str = "none"
    constants: Constants = Constants()
    domains: dict = field(default_factory=dict)
    soma_shunt_nS: float = 0.0
    branch_start: str = "parent radius"
    axon: str = "kept"
    axon_cut_um: float = 0.0
    shrinkage: tuple = (1.0, 1.0, 1.0)
    diameter_factor: float = 1.0
    diameter_offset_um: float = 0.0

    def of(self, kind):
        return self.domains.get(kind, self.constants)


@dataclass(frozen=True)
class Sample:
    """One row of the file after shrinkage and diameter correction."""

    number: int
    kind: int
    at: tuple
    r: mpf
    parent: int


@dataclass(frozen=True)
class Piece:
    """A frustum between two nodes: radii and length in um."""

    start: int
    end: int
    r_start: mpf
    r_end: mpf
    h: mpf
    kind: int


@dataclass
class Cable:
    """The cable of one cell.

    Attributes
    ----------
    node : dict
        Sample number -> node; samples joined by zero length share one. The reference site is node 0.
    pieces : list of Piece
    soma_area : mpf
        um2, at node 0.
    path, X : dict
        Sample number -> path distance, um, and electrotonic distance from the reference site.
    """

    choices: Choices
    node: dict
    pieces: list
    soma_area: mpf
    path: dict
    X: dict

    @property
    def node_count(self):
        """Return the number of nodes, the ends of cut pieces included."""
        return 1 + max([0, *(p.end for p in self.pieces)])


def samples_of(swc, choices=Choices()):
    """Read rows by splitting at blanks; diameters d' = factor d + offset, coordinates by the axis factors."""
    rows = [line.split() for line in swc.splitlines() if line.strip() and not line.startswith("#")]
    factor, offset = mpf(choices.diameter_factor), mpf(choices.diameter_offset_um)
    out = []
    for number, kind, x, y, z, r, parent in rows:
        at = tuple(mpf(float(c)) * mpf(s) for c, s in zip((x, y, z), choices.shrinkage, strict=True))
        out.append(Sample(int(number), int(kind), at, mpf(float(r)) * factor + offset / 2, int(parent)))
    return out


def distance(a, b):
    """Return the Euclidean distance of two points, um."""
    return mp.sqrt(sum(((p - q) ** 2 for p, q in zip(a, b, strict=True)), mpf(0)))


def lateral_area(r1, r2, h):
    """Return pi (r1 + r2) sqrt(h^2 + (r1 - r2)^2), um2: the frustum's mantle (elementary geometry)."""
    return mp.pi * (r1 + r2) * mp.sqrt(h**2 + (r1 - r2) ** 2)


def soma_group(samples):
    """Return the type-1 samples connected to the first of them, in file order."""
    somatic = [s for s in samples if s.kind == SOMA]
    group = {somatic[0].number}
    grown = True
    while grown:
        joined = {s.number for s in somatic if s.parent in group} | {
            s.parent for s in somatic if s.number in group and any(p.number == s.parent for p in somatic)
        }
        grown = not joined <= group
        group |= joined
    return [s for s in somatic if s.number in group]


def soma_of(samples, rule):
    """Return (members, area, centre, surface radius or None) of the soma lump by the rule named.

    Sphere and three points: 4 pi r^2, the INCF SWC specification and the three-point convention (a cylinder
    of length 2r has the same lateral area). Chain: the summed mantles of its frusta. Outline: the sphere of
    the mean distance from the centroid. THEORY section 2.
    """
    members = soma_group(samples)
    if rule in ("sphere", "three-point"):
        return members, 4 * mp.pi * members[0].r ** 2, members[0].at, None
    if rule == "chain":
        by_number = {s.number: s for s in members}
        area = mpf(0)
        for s in members:
            p = by_number.get(s.parent)
            if p is not None:
                area += lateral_area(p.r, s.r, distance(p.at, s.at))
        return members, area, None, None
    if rule == "outline":
        centre = tuple(sum(s.at[k] for s in members) / len(members) for k in range(3))
        mean = sum(distance(s.at, centre) for s in members) / len(members)
        return members, 4 * mp.pi * mean**2, centre, mean
    raise ValueError(f"no literal definition of the soma rule {rule!r}")


def kept_samples(samples, choices):
    """Return the rows in parent-first order, without an axon that is left out."""
    by_parent = {}
    for s in samples:
        by_parent.setdefault(s.parent, []).append(s)
    order, waiting = [], [by_parent[-1][0]]
    while waiting:
        s = waiting.pop()
        if choices.axon == "left out" and s.kind == AXON:
            continue
        order.append(s)
        waiting.extend(reversed(by_parent.get(s.number, [])))
    return order


def stem_length(s, parent, centre, surface):
    """Return max(|x - x_parent| - r_parent, 0), or the same from an outline's sphere, um."""
    if surface is not None:
        return max(distance(s.at, centre) - surface, mpf(0))
    return max(distance(s.at, parent.at) - parent.r, mpf(0))


def cable_of(swc, choices=Choices()):
    """Build the cable of THEORY section 2 from SWC text, row by row."""
    samples = samples_of(swc, choices)
    order = kept_samples(samples, choices)
    cable = Cable(choices, {}, [], mpf(0), {}, {})
    centre = surface = None
    lump = set()
    if choices.soma_rule != "none":
        members, cable.soma_area, centre, surface = soma_of(samples, choices.soma_rule)
        lump = {s.number for s in members}
    by_number = {s.number: s for s in order}
    children = Counter(s.parent for s in samples)  # a branch point of the file, whatever is left out
    along_axon = {}
    last = 0
    for s in order:
        if s.number in lump or s.parent == -1:
            cable.node[s.number], cable.path[s.number], cable.X[s.number] = 0, mpf(0), mpf(0)
            continue
        parent = by_number[s.parent]
        if parent.number not in cable.node:
            continue  # the axon was cut before the parent
        if parent.number in lump:
            h, r_start = stem_length(s, parent, centre, surface), s.r
        else:
            h, r_start = distance(s.at, parent.at), parent.r
            if children[parent.number] > 1 and choices.branch_start == "own radius":
                r_start = s.r
        r_end, whole = s.r, True
        if choices.axon == "cut" and (s.kind == AXON or parent.number in along_axon):
            before = along_axon.get(parent.number, mpf(0))
            along_axon[s.number] = before + h
            room = mpf(choices.axon_cut_um) - before
            if h > room:
                r_end, h, whole = r_start + (s.r - r_start) * room / h, room, False
        start = cable.node[parent.number]
        end = start
        if h > 0:
            last += 1
            end = last
            cable.pieces.append(Piece(start, end, r_start, r_end, h, s.kind))
        if whole:
            cable.node[s.number] = end
            cable.path[s.number] = cable.path[parent.number] + h
            cable.X[s.number] = cable.X[parent.number] + electrotonic_length(
                r_start, r_end, h, choices.of(s.kind)
            )
    return cable


def electrotonic_length(r1, r2, h, c):
    """Return the integral of dx/lambda over a linear taper.

    dX = sqrt(2 R_i F sqrt(1 + r'^2)/(R_m r)) dx, and the integral of dx/sqrt(r) is 2h/(sqrt r1 + sqrt r2)
    (Rall 1962 for a tapering process; here with the slant).
    """
    if h == 0:
        return mpf(0)
    r1, r2, h = mpf(r1), mpf(r2), mpf(h)
    slant = mp.sqrt(1 + ((r2 - r1) / h) ** 2)
    resistivity, R_m = mpf(c.R_i) * mpf("1e4"), mpf(c.R_m) * mpf("1e8") / mpf(c.F)  # ohm um, ohm um2
    return 2 * h / (mp.sqrt(r1) + mp.sqrt(r2)) * mp.sqrt(2 * resistivity * slant / R_m)


def bessel_K1(z):
    """Return K1(z) by its ascending series, A&S 9.6.11, and by mpmath where |z| is large.

    K1(z) = 1/z + ln(z/2) I1(z) - (z/4) sum_k [psi(k+1) + psi(k+2)] (z^2/4)^k / (k! (k+1)!).
    The terms grow to e^|z| while K1 falls to e^-|z|: that many digits are added. mpmath's own K1 is exact
    too, but takes a second for z near 50 at this precision.
    """
    if abs(z) > 120:
        return mp.besselk(1, z)
    with mp.workdps(mp.dps + 10 + int(2 * abs(z) / mp.log(10))):
        quarter, term, psi, total, k = z * z / 4, mpf(1), 1 - 2 * mp.euler, mpf(0), 0
        while abs(term) * (abs(psi) + 1) > mp.eps * (abs(total) + mp.eps) or k < 3:
            total += psi * term
            k += 1
            term *= quarter / (k * (k + 1))
            psi += mpf(1) / k + mpf(1) / (k + 1)
        return 1 / z + mp.log(z / 2) * mp.besseli(1, z) - z / 4 * total


@cache
def two_port(r1, r2, h, R_i, g):
    """Return (y11, y12, y22) of a frustum, uS: I1 = y11 V1 + y12 V2, currents into the piece.

    Cylinder: y11 = y22 = G coth(qh), y12 = -G / sinh(qh), with q = sqrt(2 R_i g / r), G = pi r^2 q / R_i
    (Rall 1959). Taper: with the radius as variable, (r^2 V')' = kappa r V, with
    kappa = 2 R_i g sqrt(1 + r'^2)/r'^2, V = r^(-1/2) [A I1(z) + B K1(z)], z = 2 sqrt(kappa r) (Rall 1962;
    A&S 9.6.28 gives the derivatives sqrt(kappa) I2(z)/r and -sqrt(kappa) K2(z)/r). The constants A, B are
    solved for V = (1, 0) and (0, 1).
    """
    with mp.workdps(DIGITS + 40):
        r1, r2, h = mpf(r1), mpf(r2), mpf(h)
        resistivity = mpf(R_i) * MOHM_UM_PER_OHM_CM
        if r1 == r2:
            q = mp.sqrt(2 * resistivity * g / r1)
            G = mp.pi * r1**2 * q / resistivity
            return G * mp.coth(q * h), -G / mp.sinh(q * h), G * mp.coth(q * h)
        slope = (r2 - r1) / h
        kappa = 2 * resistivity * g * mp.sqrt(1 + slope**2) / slope**2

        def solutions(r):
            """Return V and the axial current -pi r^2/R_i dV/dx of both solutions."""
            z = 2 * mp.sqrt(kappa * r)
            I1, I2, K1 = mp.besseli(1, z), mp.besseli(2, z), bessel_K1(z)
            K2 = (1 / z - I2 * K1) / I1  # A&S 9.6.15, the Wronskian
            V = I1 / mp.sqrt(r), K1 / mp.sqrt(r)
            dV_dr = mp.sqrt(kappa) * I2 / r, -mp.sqrt(kappa) * K2 / r
            return V, tuple(-mp.pi * r**2 / resistivity * slope * d for d in dV_dr)

        (a1, b1), (i1, k1) = solutions(r1)
        (a2, b2), (i2, k2) = solutions(r2)
        det = a1 * b2 - a2 * b1
        # V = (1, 0): A = b2/det, B = -a2/det.  V = (0, 1): A = -b1/det, B = a1/det.
        y11 = (b2 * i1 - a2 * k1) / det
        y12 = (a1 * k1 - b1 * i1) / det
        y22 = -(a1 * k2 - b1 * i2) / det
        return y11, y12, y22


def admittance_matrix(cable, hz):
    """Return the node admittance matrix of the whole cell, uS: the pieces' two-ports added up."""
    choices = cable.choices
    Y = mp.matrix(cable.node_count)
    Y[0, 0] += cable.soma_area * choices.of(SOMA).g(hz) + mpf(choices.soma_shunt_nS) * mpf("1e-3")
    for p in cable.pieces:
        c = choices.of(p.kind)
        y11, y12, y22 = two_port(p.r_start, p.r_end, p.h, c.R_i, c.g(hz))
        Y[p.start, p.start] += y11
        Y[p.end, p.end] += y22
        Y[p.start, p.end] += y12
        Y[p.end, p.start] += y12
    return Y


def impedance_matrix(cable, hz):
    """Return Z (nodes x nodes), MOhm: column j holds the potentials for a unit current injected at node j."""
    Y = admittance_matrix(cable, hz)
    n = Y.rows
    if n == 1:
        return mp.matrix([[1 / Y[0, 0]]])
    LU, pivots = mp.LU_decomp(Y)
    Z = mp.matrix(n)
    for j in range(n):
        current = mp.matrix(n, 1)
        current[j] = mpf(1)
        V = mp.U_solve(LU, mp.L_solve(LU, current, pivots))
        for i in range(n):
            Z[i, j] = V[i]
    return Z


@dataclass(frozen=True)
class Values:
    """What is read off at one sample and one frequency (complex where hz > 0)."""

    Z_in: mpc
    Z_transfer: mpc
    attenuation_to_soma: mpc
    attenuation_from_soma: mpc


def electrotonus(cable, hz=0.0):
    """Return sample number -> Values, by THEORY section 5.

    Toward the soma: V_i/V_soma for current injected at i, Z_ii/Z_soma,i.
    From the soma: V_soma/V_i for current injected at the soma, Z_soma,soma/Z_i,soma.
    """
    Z = impedance_matrix(cable, hz)
    return {
        number: Values(Z[i, i], Z[0, i], Z[i, i] / Z[0, i], Z[0, 0] / Z[i, 0])
        for number, i in cable.node.items()
    }
