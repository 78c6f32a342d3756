"""Frequency response against closed forms, the engine's own cases, and what the definition of √2 says."""

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import brentq

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import build_cases, cases_of, solve_cables
from morphotone.cable.response import frequency_grid, frequency_response, half_power_hz
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.reading.reconstruction import reconstruct
from tests import trees

DEFAULTS = Assumptions()
TAU_S = 0.02
GRID = frequency_grid(1.0, 1e4)


def cable(swc, assumptions=DEFAULTS):
    return build(reconstruct(swc.encode(), file="tree.swc", cell="tree"), assumptions)


def lambda_um(d=2.0):
    return 1e4 * np.sqrt(20000.0 / 150.0 * d * 1e-4 / 4)


def cylinder_of(shares, L):
    """Return a sealed cylinder with samples at shares of its electrotonic length."""
    tree = trees.Tree()
    last = tree.add((0, 0, 0), 1.0)
    for share in shares:
        last = tree.add((share * L * lambda_um(), 0, 0), 1.0, last)
    return tree.text()


def with_hz(swc, hz, assumptions=DEFAULTS):
    """Return the engine's results at 0 Hz and at frequencies, by node."""
    rec = reconstruct(swc.encode(), file="tree.swc", cell="tree")
    asked = replace(assumptions, hz=tuple(hz))
    return solve_cables([build_cases(rec, [asked])], cases_of([asked]))[0]


# ---------------------------------------------------------------- magnitude and phase


@pytest.mark.parametrize("family", ["star", "comb", "irregular with soma", "with axon"])
def test_what_the_engine_gives_at_each_frequency(family):
    swc = trees.FAMILIES[family][0]()
    (response,) = frequency_response([cable(swc)], DEFAULTS, GRID)
    expected = with_hz(swc, GRID)
    for name in ("Z_in", "Z_transfer", "log_attenuation_to_soma", "log_attenuation_from_soma"):
        np.testing.assert_allclose(
            getattr(response, name), getattr(expected, name)[:, 1:], rtol=1e-12, atol=1e-13
        )
    for phase, Z in ((response.phase_in, response.Z_in), (response.phase_transfer, response.Z_transfer)):
        np.testing.assert_allclose(np.exp(1j * phase), Z / abs(Z), rtol=0, atol=1e-12)


@pytest.mark.parametrize("per_decade", [1, 10])
def test_phase_of_a_long_cylinder_is_continuous_however_coarse_the_grid(per_decade):
    # Z(0, X) = R_inf exp(-q X)/q, q = sqrt(1 + i omega tau): 25 rad per lambda at 10 kHz.
    shares = np.linspace(0.01, 1, 100)
    swc = cylinder_of(shares, 30.0)
    hz = frequency_grid(0.1, 1e4, per_decade)
    (response,) = frequency_response([cable(swc)], DEFAULTS, hz)
    q = np.sqrt(1 + 2j * np.pi * hz * TAU_S)
    X = np.append(0, 30.0 * shares)[:40, None]
    expected = -np.angle(q) - q.imag * X  # of exp(-qX)/q
    np.testing.assert_allclose(response.phase_transfer[:40], expected, rtol=1e-9, atol=1e-9)
    assert response.phase_transfer[39].min() < -2 * np.pi * 30


def test_phase_across_one_frustum_of_many_turns():
    # 7.5 λ in one piece: the phase passes 60 turns inside it, and is still counted on from 0 Hz.
    swc = cylinder_of([1.0], 7.5)
    (response,) = frequency_response([cable(swc)], DEFAULTS, [10.0, 1000.0, 10000.0])
    q = np.sqrt(1 + 2j * np.pi * response.hz * TAU_S)
    # Both ends sealed: Z(0, L) = R_inf/(q sinh qL), and sinh qL = exp(qL)/2 here.
    np.testing.assert_allclose(response.phase_transfer[1], -np.angle(q) - 7.5 * q.imag, rtol=1e-6)


def test_sites_are_rows_in_the_order_asked():
    swc = trees.comb(4)
    (every,) = frequency_response([cable(swc)], DEFAULTS, GRID)
    chosen = np.array([5, 0, 2])
    (some,) = frequency_response([cable(swc)], DEFAULTS, GRID, [chosen])
    for name in ("Z_in", "Z_transfer", "phase_in", "phase_transfer", "log_attenuation_to_soma"):
        np.testing.assert_array_equal(getattr(some, name), getattr(every, name)[chosen])
    np.testing.assert_array_equal(some.nodes, chosen)


# ---------------------------------------------------------------- where attenuation has grown by √2


def test_half_power_on_a_long_cylinder():
    # On an endless cylinder attenuation is exp(Re(q) X): Re(q) X - X = ln √2.
    tree = trees.Tree()
    soma = tree.add((0, 0, 0), 1.0)
    last = soma
    for X in (0.5, 1.0, 2.0, 3.0):
        last = tree.add((X * lambda_um(), 0, 0), 1.0, last)
    tree.add((60 * lambda_um(), 0, 0), 1.0, last)
    tree.add((-60 * lambda_um(), 0, 0), 1.0, soma)
    (found,) = half_power_hz([cable(tree.text())], DEFAULTS)
    for node, X in ((2, 1.0), (3, 2.0), (4, 3.0)):
        # (Re q)² = (1 + sqrt(1 + w²))/2 with w = omega tau.
        re = 1 + np.log(np.sqrt(2)) / X
        w = np.sqrt((2 * re**2 - 1) ** 2 - 1)
        assert np.isclose(found[node], w / (2 * np.pi * TAU_S), rtol=1e-7, atol=0)


def test_half_power_on_a_sealed_cylinder():
    # V_tip/V_near for current at the tip, near end sealed: |cosh qL|.
    (found,) = half_power_hz([cable(cylinder_of([1.0], 1.0))], DEFAULTS)

    def excess(hz):
        q = np.sqrt(1 + 2j * np.pi * hz * TAU_S)
        return abs(np.cosh(q)) / np.cosh(1.0) - np.sqrt(2)

    assert np.isclose(found[1], brentq(excess, 1, 1000, xtol=1e-10), rtol=1e-7, atol=0)
    assert found[0] == np.inf


@pytest.mark.parametrize("key", range(4))
def test_half_power_is_where_the_engine_finds_it(key):
    swc = trees.irregular(30, key, soma=key % 2 == 0)
    assumptions = Assumptions(
        membrane=Membrane(R_m_ohm_cm2=9000.0 + 5000 * key),
        domains={4: Membrane(C_m_uF_cm2=0.7)},
        soma_shunt_nS=key,
    )
    (found,) = half_power_hz([cable(swc, assumptions)], assumptions)
    finite = np.flatnonzero(np.isfinite(found))
    assert len(finite) > 3
    for node in finite[:: max(1, len(finite) // 6)]:
        log = with_hz(swc, [found[node]], assumptions).log_attenuation_to_soma[node]
        slope = with_hz(swc, [found[node] * 1.01], assumptions).log_attenuation_to_soma[node][1] - log[1]
        assert abs(log[1] - log[0] - 0.5 * np.log(2)) <= 1e-7 * slope / 0.01


def test_far_beyond_any_cell_no_frequency_is_given():
    # 300 λ away the attenuation has grown by √2 long before the grid begins.
    (found,) = half_power_hz([cable(cylinder_of(np.linspace(0.01, 1, 100), 400.0))], DEFAULTS)
    assert np.isnan(found[-1])
    assert np.isfinite(found[20])


def test_sites_of_half_power_are_rows_in_the_order_asked():
    (every,) = half_power_hz([cable(trees.star())], DEFAULTS)
    (some,) = half_power_hz([cable(trees.star())], DEFAULTS, [np.array([4, 0])])
    np.testing.assert_array_equal(some, every[[4, 0]])


# ---------------------------------------------------------------- company, range, refusals


def test_a_forest_is_each_cell_alone_bit_for_bit():
    cells = [cable(builder()) for builder, _ in trees.FAMILIES.values()]
    together = frequency_response(cells, DEFAULTS, GRID)
    corners = half_power_hz(cells, DEFAULTS)
    for one, response, corner in zip(cells, together, corners, strict=True):
        (alone,) = frequency_response([one], DEFAULTS, GRID)
        for name in ("Z_in", "Z_transfer", "phase_in", "phase_transfer", "log_attenuation_from_soma"):
            np.testing.assert_array_equal(getattr(response, name), getattr(alone, name))
        np.testing.assert_array_equal(corner, half_power_hz([one], DEFAULTS)[0])


def test_no_cells_no_response():
    assert frequency_response([], DEFAULTS, GRID) == []
    assert half_power_hz([], DEFAULTS) == []


def test_beyond_the_models_range_a_warning_comes_with_the_result():
    (response,) = frequency_response([cable(trees.frustum())], DEFAULTS, [100.0, 2e4])
    (warning,) = response.warnings
    assert "20000" in warning
    assert "10000" in warning
    assert frequency_response([cable(trees.frustum())], DEFAULTS, [1e4])[0].warnings == ()


@pytest.mark.parametrize("hz", [0.0, -5.0, np.nan, np.inf])
def test_frequencies_that_are_none_are_refused(hz):
    with pytest.raises(AssumptionError, match="expected positive numbers of Hz"):
        frequency_response([cable(trees.frustum())], DEFAULTS, [hz])


def test_no_frequencies_are_refused():
    with pytest.raises(AssumptionError, match="expected at least one positive number of Hz"):
        frequency_response([cable(trees.frustum())], DEFAULTS, [])


@pytest.mark.parametrize("hz", [[10.0, 10.0], [20.0, 10.0]])
def test_frequencies_out_of_order_are_refused(hz):
    with pytest.raises(AssumptionError, match="ascending order"):
        frequency_response([cable(trees.frustum())], DEFAULTS, hz)


@pytest.mark.parametrize("ends", [(0.0, 10.0), (10.0, 1.0), (np.nan, 1.0), (1.0, np.inf)])
def test_grids_without_a_range_are_refused(ends):
    with pytest.raises(AssumptionError, match="0 < lowest < highest"):
        frequency_grid(*ends)


def test_a_grid_holds_both_ends():
    grid = frequency_grid(1.0, 1000.0, 5)
    assert len(grid) == 16
    np.testing.assert_allclose(grid[[0, 5, -1]], [1, 10, 1000], rtol=1e-14)
