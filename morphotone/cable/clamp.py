"""What a voltage clamp sees of a synapse, and what escapes it.

An electrode at node e holds the cell at rest through a series resistance R_s.  Current I at site i gives,
with the impedances of the free cell,

    fraction seen        I_clamp/I = Z_ie/(Z_ee + R_s)
    what escapes         V_i/I = Z_ii − Z_ie²/(Z_ee + R_s) = Z_ii·[(1 − q) + q·R_s/(Z_ee + R_s)]

with q = Z_ie²/(Z_ii·Z_ee), the product of the attenuations' reciprocals both ways, so that nothing cancels
next to the electrode.  At R_s = 0 and 0 Hz the fraction is the reciprocal of the attenuation from the
electrode to the site (Carnevale & Johnston 1982, J Neurophysiol 47:606–621; Spruston et al. 1993, J
Neurophysiol 70:781–802, for the errors of somatic clamps; both from memory).  A conductance g with driving
force E draws g·E/(1 + g·Z') where Z' = V_i/I is what escapes.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable import neighbours
from morphotone.cable.assumptions import Assumptions
from morphotone.cable.brief import grids_for, read_off, solved
from morphotone.cable.circuit import check
from morphotone.cable.contour import Complex, by_rows
from morphotone.cable.pairs import common_nodes
from morphotone.cable.spectrum import forest_of, slowest_ms, spectra
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import GOHM_PER_MOHM, Window
from morphotone.cable.tree import Cable
from morphotone.errors import AssumptionError
from morphotone.units import MICROSIEMENS_PER_NANOSIEMENS, MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_UNSEEN = 1e-6


@dataclass(frozen=True, eq=False)
class Clamp:
    """How sites of one cell look through a voltage clamp, one column per frequency.

    Attributes
    ----------
    nodes : ndarray of int64, shape (sites,)
        Nodes of the sites.
    electrode : int
        Node of the electrode.
    series_MOhm : float
        Series resistance R_s.
    hz : ndarray, shape (frequencies,)
        As asked for.
    fraction : ndarray of complex128, shape (sites, frequencies)
        Current of the clamp over current at the site; its imaginary part is 0 at 0 Hz.
    escape_MOhm : ndarray of complex128, shape (sites, frequencies)
        Potential at the site over current at the site: what escapes the clamp.
    """

    nodes: Index
    electrode: int
    series_MOhm: float
    hz: Real
    fraction: Complex
    escape_MOhm: Complex


@dataclass(frozen=True, eq=False)
class ClampedSteady:
    """Steady conductances one at a time under a clamp, shape (sites,).

    Attributes
    ----------
    current_pA : ndarray
        What flows at the site: g·E/(1 + g·Z').
    seen_pA : ndarray
        What the clamp sees of it.
    fraction : ndarray
        That over g·E, which a perfect clamp of the site would see; NaN where there is none.
    escape_mV : ndarray
        Depolarisation of the site.
    """

    current_pA: Real
    seen_pA: Real
    fraction: Real
    escape_mV: Real


@dataclass(frozen=True, eq=False)
class ClampedBrief:
    """Brief currents one at a time under a clamp, shape (sites,).

    Attributes
    ----------
    peak_fraction : ndarray
        Peak of the clamp's current over that of the current at the site; NaN below 1e-6, where the error of
        the inversion would count.
    time_to_peak_ms : ndarray
        When the clamp's current peaks, from the start of the current at the site.
    escape_mV_per_pA : ndarray
        Greatest depolarisation of the site, for a peak current of 1 pA.
    """

    peak_fraction: Real
    time_to_peak_ms: Real
    escape_mV_per_pA: Real


@dataclass(frozen=True, eq=False)
class ClampedSynapses:
    """Brief conductances one at a time under a clamp, shape (sites,).

    Attributes
    ----------
    peak_seen_pA, peak_seen_error_pA : ndarray
        Peak of the clamp's current, below 0 for a driving force below 0, and what halving the steps changes.
    peak_fraction : ndarray
        That peak over g·E, which a perfect clamp of the site would see; NaN where there is none.
    time_to_peak_ms : ndarray
        When the clamp's current peaks, from the start of the conductance; NaN where none is seen.
    escape_mV, escape_error_mV : ndarray
        Greatest depolarisation of the site, and what halving the steps changes.
    """

    peak_seen_pA: Real
    peak_seen_error_pA: Real
    peak_fraction: Real
    time_to_peak_ms: Real
    escape_mV: Real
    escape_error_mV: Real


def clamp(
    cable: Cable,
    assumptions: Assumptions,
    nodes: Index,
    hz: Sequence[float] | Real,
    series_MOhm: float = 0.0,
    electrode: int = 0,
) -> Clamp:
    """Return what an electrode sees of steady and of sinusoidal currents at sites.

    Parameters
    ----------
    cable : Cable
        As `morphotone.cable.tree.build` makes it under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; their own frequencies are not used.
    nodes : ndarray of int64, shape (sites,)
        Nodes of the sites.
    hz : sequence of float, shape (frequencies,)
        0 or more.
    series_MOhm : float, optional
        Series resistance; 0 for a perfect clamp of the electrode's node.
    electrode : int, optional
        Node of the electrode, the soma unless given.

    Raises
    ------
    AssumptionError
        When the series resistance or a frequency is negative or no number.
    """
    frequencies = np.asarray(hz, np.float64)
    for f in frequencies[~((frequencies >= 0.0) & np.isfinite(frequencies))].tolist():
        raise AssumptionError(f"frequency {f!r} Hz, expected numbers of 0 Hz or more")
    s = (2j * np.pi * frequencies).tolist()
    fraction, escape = _seen(cable, assumptions, nodes, s, series_MOhm, electrode)
    return Clamp(nodes, electrode, series_MOhm, frequencies, fraction, escape)


def clamped_steady(steady: Clamp, g_nS: Real, driving_mV: Real) -> ClampedSteady:
    """Return what the clamp sees of steady conductances.

    Parameters
    ----------
    steady : Clamp
        With 0 Hz as its first frequency.
    g_nS, driving_mV : ndarray, shape (sites,)
        Conductances and driving forces from rest.

    Raises
    ------
    AssumptionError
        When a conductance is negative or no number, or a driving force is no number.
    """
    check(g_nS, driving_mV)
    escape, fraction = steady.escape_MOhm[:, 0].real, steady.fraction[:, 0].real
    ideal = g_nS * driving_mV
    kept = 1.0 / (1.0 + MICROSIEMENS_PER_NANOSIEMENS * g_nS * escape)
    current = ideal * kept
    return ClampedSteady(
        current,
        fraction * current,
        np.where(ideal != 0.0, fraction * kept, np.nan),
        GOHM_PER_MOHM * escape * current,
    )


def clamped_brief(
    cable: Cable,
    assumptions: Assumptions,
    nodes: Index,
    current: SynapticCurrent,
    series_MOhm: float = 0.0,
    electrode: int = 0,
) -> ClampedBrief:
    """Return what the clamp sees of a brief current at each site; parameters as for `clamp`.

    The response is looked at on the times of `morphotone.cable.transients.Window`, with its precision.
    """
    window = Window.of(current, slowest_ms(assumptions))
    s = (MS_PER_S * window.line.s).tolist()
    fraction, escape = _seen(cable, assumptions, nodes, s, series_MOhm, electrode)
    seen, when = _summit(window, fraction)
    escaped, _ = _summit(window, escape)
    fraction_seen, per_pA = current.charge_fC * seen, current.charge_fC * GOHM_PER_MOHM
    known = fraction_seen >= _UNSEEN
    return ClampedBrief(
        np.where(known, fraction_seen, np.nan), np.where(known, when, np.nan), per_pA * escaped
    )


def clamped_synapses(
    cable: Cable,
    assumptions: Assumptions,
    nodes: Index,
    synapses: tuple[Real, Real, Real, Real],
    series_MOhm: float = 0.0,
    electrode: int = 0,
) -> ClampedSynapses:
    """Return what the clamp sees of a brief conductance at each site, whose driving force escapes too.

    Parameters
    ----------
    synapses : tuple of four ndarrays, shape (sites,)
        Peak conductances (nS), driving forces from rest (mV), rise and decay times (ms), as for
        `morphotone.cable.brief.brief`.
    cable, assumptions, nodes, series_MOhm, electrode
        As for `clamp`.

    Raises
    ------
    AssumptionError
        When a conductance, a driving force, a time constant or the series resistance is none.

    Notes
    -----
    The Volterra equation of `brief` with the clamped cell's impulse responses; all sites at once.
    """
    g_nS, driving_mV, rise_ms, decay_ms = synapses
    check(g_nS, driving_mV)
    if not len(nodes):
        return ClampedSynapses(*np.empty((6, 0)))
    grids = grids_for(rise_ms, decay_ms, slowest_ms(assumptions))
    s = (MS_PER_S * grids.fine.line.s).tolist()
    fraction, escape = _seen(cable, assumptions, nodes, s, series_MOhm, electrode)
    curves = solved(grids, escape, fraction / GOHM_PER_MOHM, g_nS, driving_mV, rise_ms, decay_ms)
    site, seen, finer_site, finer_seen = (read_off(grids.times, each, driving_mV) for each in curves)
    ideal = g_nS * driving_mV
    return ClampedSynapses(
        finer_seen.peak_mV,
        np.abs(finer_seen.peak_mV - seen.peak_mV),
        np.divide(finer_seen.peak_mV, ideal, out=np.full(len(ideal), np.nan), where=ideal != 0.0),
        finer_seen.time_to_peak_ms,
        finer_site.peak_mV,
        np.abs(finer_site.peak_mV - site.peak_mV),
    )


def _summit(window: Window, transfer: Complex) -> tuple[Real, Real]:
    """Return peak, for a current of charge 1, and its time."""
    curves = by_rows(transfer, window.kernel)
    highest = np.clip(curves.argmax(axis=1), neighbours.LEFT, curves.shape[1] - 1 - neighbours.RIGHT)
    near = neighbours.polynomials(curves, highest)
    with np.errstate(invalid="ignore"):  # where nothing escapes there is no summit
        x = np.where(curves.any(axis=1), neighbours.summits(near), 0.0)
    step = np.log(window.times[1] / window.times[0])
    return neighbours.values(near, x), window.times[highest] * np.exp(step * x)


def _seen(
    cable: Cable,
    assumptions: Assumptions,
    nodes: Index,
    s: Sequence[complex],
    series_MOhm: float,
    electrode: int,
) -> tuple[Complex, Complex]:
    """Return fraction and escape (MΩ), shape (sites, columns), at complex frequencies in 1/s."""
    if not (series_MOhm >= 0.0 and np.isfinite(series_MOhm)):
        raise AssumptionError(f"series resistance {series_MOhm!r} MOhm, expected a number of 0 MOhm or more")
    forest = forest_of([cable], assumptions)
    common = common_nodes(cable.parent, nodes, np.array([electrode]))[:, 0]
    asked = np.concatenate((nodes, common, [electrode]))
    names = ("Z_in", "log_attenuation_to_soma", "log_attenuation_from_soma")
    ((Z, log_to, log_from),) = spectra(forest, s, [forest.nodes[0][asked]], names)
    site, meet = slice(0, len(nodes)), slice(len(nodes), 2 * len(nodes))
    there = (log_to[site] - log_to[meet]) + (log_from[-1] - log_from[meet])  # ln V_i/V_e, current at i
    back = (log_to[-1] - log_to[meet]) + (log_from[site] - log_from[meet])
    share = series_MOhm / (Z[-1] + series_MOhm)
    both = there + back
    fraction, escape = np.exp(-back) * (1.0 - share), Z[site] * (-np.expm1(-both) + np.exp(-both) * share)
    near = np.isfinite(both)  # else nothing passes between the two (see `spectra`)
    return np.where(near, fraction, 0.0).astype(complex), np.where(near, escape, Z[site]).astype(complex)
