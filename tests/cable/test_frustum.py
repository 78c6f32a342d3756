"""Inside one frustum: the number of terms, the seams between ways to compute, cutting, very long pieces."""

import numpy as np
import pytest

from morphotone.cable import frustum
from morphotone.cable.frustum import Pi, electrotonic_lengths, join, pi_of_frusta
from morphotone.units import MICROSIEMENS_PER_S_CM2_UM2
from tests.definitions import two_port

R_I = np.array([[150.0]])
LEAK = 1.0 / 20_000.0


def pi(r_start: float, r_end: float, length: float, g: complex = LEAK) -> Pi:
    """Return the π of one frustum as plain numbers."""
    column = (np.array([[value]]) for value in (r_start, r_end, length))
    return Pi(*(part[0, 0] for part in pi_of_frusta(*column, R_I, np.array([[g]]))))


def assert_close(one: Pi, other: Pi, tolerance: float) -> None:
    for name, left, right in zip(Pi._fields, one, other, strict=True):
        assert abs(left - right) <= tolerance * abs(right), name


@pytest.mark.parametrize("index", range(len(frustum._TERMS)))
def test_every_class_has_the_terms_it_needs_and_not_many_more(index: int) -> None:
    taper = frustum._TAPERS[index // len(frustum._THETAS2)]
    theta2 = frustum._THETAS2[index % len(frustum._THETAS2)]
    corner = np.array([[taper]]), np.array([[theta2]])
    _, slope, delay = (part.item() for part in frustum._sums(*corner, 200))

    def lost(terms: int) -> float:
        _, fewer, less = (part.item() for part in frustum._sums(*corner, terms))
        return max((slope - fewer) / slope, (delay - less) / (1.0 + delay))

    assert lost(frustum._TERMS[index]) <= 2e-16
    assert lost(frustum._TERMS[index] - 3) > 1e-17


@pytest.mark.parametrize("taper", [*frustum._TAPERS, 0.6, 0.9, 0.99])
@pytest.mark.parametrize("g", [LEAK, LEAK + 6e-3j])
def test_no_seam_between_classes_and_pieces(taper: float, g: complex) -> None:
    below, above = (pi(2.0, 2.0 * (1.0 - taper * (1 + change)), 80.0, g) for change in (-1e-13, 1e-13))
    assert_close(below, above, 2e-11 * taper / (1.0 - taper))


@pytest.mark.parametrize("length", [0.1, 1.0, 30.0, 400.0, 900.0])
def test_no_seam_between_cylinder_and_taper(length: float) -> None:
    cylinder = pi(1.0, 1.0, length)
    assert_close(pi(1.0, 1.0 - 1e-15, length), cylinder, 1e-14)
    assert_close(pi(1.0, 1.0 - 1e-9, length), cylinder, 1e-8)


@pytest.mark.parametrize(("r_start", "r_end"), [(1.0, 0.7), (0.7, 1.0), (3.0, 0.1), (0.1, 3.0)])
def test_two_parts_joined_are_the_whole(r_start: float, r_end: float) -> None:
    middle = r_start + 0.3 * (r_end - r_start)
    parts = join(pi(r_start, middle, 60.0), pi(middle, r_end, 140.0))
    assert_close(parts, pi(r_start, r_end, 200.0), 1e-13)


def test_walked_the_other_way_start_and_end_change_places() -> None:
    there, back = pi(1.5, 0.4, 120.0), pi(0.4, 1.5, 120.0)
    assert Pi(there.axial, there.end, there.start) == back


@pytest.mark.parametrize(("r_start", "r_end"), [(0.5, 0.45), (0.45, 0.5)])
def test_ends_too_far_apart_to_see_each_other(r_start: float, r_end: float) -> None:
    length, g = 4.0e6, LEAK  # some 12,000 λ
    axial, start, end = pi(r_start, r_end, length, g)
    assert axial == 0.0
    for radius, shunt, slope in ((r_start, start, r_end - r_start), (r_end, end, r_start - r_end)):
        # Forty λ of the same taper look endless from the end.
        seen, _, _ = two_port(
            radius, radius + slope / 300.0, length / 300.0, 150.0, g * MICROSIEMENS_PER_S_CM2_UM2
        )
        assert shunt == pytest.approx(float(seen), rel=1e-12)


def test_electrotonic_length_is_the_integral_of_dx_over_lambda() -> None:
    r_start, r_end, length = 1.2, 0.3, 250.0
    x = np.linspace(0.0, length, 200_001)
    radius = r_start + (r_end - r_start) * x / length
    slant = np.hypot(1.0, (r_end - r_start) / length)
    lam = np.sqrt(1e4 * radius / (2.0 * 150.0 * LEAK * slant))
    assert electrotonic_lengths(
        np.float64(r_start), np.float64(r_end), np.float64(length), 150.0, LEAK
    ) == pytest.approx(np.trapezoid(1.0 / lam, x), rel=1e-9)


def test_no_length_has_no_electrotonic_length() -> None:
    assert electrotonic_lengths(*(np.float64(value) for value in (1.0, 1.0, 0.0)), 150.0, LEAK) == 0.0
