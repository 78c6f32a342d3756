"""Responses to a brief synaptic current at every site: peak, times and widths, without time steps.

V(t) is the inverse Laplace transform of an exact transfer function times that of the current, along one
fixed hyperbola (`morphotone.cable.contour`): some hundred complex frequencies are solved, each at all samples
by the two sweeps, and the response at any time after 0.02 of the rise time is a weighted
sum over them.  Where it peaks and crosses a level is read off a grid of times that all sites share, with a
polynomial between them (`morphotone.cable.neighbours`).

How large the error can be is known.  A passive cell's impedance is a sum of modes, Z_ij(s) =
Σ ψ_k(i)·ψ_k(j)/(s + a_k) with a_k > 0 (THEORY section 6), so its response is a mixture of the responses of
single poles, and so is the error.  With ρ the greatest error of a single pole's response at any time,
relative to that response when the current peaks (t*), over all poles,

    |ΔV_ii(t)| ≤ ρ·V_ii(t*),    |ΔV_ij(t)| ≤ ρ·sqrt(V_ii(t*)·V_jj(t*))

(the weights ψ² are positive; Cauchy–Schwarz for the transfer).  ρ does not depend on the cell: it is
measured for each current against a finer hyperbola.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields, replace
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable import neighbours
from morphotone.cable.assumptions import Assumptions
from morphotone.cable.contour import Complex, Contour, by_rows, contour
from morphotone.cable.spectrum import forest_of, places_of, slowest_ms, spectra
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.tree import Cable
from morphotone.errors import AssumptionError
from morphotone.units import MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

GOHM_PER_MOHM = 1e-3  # MΩ·pA is 1e-3 mV

FIRST_TIME = 0.02
"""Of the rise time: from there on the precision holds."""

# The response is followed until this many times the sum of the time constants of the current and of the
# slowest membrane: half a peak lies there even for a site 50 λ away.
_LAST_TIME = 40.0
_PRECISION = 1e-10
_REFERENCE = 1e-13  # precision of the hyperbola that ρ is measured against
_STEP = 0.04  # of ln t, between the times at which responses are looked at
_ROWS = 1000  # evaluated at a time, so that they stay in the processor's cache
_UNRESOLVED = 1e-3  # a response less certain than this, relative to its peak, is not given


@dataclass(frozen=True, eq=False)
class Responses:
    """What a transient looks like, one value per site; NaN where it is too small beside its error.

    Attributes
    ----------
    peak_mV_per_pA : ndarray, shape (sites,)
        Peak, for a current with a peak of 1 pA (numerically GΩ).
    peak_mV_per_pC : ndarray, shape (sites,)
        Peak, for a current of 1 pC in all.
    time_to_peak_ms : ndarray, shape (sites,)
        From the start of the current.
    rise_ms : ndarray, shape (sites,)
        From 10 to 90 % of the peak.
    half_width_ms : ndarray, shape (sites,)
        Between the two times at half the peak.
    area_mV_ms_per_pA : ndarray, shape (sites,)
        Integral over all times, for a peak current of 1 pA: impedance at 0 Hz times charge, exactly.
    error : ndarray, shape (sites,)
        Bound of the error of V at any time in the window, relative to the peak.
    error_ms : ndarray, shape (sites,)
        Greatest error of the three times that follows from it; the polynomials between times add at most
        1e-7 of the time to peak, and 2e-8 of the other values.
    """

    peak_mV_per_pA: Real
    peak_mV_per_pC: Real
    time_to_peak_ms: Real
    rise_ms: Real
    half_width_ms: Real
    area_mV_ms_per_pA: Real
    error: Real
    error_ms: Real

    def rows(self, which: Index) -> "Responses":
        """Return chosen rows, NaN for −1."""
        columns = (getattr(self, field.name) for field in fields(self))
        return Responses(
            *(np.where(which < 0, np.nan, np.append(column, np.nan)[which]) for column in columns)
        )


@dataclass(frozen=True, eq=False)
class Transients:
    """Responses of one cell to the same current at each of several sites.

    Attributes
    ----------
    cable : Cable
        The cell.
    current : SynapticCurrent
        What is injected.
    nodes : ndarray of int64, shape (sites,)
        Nodes of the cable at which it is injected.
    at_site, at_soma : Responses
        Seen where it is injected, and at the soma (node 0).
    """

    cable: Cable
    current: SynapticCurrent
    nodes: Index
    at_site: Responses
    at_soma: Responses

    def by_sample(self) -> "Transients":
        """Return the same with one row per sample of the file, NaN at samples that are no site."""
        row = np.full(len(self.cable.parent) + 1, -1)  # the last for samples without a node, −1
        row[self.nodes] = np.arange(len(self.nodes))
        node = self.cable.node
        return replace(
            self, nodes=node, at_site=self.at_site.rows(row[node]), at_soma=self.at_soma.rows(row[node])
        )


@dataclass(frozen=True, eq=False)
class Potentials:
    """Time courses for a current with a peak of 1 pA, mV.

    Attributes
    ----------
    times_ms : ndarray, shape (times,)
        From the start of the current.
    at_site, at_soma : ndarray, shape (sites, times)
        Seen where the current is injected, and at the soma.
    """

    times_ms: Real
    at_site: Real
    at_soma: Real


def transients(
    cells: Sequence[Cable],
    assumptions: Assumptions,
    current: SynapticCurrent,
    nodes: Sequence[Index] | None = None,
) -> list[Transients]:
    """Return the responses of many cells, each exactly as if it were alone.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` makes them under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; frequencies are not used.
    current : SynapticCurrent
        Injected at one site at a time.
    nodes : sequence of ndarray of int64, optional
        Per cell the nodes of the sites; all nodes unless given.

    Notes
    -----
    About as long as 90 to 140 sweeps of one case for all sites of a cell of 6,500 samples, 50 to 100 for
    a few; some 3 kB of memory per site of all cells together.
    """
    if not cells:
        return []
    window = Window.of(current, slowest_ms(assumptions))
    solved = _solved(cells, assumptions, window.line, nodes)
    return [_transients(cable, window, along) for cable, along in zip(cells, solved, strict=True)]


def potentials(
    cable: Cable,
    assumptions: Assumptions,
    current: SynapticCurrent,
    times_ms: Sequence[float] | Real,
    nodes: Index | None = None,
) -> Potentials:
    """Return the time courses of one cell at chosen times.

    Parameters
    ----------
    cable : Cable
        The cell.
    assumptions : Assumptions
        Passive constants and shunt.
    current : SynapticCurrent
        Injected at one site at a time.
    times_ms : sequence of float, shape (times,)
        Positive, ms.
    nodes : ndarray of int64, optional
        Nodes of the sites; all unless given.

    Raises
    ------
    AssumptionError
        When there is no time, or one is zero, negative or no number.
    """
    times = np.asarray(times_ms, np.float64)
    if not times.size:
        raise AssumptionError("no times, expected at least one time after the current's start, ms")
    for time in times[~(np.isfinite(times) & (times > 0.0))].tolist():
        raise AssumptionError(f"time {time!r} ms, expected times after the current's start, above 0 ms")
    line = contour(float(times.min()), float(times.max()), _PRECISION)
    (along,) = _solved([cable], assumptions, line, None if nodes is None else [nodes])
    kernel = line.kernel(times, current.transform(line.s)) * (current.charge_fC * GOHM_PER_MOHM)
    return Potentials(times, _evaluated(along.Z_in[1:], kernel), _evaluated(along.Z_transfer[1:], kernel))


@dataclass(frozen=True, eq=False)
class Window:
    """All that the responses to one current share, whatever the cell.

    ``times`` are even in ln t; ``kernel`` turns impedances (MΩ) into responses to 1 fC (µV) at them,
    ``at_peak`` at the current's own peak; ``rho`` and ``rho_slope`` bound the error of V and of dV/d ln t.
    """

    current: SynapticCurrent
    line: Contour
    times: Real
    kernel: Real
    at_peak: Real
    rho: float
    rho_slope: float

    @staticmethod
    @lru_cache(maxsize=16)
    def of(current: SynapticCurrent, slowest: float) -> "Window":
        """Return the window for a current and the slowest membrane time constant (ms)."""
        first = FIRST_TIME * current.rise_ms
        last = _LAST_TIME * (current.rise_ms + current.decay_ms + slowest)
        line = contour(first, last, _PRECISION)
        times = first * np.exp(_STEP * np.arange(int(np.log(last / first) / _STEP) + 1))
        poles = _poles(current, first, slowest)
        tried, finest = (
            _single_poles(each, current, times[::4], poles)
            for each in (line, contour(first, last, _REFERENCE))
        )
        transform = current.transform(line.s)
        return Window(
            current,
            line,
            times,
            line.kernel(times, transform),
            line.kernel(np.array([current.peak_time_ms]), transform),
            *(
                float(np.abs((one - other) / finest[2]).max())
                for one, other in zip(tried, finest[:2], strict=False)
            ),
        )


def _poles(current: SynapticCurrent, first: float, slowest: float) -> Real:
    """Return rates (1/ms) that stand for all poles a cell may have.

    From its slowest time constant to where a pole no longer follows the fastest time; errors are largest
    where a pole falls on one of the current's own.
    """
    return np.append(
        np.geomspace(1.0 / slowest, 1e3 / first, 80), [1.0 / current.rise_ms, 1.0 / current.decay_ms]
    )


def _single_poles(
    line: Contour, current: SynapticCurrent, times: Real, poles: Real
) -> tuple[Real, Real, Real]:
    """Return the response of each pole to unit charge, its dV/d ln t, and V when the current peaks."""
    modes = 1.0 / (line.s + poles[:, None])
    transform = current.transform(line.s)
    peak = line.kernel(np.array([current.peak_time_ms]), transform)
    slope = _evaluated(modes, line.kernel(times, transform * line.s)) * times
    return _evaluated(modes, line.kernel(times, transform)), slope, _evaluated(modes, peak)


def _evaluated(Z: Complex, kernel: Real) -> Real:
    """Return the product of complex rows, as pairs, with a kernel."""
    return by_rows(Z, kernel, at_once=4)


class _Along(NamedTuple):
    """One cell's impedances, MΩ: a row for the soma, then one per site.

    ``nodes`` without the soma's row; ``R_in``, ``R_transfer`` at 0 Hz; the other two along a contour.
    """

    nodes: Index
    R_in: Real
    R_transfer: Real
    Z_in: Complex
    Z_transfer: Complex


def _solved(
    cells: Sequence[Cable], assumptions: Assumptions, line: Contour, nodes: Sequence[Index] | None
) -> Iterator[_Along]:
    """Yield each cell's impedances along a contour, at the nodes asked for."""
    forest = forest_of(cells, assumptions)
    if nodes is None:
        nodes = [np.arange(len(cable.parent)) for cable in cells]
    places = places_of(forest, [np.append(0, chosen) for chosen in nodes])
    at_rest = spectra(forest, [0.0], places, ("Z_in", "Z_transfer"))
    moving = spectra(forest, (MS_PER_S * line.s).tolist(), places, ("Z_in", "Z_transfer"))
    for chosen, (R_in, R_transfer), impedances in zip(nodes, at_rest, moving, strict=True):
        yield _Along(chosen, R_in[:, 0], R_transfer[:, 0], *impedances)


def _transients(cable: Cable, window: Window, along: _Along) -> Transients:
    """Read off one cell's responses."""
    at_peak = _evaluated(along.Z_in, window.at_peak)[:, 0]
    local, between = at_peak[1:], np.sqrt(at_peak[1:] * at_peak[0])
    return Transients(
        cable,
        window.current,
        along.nodes,
        _responses(window, along.Z_in[1:], along.R_in[1:], local),
        _responses(window, along.Z_transfer[1:], along.R_transfer[1:], between),
    )


def _responses(window: Window, Z: Complex, R: Real, scale: Real) -> Responses:
    """Read off responses block by block; ``scale`` is what ρ is multiplied with."""
    starts = range(0, max(len(Z), 1), _ROWS)
    with np.errstate(divide="ignore", invalid="ignore"):  # where nothing arrives there is nothing to read off
        shapes = np.concatenate(
            [_shapes(window, Z[at : at + _ROWS], scale[at : at + _ROWS]) for at in starts], axis=1
        )
    peak, to_peak, rise, width, _, error_ms = np.where(shapes[4] <= _UNRESOLVED, shapes, np.nan)
    per_pA = window.current.charge_fC * GOHM_PER_MOHM
    return Responses(per_pA * peak, peak, to_peak, rise, width, per_pA * R, shapes[4], error_ms)


def _shapes(window: Window, Z: Complex, scale: Real) -> Real:
    """Return peak (per unit charge), time to peak, rise, half-width, error and error_ms, one row each."""
    curves = _evaluated(Z, window.kernel)
    highest = np.clip(curves.argmax(axis=1), neighbours.LEFT, curves.shape[1] - 1 - neighbours.RIGHT)
    near = neighbours.polynomials(curves, highest)
    x = neighbours.summits(near)
    peak = neighbours.values(near, x)
    bend = neighbours.values(neighbours.slopes(neighbours.slopes(near)), x) / _STEP**2
    to_peak = window.times[highest] * np.exp(_STEP * x)
    rising = [_crossing(window, curves, highest, share * peak, -1) for share in (0.1, 0.5, 0.9)]
    falling = _crossing(window, curves, highest, 0.5 * peak, 1)
    bound = window.rho * scale
    slack = [2.0 * bound * time / slope for time, slope in (*rising, falling)]
    slack_of_peak = to_peak * window.rho_slope * scale / np.abs(bend)
    error_ms = np.max([slack_of_peak, slack[0] + slack[2], slack[1] + slack[3]], axis=0)
    rise, width = rising[2][0] - rising[0][0], falling[0] - rising[1][0]
    error = np.where(peak > 0.0, bound / peak, np.inf)
    return np.stack((peak, to_peak, rise, width, error, error_ms))


def _crossing(window: Window, curves: Real, highest: Index, level: Real, way: int) -> tuple[Real, Real]:
    """Return when each curve passes a level on one side of its highest point, ms, and there |dV/d ln t|.

    ``way`` is −1 before, 1 after the highest point.  The two grid points on either side of the crossing are
    found by halving, which needs no more than that the curve is below the level at the window's end.
    """
    rows, last = np.arange(len(curves)), curves.shape[1] - 1
    above, below = highest, np.full(len(curves), 0 if way < 0 else last)
    for _ in range(int(last).bit_length()):
        middle = (above + below) // 2
        is_above = curves[rows, middle] >= level
        above, below = np.where(is_above, middle, above), np.where(is_above, below, middle)
    start = np.clip(np.minimum(above, below), neighbours.LEFT, last - neighbours.RIGHT)
    near = neighbours.polynomials(curves, start)
    x = neighbours.crossings(near, level)
    slope = np.abs(neighbours.values(neighbours.slopes(near), x)) / _STEP
    return window.times[start] * np.exp(_STEP * x), slope
