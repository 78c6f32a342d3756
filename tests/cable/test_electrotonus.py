"""Cases and what is refused before anything is solved."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import Case, build_cases, cases_of, solve, solve_cables
from morphotone.errors import AssumptionError, ReadingError
from morphotone.reading.reconstruction import reconstruct
from tests import trees


def read(swc):
    return reconstruct(swc.encode(), file="cell.swc", cell="cell")


def test_cases_are_assumptions_times_frequencies():
    one, other = Assumptions(hz=(5.0,)), Assumptions(membrane=Membrane(R_i_ohm_cm=70.0))
    assert [(case.assumptions is one, case.hz) for case in cases_of([one, other])] == [
        (True, 0.0),
        (True, 5.0),
        (False, 0.0),
    ]
    assert [case.hz for case in cases_of([one, other], hz=(7.0,))] == [0.0, 7.0, 0.0, 7.0]


def test_cases_need_not_begin_at_rest():
    one = Assumptions()
    cells = [build_cases(read(trees.star()), [one])]
    (moving,) = solve_cables(cells, [Case(one, 10.0)])
    (both,) = solve_cables(cells, cases_of([one], hz=(10.0,)))
    np.testing.assert_array_equal(moving.Z_in[:, 0], both.Z_in[:, 1])


def test_nothing_to_solve():
    assert solve_cables([], cases_of([Assumptions()])) == []


def test_a_step_of_more_than_a_thousand_space_constants_is_refused_with_its_line():
    rec = read("# drawn\n1 3 0 0 0 1 -1\n2 3 50 0 0 1 1\n3 3 2000000 0 0 0.9 2\n")
    with pytest.raises(
        ReadingError, match=r"line 4: the step to sample 3 is 2e\+06 um or \d+ space constants"
    ) as caught:
        solve(rec)
    assert caught.value.reason == "step_endless"
    assert solve(rec, Assumptions(membrane=Membrane(R_m_ohm_cm2=1e6))).X.max() < 1000.0


def test_assumptions_that_give_different_trees_are_refused():
    rec = read(trees.with_axon())
    with pytest.raises(AssumptionError, match="trees of different nodes"):
        solve(rec, [Assumptions(), Assumptions(axon="left out")])


@pytest.mark.parametrize("radius", ["1e-308", "0.0000000005", "2e6", "1e99"])
def test_a_radius_no_cable_has_is_refused_with_its_line(radius):
    rec = read(f"1 3 0 0 0 1 -1\n2 3 50 0 0 {radius} 1\n")
    with pytest.raises(
        ReadingError, match=r"line 2: radius .* of sample 2, expected 1e-09 to 1e\+06 um"
    ) as caught:
        solve(rec)
    assert caught.value.reason == "radius_absurd"


def test_a_correction_that_eats_the_radius_is_named():
    rec = read("1 3 0 0 0 1 -1\n2 3 50 0 0 0.2 1\n")
    with pytest.raises(ReadingError, match=r"radius 0.2 um, -0.05 um after the correction of diameters"):
        solve(rec, Assumptions(diameter_offset_um=-0.5))
