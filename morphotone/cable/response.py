"""Frequency response: magnitude and phase of impedances and attenuations, and where they fall off."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from morphotone.cable import neighbours
from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import Column, Forest
from morphotone.cable.frustum import electrotonic_lengths
from morphotone.cable.ranges import RANGES
from morphotone.cable.spectrum import forest_of, places_of, slowest_ms, spectra
from morphotone.cable.sweeps import path_sums
from morphotone.cable.tree import Cable
from morphotone.errors import AssumptionError
from morphotone.units import MS_PER_S

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Complex = NDArray[np.complex128]

HIGHEST_HZ = RANGES["hz"].high
"""Up to here a membrane of R_m and C_m alone is a model of a neuron's (from memory)."""

_PER_DECADE = 20
_LOWEST = 0.1  # 2πfτ from where on √2 is looked for: a site 250 λ away is there already


@dataclass(frozen=True, eq=False)
class FrequencyResponse:
    """The frequency response of one cell at chosen sites.

    Attributes
    ----------
    cable : Cable
        The cell.
    nodes : ndarray of int64, shape (sites,)
        Nodes of the sites; node 0 is the soma.
    hz : ndarray, shape (frequencies,)
        As asked for.
    Z_in, Z_transfer : ndarray of complex128, shape (sites, frequencies)
        Input impedance, and transfer impedance to the soma (the same in both directions), MΩ.
    phase_in, phase_transfer : ndarray, shape (sites, frequencies)
        Their phases, rad, continuous from 0 at 0 Hz: negative where the voltage lags.
    log_attenuation_to_soma, log_attenuation_from_soma : ndarray, shape (sites, frequencies)
        ln|V_site/V_soma| for current at the site, and ln|V_soma/V_site| for current at the soma.
    warnings : tuple of str
        One sentence per frequency beyond the model's range.
    """

    cable: Cable
    nodes: Index
    hz: Real
    Z_in: Complex
    Z_transfer: Complex
    phase_in: Real
    phase_transfer: Real
    log_attenuation_to_soma: Real
    log_attenuation_from_soma: Real
    warnings: tuple[str, ...]


def frequency_grid(lowest_hz: float, highest_hz: float, per_decade: int = 10) -> Real:
    """Return frequencies even in their logarithm, both ends included, Hz.

    Raises
    ------
    AssumptionError
        When the ends are not positive or in the wrong order, or ``per_decade`` is below 1.
    """
    if not (0.0 < lowest_hz < highest_hz < np.inf and per_decade >= 1):
        raise AssumptionError(
            f"frequencies from {lowest_hz!r} to {highest_hz!r} Hz, {per_decade!r} per decade, expected "
            "0 < lowest < highest and at least one per decade"
        )
    steps = int(np.ceil(per_decade * np.log10(highest_hz / lowest_hz)))
    return np.geomspace(lowest_hz, highest_hz, steps + 1)


def frequency_response(
    cells: Sequence[Cable],
    assumptions: Assumptions,
    hz: Sequence[float] | Real,
    nodes: Sequence[Index] | None = None,
) -> list[FrequencyResponse]:
    """Return the frequency response of many cells, each exactly as if it were alone.

    Parameters
    ----------
    cells : sequence of Cable
        As `morphotone.cable.tree.build` makes them under these assumptions.
    assumptions : Assumptions
        Passive constants and shunt; their own frequencies are not used.
    hz : sequence of float, shape (frequencies,)
        Positive and ascending, Hz (see `frequency_grid`).
    nodes : sequence of ndarray of int64, optional
        Per cell the nodes of the sites; all nodes unless given.

    Raises
    ------
    AssumptionError
        When there are no frequencies, or they are not positive and ascending.

    Notes
    -----
    One complex column per frequency.  Phases are unwrapped along the frequencies, after the phase of the
    wave itself, the imaginary part of the electrotonic distance ∫ sqrt(2·R_i·g(s)/r) dx, has been taken out:
    what is left varies by less than a turn however coarse the grid.
    """
    frequencies = _checked(hz)
    if not cells:
        return []
    forest = forest_of(cells, assumptions)
    places = places_of(forest, nodes)
    if nodes is None:
        nodes = [np.arange(len(at)) for at in places]
    s = (2j * np.pi * frequencies).tolist()
    names = ("Z_in", "Z_transfer", "log_attenuation_to_soma", "log_attenuation_from_soma")
    warnings = tuple(filter(None, (RANGES["hz"].warning("hz", f) for f in frequencies.tolist())))
    wave = _wave_phase(forest, s)
    out = []
    for cable, chosen, at, (Z_in, Z_transfer, log_to, log_from) in zip(
        cells, nodes, places, spectra(forest, s, places, names), strict=True
    ):
        phase = _unwrapped(np.angle(Z_transfer), wave[at])
        response = (frequencies, Z_in, Z_transfer, np.angle(Z_in), phase, log_to.real, log_from.real)
        out.append(FrequencyResponse(cable, chosen, *response, warnings))
    return out


def half_power_hz(
    cells: Sequence[Cable], assumptions: Assumptions, nodes: Sequence[Index] | None = None
) -> list[Real]:
    """Return where the attenuation toward the soma has grown by √2 over its value at 0 Hz, Hz.

    Parameters
    ----------
    cells, assumptions, nodes
        As for `frequency_response`.

    Returns
    -------
    list of ndarray, shape (sites,)
        Per cell; infinite where it has not grown as much at 10 kHz, beyond which the model is not trusted
        (at and near the soma); NaN where it has long before (more than 250 λ away).

    Notes
    -----
    All sites share one logarithmic grid of 20 frequencies per decade, solved once; between its points the
    logarithm of the attenuation is a polynomial through eight neighbours, which places the frequency to
    better than 1e-7 (tests/cable/test_response.py).
    """
    if not cells:
        return []
    forest = forest_of(cells, assumptions)
    places = places_of(forest, nodes)
    lowest = MS_PER_S * _LOWEST / (2.0 * np.pi * slowest_ms(assumptions))
    inside = int(np.ceil(_PER_DECADE * np.log10(HIGHEST_HZ / lowest)))
    grid = HIGHEST_HZ * 10.0 ** (np.arange(-inside - neighbours.LEFT, neighbours.RIGHT + 1) / _PER_DECADE)
    names = ("log_attenuation_to_soma",)
    at_rest = spectra(forest, [0.0], places, names)
    moving = spectra(forest, (2j * np.pi * grid).tolist(), places, names)
    return [_half_power(grid, log.real - rest) for (rest,), (log,) in zip(at_rest, moving, strict=True)]


def _half_power(grid: Real, growth: Real) -> Real:
    """Return where each row's growth of the log-attenuation passes ln √2, on a grid of frequencies."""
    passed = growth[:, : len(grid) - neighbours.RIGHT] >= 0.5 * np.log(2.0)  # up to 10 kHz
    start = passed.argmax(axis=1) - 1
    found = np.where(passed.any(axis=1), np.nan, np.inf)
    inside = start >= neighbours.LEFT
    near = neighbours.polynomials(growth[inside], start[inside])
    x = neighbours.crossings(near, np.full(inside.sum(), 0.5 * np.log(2.0)))
    found[inside] = grid[start[inside]] * 10.0 ** (x / _PER_DECADE)
    return found


def _checked(hz: Sequence[float] | Real) -> Real:
    """Return frequencies as an array, or refuse them."""
    frequencies = np.asarray(hz, np.float64)
    if not frequencies.size:
        raise AssumptionError("no frequencies, expected at least one positive number of Hz")
    for f in frequencies[~(np.isfinite(frequencies) & (frequencies > 0.0))].tolist():
        raise AssumptionError(f"frequency {f!r} Hz, expected positive numbers of Hz")
    if not (np.diff(frequencies) > 0.0).all():
        raise AssumptionError(f"frequencies {frequencies.tolist()!r} Hz, expected them in ascending order")
    return frequencies


def _wave_phase(forest: Forest, s: Sequence[complex]) -> Real:
    """Return the imaginary part of the electrotonic distance from the soma, rad, by place and frequency."""
    columns = [Column(0, each) for each in s]
    R_i, g = forest.constants(columns)
    distance = electrotonic_lengths(*forest.geometry(columns), R_i, g)
    phase: Real = path_sums(forest.plan, distance.imag)
    return phase


def _unwrapped(angle: Real, wave: Real) -> Real:
    """Return phases continuous along the frequencies from 0 at 0 Hz, given the wave's own."""
    left = angle + wave
    left = left - 2.0 * np.pi * np.round(left / (2.0 * np.pi))
    from_rest = np.unwrap(np.concatenate((np.zeros((len(left), 1)), left), axis=1), axis=1)[:, 1:]
    return from_rest - wave
