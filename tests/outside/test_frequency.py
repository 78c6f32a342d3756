"""Values of AC cable theory: impedance and attenuation at a frequency."""

from math import pi

import pytest

from tests.outside.cells import R_infinity, cable_of_L, solved
from tests.outside.published import AC_CABLE, MEMORY, assert_published, rows

TAU_MS = 10.0  # R_m 1e4 ohm cm2, C_m 1 uF/cm2

AC_INFINITE = rows(  # given: omega tau, what
    AC_CABLE,
    MEMORY,
    1e-9,
    ("ReQ_0", (0.0, "q"), 1.0),
    ("lamAC_0", (0.0, "lambda"), 1.0),
    ("ReQ_0.1", (0.1, "q"), 1.001246114),
    ("lamAC_0.1", (0.1, "lambda"), 0.9987554367),
    ("ReQ_1", (1.0, "q"), 1.098684113),
    ("lamAC_1", (1.0, "lambda"), 0.9101797211),
    ("ReQ_10", (10.0, "q"), 2.350518626),
    ("lamAC_10", (10.0, "lambda"), 0.4254380242),
    ("ReQ_100", (100.0, "q"), 7.106511095),
    ("lamAC_100", (100.0, "lambda"), 0.140716026),
)


def hz_of(omega_tau):
    """Return the frequencies to ask for besides 0 Hz."""
    return (omega_tau / (2 * pi * TAU_MS * 1e-3),) if omega_tau else ()


@pytest.mark.parametrize("row", AC_INFINITE)
def test_log_attenuation_per_lambda_of_an_infinite_cable(row):
    omega_tau, what = row.given
    result = solved(cable_of_L(30.0, samples_at=(1.0,)), hz=hz_of(omega_tau))
    per_lambda = result.log_attenuation_from_soma[1, -1]
    assert_published(per_lambda if what == "q" else 1 / per_lambda, row)


AC_SEALED = rows(  # L = 1
    AC_CABLE,
    MEMORY,
    1e-9,
    ("Zsealed_1", (1.0, "Z"), 0.9629161371),
    ("attsealed_1", (1.0, "V"), 1.607762093),
    ("Zsealed_10", (10.0, "Z"), 0.3129178792),
    ("attsealed_10", (10.0, "V"), 5.224606073),
)


@pytest.mark.parametrize("row", AC_SEALED)
def test_sealed_cable_at_a_frequency(row):
    omega_tau, what = row.given
    result = solved(cable_of_L(1.0), hz=hz_of(omega_tau))
    Z = result.R_in_MOhm[0, 1] / R_infinity(1e4, 100, 4.0)
    assert_published(Z if what == "Z" else result.attenuation_from_soma[1, 1], row)
