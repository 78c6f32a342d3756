"""Short frusta of slight taper: against the two-port at 50 digits up to the corners of every class."""

import numpy as np
import pytest
from mpmath import mp

from morphotone.cable import short
from morphotone.cable.frustum import Pi, pi_of_frusta
from morphotone.units import MICROSIEMENS_PER_S_CM2_UM2
from tests.definitions import two_port

R_I, LEAK, MEAN = 150.0, 1.0 / 20_000.0, 0.7
WITHIN = 1 - 1e-9  # of a bound
EDGES = (WITHIN, 2 - WITHIN)


def sides(size: float, taper: float) -> tuple[float, float, float]:
    """Return r_start, r_end and length (µm) with a |Q| at LEAK and an ε, slant left aside."""
    length = np.sqrt(size * MEAN * 1e4 / (2 * R_I * LEAK))
    return MEAN * (1 - taper), MEAN * (1 + taper), float(length)


def engine(frustum: tuple[float, float, float], g: complex) -> Pi:
    return Pi(*(part[0, 0] for part in pi_of_frusta(*(np.array([[v]]) for v in (*frustum, R_I, g)))))


@pytest.mark.parametrize("phase", [1.0, -1.0, 1j, 0.6 + 0.8j], ids=str)
@pytest.mark.parametrize("taper", [0.0, 1e-9, *(edge * bound for bound in short.TAPERS for edge in EDGES)])
@pytest.mark.parametrize("size", [1e-9, 1e-6, *(edge * bound for bound in short.SIZES for edge in EDGES)])
def test_up_to_the_corners_of_every_class(size: float, taper: float, phase: complex) -> None:
    for end in {taper, -taper}:
        frustum, g = sides(size, end), LEAK * phase
        g = g if isinstance(phase, complex) else float(g.real)
        y11, y12, y22 = two_port(*frustum, R_I, mp.mpmathify(g) * mp.mpf(MICROSIEMENS_PER_S_CM2_UM2))
        for name, got, wanted in zip(
            Pi._fields, engine(frustum, g), (-y12, y11 + y12, y22 + y12), strict=True
        ):
            assert abs(mp.mpmathify(got) - wanted) <= 2e-15 * abs(wanted), (name, end)


def test_a_class_is_told_by_the_first_bounds_that_are_not_exceeded() -> None:
    size = np.array([0.0, *short.SIZES, 0.011, 0.005, 0.0, np.inf])
    taper = np.array([0.0, 1e-9, 0.07, 0.0, 0.0, 0.126, 1 / 8, 0.0])
    expected = [0, 3, 7, 2, short.OTHER, short.OTHER, 6, short.OTHER]
    assert short.class_of(size, taper).tolist() == expected


@pytest.mark.parametrize("kind", range(len(short.SIZES) * len(short.TAPERS)))
def test_the_last_power_kept_matters_and_the_next_would_not(kind: int) -> None:
    size, taper = short._bounds(kind)
    powers = short.coefficients(np.array([taper]), kind)
    assert np.abs(powers[-1]).max() * size ** len(powers) > 1e-17
    # The series goes like (Q/π²)^j, and tapers of at most 1/8 make each term greater by less than a tenth.
    assert 1.1 * np.abs(powers[-1]).max() * size ** (len(powers) + 1) / np.pi**2 < 2e-17


def test_mirrored_frusta_have_start_and_end_exchanged_to_the_last_bit() -> None:
    for taper in (0.01, 0.1):
        r_start, r_end, length = sides(1e-3, taper)
        there, back = (engine(radii, LEAK) for radii in ((r_start, r_end, length), (r_end, r_start, length)))
        assert Pi(there.axial, there.end, there.start) == back
