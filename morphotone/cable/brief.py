"""Brief synaptic conductances: what each does, alone, at its own site and at the soma.

The conductance is part of the circuit: it draws g(t)·(E − V(t)) and so saturates, by a Volterra equation at
the site whose kernel is the exact impulse response there (`morphotone.cable.volterra`).  It is solved twice,
the second time with twice as many steps; what the two differ by stands beside every value as its error.
"""

from dataclasses import dataclass
from functools import lru_cache
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from morphotone.cable import neighbours
from morphotone.cable.assumptions import Assumptions
from morphotone.cable.circuit import check
from morphotone.cable.contour import Complex, by_rows
from morphotone.cable.spectrum import forest_of, places_of, slowest_ms, spectra
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.tree import Cable
from morphotone.cable.volterra import Panels, doublings, line_for, panels, respond
from morphotone.units import MICROSIEMENS_PER_NANOSIEMENS, MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_FIRST = 0.25  # of the shortest rise time: the first doubling's end, at the most
_EARLIEST = 0.02  # of the first doubling: nothing is looked at before
_LAST_TIME = 40.0  # of the time constants' sum, as for transients
_STEP = 0.04  # of ln t, between the times at which responses are looked at
_INVERSION = 1e-8  # error of the inversion, relative to the peak at the site
_LOCAL = 3e-7  # the same with what two grids may have in common, the last bit of the kernel at the site
_UNRESOLVED = 1e-2  # a response less certain than this, relative to its peak, is not given


class Response(NamedTuple):
    """What a response looks like, each of shape (sites,); the error of each in a second such tuple.

    ``peak_mV`` is below 0 for a hyperpolarisation.  ``time_to_peak_ms`` from the start of the conductance.
    ``half_width_ms`` between the two times at half the peak.
    """

    peak_mV: Real
    time_to_peak_ms: Real
    half_width_ms: Real


@dataclass(frozen=True, eq=False)
class Brief:
    """Responses to a brief conductance at one site at a time.

    Attributes
    ----------
    nodes : ndarray of int64, shape (sites,)
        Nodes of the sites.
    at_site, at_soma : Response
        Seen where the conductance is, and at the soma; 0 and NaN times where there is none, NaN where what
        arrives is too small beside its error.
    at_site_error, at_soma_error : Response
        For each value what halving the steps has changed.  The peaks' also have what both may have in common:
        3e-7 of the peak at the site, and at the soma 1e-8 of the geometric mean of both places' own responses
        (as in `morphotone.cable.transients`).
    """

    nodes: Index
    at_site: Response
    at_soma: Response
    at_site_error: Response
    at_soma_error: Response


class Grids(NamedTuple):
    """Panels and panels half as long, and even times in ln t at which responses on them are looked at."""

    coarse: Panels
    fine: Panels
    times: Real
    from_coarse: Real
    from_fine: Real


def brief(
    cable: Cable,
    assumptions: Assumptions,
    nodes: Index,
    g_nS: Real,
    driving_mV: Real,
    rise_ms: Real,
    decay_ms: Real,
) -> Brief:
    """Return what a brief conductance at each site does there and at the soma.

    Parameters
    ----------
    cable : Cable
        As `morphotone.cable.tree.build` makes it under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt.
    nodes : ndarray of int64, shape (sites,)
        Nodes of the sites.
    g_nS : ndarray, shape (sites,)
        Peak conductance; its course is that of a `morphotone.cable.synaptic.SynapticCurrent`.
    driving_mV : ndarray, shape (sites,)
        Driving force from rest.
    rise_ms, decay_ms : ndarray, shape (sites,)
        Time constants of the conductance, equal for an alpha function.

    Raises
    ------
    AssumptionError
        When a conductance, a driving force or a time constant is none.

    Notes
    -----
    Two to four times as long as `morphotone.cable.transients.transients` at as many sites: the kernel needs
    higher frequencies than a current does.
    """
    check(g_nS, driving_mV)
    if not len(nodes):
        nothing = Response(*np.empty((3, 0)))
        return Brief(nodes, nothing, nothing, nothing, nothing)
    grids = grids_for(rise_ms, decay_ms, slowest_ms(assumptions))
    forest = forest_of([cable], assumptions)
    s = (MS_PER_S * grids.fine.line.s).tolist()
    places = places_of(forest, [np.append(0, nodes)])
    ((Z_in, Z_out),) = spectra(forest, s, places, ("Z_in", "Z_transfer"))
    curves = solved(grids, Z_in[1:], Z_out[1:], g_nS, driving_mV, rise_ms, decay_ms)
    site, soma, finer_site, finer_soma = (read_off(grids.times, each, driving_mV) for each in curves)
    peak = np.abs(finer_site.peak_mV)
    between = (
        _INVERSION * peak * np.sqrt(np.abs(Z_in[0] / Z_in[1:]).max(axis=1))
    )  # of the two places' own responses
    at_site, at_soma = _with_error(site, finer_site, _LOCAL * peak), _with_error(soma, finer_soma, between)
    return Brief(nodes, at_site[0], at_soma[0], at_site[1], at_soma[1])


def conductance(rise_ms: Real, decay_ms: Real, times_ms: Real) -> Real:
    """Return e^{−t/decay} − e^{−t/rise}, or t·e^{−t/rise} where the two are equal, with a peak of 1.

    Parameters
    ----------
    rise_ms, decay_ms : ndarray, shape (sites,)
        Time constants.
    times_ms : ndarray, any shape
        From the start.

    Returns
    -------
    ndarray, shape (sites, *shape of the times)
    """
    shape = (-1,) + (1,) * times_ms.ndim
    per_site = decay_ms, 1.0 / rise_ms - 1.0 / decay_ms, _peak_times(rise_ms, decay_ms)
    decay, excess, top = (each.reshape(shape) for each in per_site)
    flat = excess == 0.0
    rate = np.where(flat, 1.0, excess)
    values, highest = (
        np.exp(-t / decay) * np.where(flat, t, -np.expm1(-rate * t) / rate) for t in (times_ms, top)
    )
    course: Real = values / highest
    return course


def _peak_times(rise_ms: Real, decay_ms: Real) -> Real:
    """Return when each conductance peaks, ms, or refuse time constants that are none."""
    pairs = zip(rise_ms.tolist(), decay_ms.tolist(), strict=True)
    return np.array([SynapticCurrent(rise, decay).peak_time_ms for rise, decay in pairs])


def grids_for(rise_ms: Real, decay_ms: Real, slowest: float) -> Grids:
    """Return the grids for some conductances on cells with a slowest membrane time constant (ms).

    Both ends are powers of two times 1 ms, so that many cells share them.
    """
    _peak_times(rise_ms, decay_ms)  # refuses what is none
    first = int(np.floor(np.log2(_FIRST * rise_ms.min())))
    last = int(np.ceil(np.log2(_LAST_TIME * (rise_ms.max() + decay_ms.max() + slowest))))
    return _grids(first, last)


@lru_cache(maxsize=4)
def _grids(first: int, last: int) -> Grids:
    """Return the grids between two powers of two; the coarse panels use the fine ones' hyperbola."""
    edges = [doublings(2.0**first, last - first, per_doubling) for per_doubling in (1, 2)]
    line = line_for(edges[1])
    coarse, fine = (panels(each, line) for each in edges)
    times = np.exp(np.arange(np.log(_EARLIEST * 2.0**first), np.log(fine.edges[-1]), _STEP))
    return Grids(coarse, fine, times, coarse.sampling(times), fine.sampling(times))


def solved(
    grids: Grids, Z_in: Complex, Z_out: Complex, g_nS: Real, driving_mV: Real, rise_ms: Real, decay_ms: Real
) -> list[Real]:
    """Return responses at the grids' times, each (sites, times): coarse local and elsewhere, then fine.

    Parameters as for `morphotone.cable.volterra.respond` and `brief`.
    """
    curves = []
    for grid, sampling in ((grids.coarse, grids.from_coarse), (grids.fine, grids.from_fine)):
        g = MICROSIEMENS_PER_NANOSIEMENS * g_nS[:, None, None] * conductance(rise_ms, decay_ms, grid.times)
        both = respond(grid, Z_in, Z_out, g, driving_mV)
        curves += [by_rows(each.reshape(len(each), -1), sampling) for each in both]
    return curves


def read_off(times: Real, curves: Real, sign: Real) -> Response:
    """Return peak, time to peak and half-width of curves on times even in their logarithm.

    Parameters
    ----------
    times : ndarray, shape (times,)
    curves : ndarray, shape (sites, times)
    sign : ndarray, shape (sites,)
        Of the responses: a curve whose sign is 0 has no peak.
    """
    upright = curves * np.sign(sign)[:, None]
    last = upright.shape[1] - 1 - neighbours.RIGHT
    highest = np.clip(upright.argmax(axis=1), neighbours.LEFT, last)
    near = neighbours.polynomials(upright, highest)
    with np.errstate(divide="ignore", invalid="ignore"):  # where nothing arrives there is nothing to read off
        x = neighbours.summits(near)
        peak = neighbours.values(near, x)
        rise, fall = (_crossing(times, upright, highest, 0.5 * peak, way) for way in (-1, 1))
    to_peak = times[highest] * np.exp(_STEP * x)
    some = peak > 0.0
    return Response(
        np.sign(sign) * np.where(some, peak, 0.0),
        *(np.where(some, t, np.nan) for t in (to_peak, fall - rise)),
    )


def _crossing(times: Real, curves: Real, highest: Index, level: Real, way: int) -> Real:
    """Return when each curve passes a level before (−1) or after (1) its highest point, NaN if never."""
    last = curves.shape[1] - 1
    column = np.arange(last + 1)
    low = (curves < level[:, None]) & (way * column > way * highest[:, None])
    start = low.argmax(axis=1) - 1 if way > 0 else last - low[:, ::-1].argmax(axis=1)
    inside = low.any(axis=1) & (start >= neighbours.LEFT) & (start <= last - neighbours.RIGHT)
    near = neighbours.polynomials(curves, np.where(inside, start, neighbours.LEFT))
    passed = times[start] * np.exp(_STEP * neighbours.crossings(near, level))
    return np.where(inside, passed, np.nan)


def _with_error(coarse: Response, fine: Response, slack: Real) -> tuple[Response, Response]:
    """Return the values of the finer grid with their errors, both NaN where they are not resolved."""
    error = np.abs(np.subtract(fine, coarse))
    error[0] += slack
    known = error[0] <= _UNRESOLVED * np.abs(fine.peak_mV)
    values, errors = (np.where(known, each, np.nan) for each in (fine, error))
    return Response(*values), Response(*errors)
