"""A cell's own time constants and the size of each in its response, exactly and without a mesh.

Symbols
-------
=========  ====================  =============================================================
symbol     variable              meaning
=========  ====================  =============================================================
τ_k        ``tau_ms``            time constants, τ0 > τ1 > …; the poles of Z(s) are s = −1/τ_k
A_k        ``amplitude_soma``    residue of the soma's Z(s) at its pole
q, w       ``rate``, ``w``       rate q = −s = (1 + w)/τ_slow, 1/s
τ_slow     ``slowest_ms``        greatest R_m·C_m in the cell, which no τ exceeds
=========  ====================  =============================================================

`counting` tells how many poles lie on either side of a point, `bracketing` where to look next; here many
cells are led through both at once, and amplitudes are read off as residues (Cauchy's integral on a small
circle around each pole, by the trapezoidal rule, which converges geometrically: Trefethen & Weideman 2014,
SIAM Rev 56:385–458, attribution from memory).
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.bracketing import Pole, Search
from morphotone.cable.counting import line_up
from morphotone.cable.forest import Column, membrane_of
from morphotone.cable.frustum import electrotonic_lengths
from morphotone.cable.peeling import Peeled, peel
from morphotone.cable.tree import Cable
from morphotone.errors import AssumptionError
from morphotone.reading.soma import SOMA
from morphotone.units import MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

MOST = 20
"""The most time constants that are looked for."""

_POINTS_PER_PLACE = 4  # in one sweep, and there is one place to look at per pole wanted and one behind them
_COLUMNS = 16  # of one sweep: more of them leave the processor's caches
# τs that agree to this are one: the products of decimal numbers round.
_ALIKE = 4 * np.finfo(np.float64).eps
# Points of a circle around a pole, its upper half: the error is (radius/distance to the next pole)^8, while
# on a smaller circle, where Z is larger, more digits of its rounding would show.
_ANGLES: NDArray[np.complex128] = np.exp(1j * np.pi * np.array([0.125, 0.375, 0.625, 0.875]))
_RADIUS = 1.0 / 64.0
_LEAST_RADIUS = 1e-9  # of the rate: ten times the width of the brackets


@dataclass(frozen=True, eq=False)
class Modes:
    """The slowest modes of one cell; k as many as asked for, or as there are.

    Attributes
    ----------
    tau_ms : ndarray, shape (k,)
        Distinct time constants, descending, ms.
    multiplicity : ndarray of int64, shape (k,)
        How many independent modes share each: six equal trees share their first odd one fivefold.
    amplitude_soma : ndarray, shape (k,)
        A_k, MΩ/ms, which is mV per pC: after a charge Q at the soma, V = Q·Σ A_k exp(−t/τ_k) there.
        Summed over the modes that share τ_k; 0 but for rounding when they leave the soma at rest.
        Σ A_k·τ_k over all modes is R_in.
    separation_per_ms : ndarray, shape (k,)
        Distance of each 1/τ_k to the next other one, at the least, 1/ms. Amplitudes of modes closer than
        some 1e-6 of their rate are shared out between them with few digits; their sum is exact.
    peeled : Peeled
        Electrotonic length by peeling from τ0 and τ1 beside the mean X of the tips, and what speaks
        against it.
    """

    tau_ms: Real
    multiplicity: Index
    amplitude_soma: Real
    separation_per_ms: Real
    peeled: Peeled


@dataclass(frozen=True, eq=False)
class NodeAmplitudes:
    """How large each mode is at every node of a cable, MΩ/ms, shape (nodes, k).

    Attributes
    ----------
    transfer : ndarray
        Response at the node to a charge at the soma, or at the soma to a charge at the node; signed.
    local : ndarray
        Response at the node to a charge at the node itself; never negative.
    """

    transfer: Real
    local: Real


def time_constants(cells: Sequence[Cable], assumptions: Assumptions, count: int = 3) -> list[Modes]:
    """Return the slowest modes of many cells, each exactly as if it were alone.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` returns them under these assumptions.
    assumptions : Assumptions
        Membrane and shunt are used.
    count : int
        How many distinct time constants, 1 to 20.

    Raises
    ------
    AssumptionError
        When ``count`` is out of its range.

    Notes
    -----
    Each τ is bracketed by counts to 1e-10 and interpolated within the bracket, 1e-13 or better. Where
    R_m·C_m is the same all over and nothing shunts the soma, τ0 is that product as it is written, and no
    search is made for it: at equal potential everywhere nothing flows along the cable (Rall 1969, Biophys
    J 9:1483–1508).
    """
    if isinstance(count, bool) or not isinstance(count, (int, np.integer)) or not 1 <= count <= MOST:
        raise AssumptionError(
            f"{count!r} time constants were asked for, expected a whole number from 1 to {MOST}; give one"
        )
    if not cells:
        return []
    membranes = [_membrane_taus(cable, assumptions) for cable in cells]
    slowest = np.array([taus.max() for taus in membranes])
    known = [
        int(_alike(taus) and assumptions.soma_shunt_nS == 0.0 and _has_membrane(cable))
        for cable, taus in zip(cells, membranes, strict=True)
    ]
    searches = [
        Search(count, at_zero, _enough(cable, assumptions, tau, count))
        for cable, at_zero, tau in zip(cells, known, slowest.tolist(), strict=True)
    ]
    poles = _poles(cells, assumptions, slowest, searches)
    amplitudes = _amplitudes_at_soma(cells, assumptions, slowest, poles)
    return [
        _modes_of(*each, assumptions) for each in zip(cells, slowest.tolist(), poles, amplitudes, strict=True)
    ]


def amplitudes_by_node(cable: Cable, assumptions: Assumptions, modes: Modes) -> NodeAmplitudes:
    """Return the amplitudes of one cell's modes at all of its nodes.

    Parameters
    ----------
    cable : Cable
        The cell.
    assumptions : Assumptions
        Those that the modes were computed under.
    modes : Modes
        As `time_constants` returns them.
    """
    rate = MS_PER_S / modes.tau_ms
    circles = _circles(rate, MS_PER_S * modes.separation_per_ms)
    lineup = line_up([cable], assumptions, [float(np.abs(circles).max(initial=0.0))])
    solved = lineup.forest.solved([Column(0, complex(s)) for s in circles.ravel()])
    transfer, local = (
        _residues(values[lineup.forest.nodes[0][lineup.ends[0]]].reshape(-1, *circles.shape), circles, rate)
        for values in (solved.Z_transfer, solved.Z_in)
    )
    return NodeAmplitudes(transfer, local)


def _membrane_taus(cable: Cable, assumptions: Assumptions) -> Real:
    """Return R_m·C_m of every membrane the cell has, ms; the spine factor cancels."""
    codes = np.unique(cable.kind[1:]).tolist()
    soma = [SOMA] if cable.traced.soma.area > 0.0 or not _has_membrane(cable) else []
    membranes = [assumptions.of(code) for code in (*codes, *soma)]
    return np.array([membrane.R_m_ohm_cm2 * membrane.C_m_uF_cm2 / MS_PER_S for membrane in membranes])


def _enough(cable: Cable, assumptions: Assumptions, slowest_ms: float, count: int) -> float:
    """Return below which w there are at least so many modes, for a taper about: those of one held frustum.

    The k-th mode of a cell is slower than the k-th of any part of it whose ends are held at rest (Courant &
    Hilbert 1953, vol. 1, ch. VI: attribution from memory), q·R_m·C_m = 1 + (kπ/L)² in a cylinder. This keeps
    the first points near the modes of cells that are very many λ long.
    """
    R_i, leak, capacity = membrane_of(cable.kind, assumptions)
    L = electrotonic_lengths(cable.r_start, cable.r_end, cable.length, R_i, leak)
    with np.errstate(divide="ignore"):
        held = (1.0 + (count * np.pi / L) ** 2) * leak / capacity
    return float(held.min() * slowest_ms / MS_PER_S - 1.0)


def _has_membrane(cable: Cable) -> bool:
    return len(cable.parent) > 1 or cable.traced.soma.area > 0.0


def _alike(taus: Real) -> bool:
    return bool(taus.max() - taus.min() <= _ALIKE * taus.max())


def _poles(
    cells: Sequence[Cable], assumptions: Assumptions, slowest: Real, searches: Sequence[Search]
) -> list[list[Pole]]:
    """Lead all searches to their ends, all cells that still look for something in one forest."""
    looking: list[int] = []
    fastest = np.zeros(len(cells))
    points = [search.points(_POINTS_PER_PLACE * search.places) for search in searches]
    while open_now := [i for i, w in enumerate(points) if len(w)]:
        rate = (1.0 + np.stack([points[i] for i in open_now])) * (MS_PER_S / slowest[open_now, None])
        if open_now != looking or (rate.max(axis=1) > fastest[open_now]).any():
            looking = open_now
            fastest[looking] = np.maximum(fastest[looking], rate.max(axis=1))
            lineup = line_up([cells[i] for i in looking], assumptions, fastest[looking].tolist())
        blocks = [lineup.counted(rate[:, at : at + _COLUMNS]) for at in range(0, rate.shape[1], _COLUMNS)]
        slower, log_det = (np.concatenate(parts, axis=1) for parts in zip(*blocks, strict=True))
        for row, i in enumerate(looking):
            searches[i].add(points[i], slower[row], log_det[row])
            points[i] = searches[i].points(_POINTS_PER_PLACE * searches[i].places)
    return [search.poles() for search in searches]


def _amplitudes_at_soma(
    cells: Sequence[Cable], assumptions: Assumptions, slowest: Real, poles: Sequence[Sequence[Pole]]
) -> list[Real]:
    """Return A_k of every cell, MΩ/ms."""
    unit = MS_PER_S / slowest
    rates = [
        one * (1.0 + np.array([pole.w for pole in found])) for one, found in zip(unit, poles, strict=True)
    ]
    gaps = [
        one * np.array([pole.separation for pole in found]) for one, found in zip(unit, poles, strict=True)
    ]
    circles = [_circles(rate, gap) for rate, gap in zip(rates, gaps, strict=True)]
    most = max(1, *(circle.size for circle in circles))
    # Cells with fewer modes than others ask again for what they have, which changes nothing.
    s = np.stack([np.resize(circle.ravel() if circle.size else [1j], most) for circle in circles])
    lineup = line_up(cells, assumptions, np.abs(s).max(axis=1, initial=0.0).tolist())
    blocks = [lineup.soma_impedance(s[:, at : at + _COLUMNS]) for at in range(0, most, _COLUMNS)]
    impedance = np.concatenate(blocks, axis=1)
    return [
        _residues(Z[: circle.size].reshape(circle.shape), circle, rate)
        for Z, circle, rate in zip(impedance, circles, rates, strict=True)
    ]


def _circles(rate: Real, separation: Real) -> NDArray[np.complex128]:
    """Return the upper points of a circle around each pole s = −rate, 1/s, shape (k, points)."""
    radius = np.clip(_RADIUS * separation, _LEAST_RADIUS * rate, _RADIUS * rate)
    circles: NDArray[np.complex128] = radius[:, None] * _ANGLES - rate[:, None]
    return circles


def _residues(Z: NDArray[np.complex128], circles: NDArray[np.complex128], rate: Real) -> Real:
    """Return residues, MΩ/ms, from impedances (…, k, points) on circles (k, points); Z(s*) = Z(s)*."""
    residues: Real = ((circles + rate[:, None]) * Z).real.mean(axis=-1) / MS_PER_S
    return residues


def _modes_of(
    cable: Cable, slowest: float, poles: Sequence[Pole], amplitude: Real, assumptions: Assumptions
) -> Modes:
    w = np.array([pole.w for pole in poles])
    tau = slowest / (1.0 + w)
    return Modes(
        tau,
        np.array([pole.multiplicity for pole in poles], np.int64),
        amplitude,
        np.array([pole.separation for pole in poles]) / slowest,
        peel(cable, assumptions, tau, amplitude),
    )
