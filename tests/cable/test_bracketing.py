"""The search alone, on determinants made up from poles that are known."""

import numpy as np
import pytest

from morphotone.cable.bracketing import Search


def made_up(w, poles):
    """Return counts and ln|det| for poles (w, multiplicity): the product of (1 - w/w_k)^m."""
    at, share = (np.array(values) for values in zip(*poles, strict=True))
    count = ((w[:, None] > at) * share).sum(axis=1)
    with np.errstate(divide="ignore"):
        return count, (share * np.log(np.abs(1.0 - w[:, None] / at))).sum(axis=1)


def led(search, answer, n=16, most=60):
    """Lead a search to its end; return its poles and how many sweeps it took."""
    for sweeps in range(most):
        w = search.points(n)
        if not len(w):
            return search.poles(), sweeps
        assert len(w) == n
        assert (w > 0.0).all()
        search.add(w, *answer(w))
    raise AssertionError(f"not done in {most} sweeps")


def assert_found(poles, expected):
    np.testing.assert_allclose([1 + p.w for p in poles], [1 + w for w, _ in expected], rtol=1e-10, atol=0)
    assert [p.multiplicity for p in poles] == [m for _, m in expected]


CYLINDER = [((k * np.pi) ** 2, 1) for k in range(1, 40)]
FAMILIES = {
    "cylinder": CYLINDER,
    "a fivefold and a sixfold one": [(2.5, 5), (4.4, 6), (9.9, 13), (22.2, 5), (40.0, 1)],
    "even multiplicities": [(1.0, 2), (3.0, 4), (5.0, 2), (7.0, 1)],
    "pairs": [(1.0, 1), (1.0 + 1e-7, 1), (1.1, 1), (1.1 + 1e-5, 2), (8.0, 1)],
    "a cluster": [(2.0 + 1e-3 * k * k, 1) for k in range(9)],
    "very slow": [(1e-7, 1), (2e-5, 1), (3e-5, 1), (0.02, 1)],
    "very fast": [(3e5, 1), (3e8, 2), (4e11, 1)],
    "at the first points": [(0.03, 1), (300.0, 1), (1000.0, 1)],
}


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("wanted", [1, 2, 3])
def test_finds_what_is_there(family, wanted):
    poles = FAMILIES[family]
    found, _ = led(Search(wanted, 0), lambda w: made_up(w, poles))
    assert_found(found, poles[:wanted])
    for k, pole in enumerate(found):
        gaps = [abs(pole.w - w) for j, (w, _) in enumerate(poles) if j != k]
        assert pole.separation <= min(gaps) * (1 + 1e-6) + 2e-10 * (1 + pole.w)
        assert pole.separation >= min(0.05 * min(gaps), 0.005 * (1 + pole.w))


def test_poles_that_agree_to_rounding_are_one():
    poles = [(2.0 * (1 + 1e-14 * k), 1) for k in range(5)] + [(9.0, 1)]
    found, _ = led(Search(2, 0), lambda w: made_up(w, poles))
    assert_found(found, [(2.0, 5), (9.0, 1)])


def test_a_pole_known_at_zero_is_not_searched_for():
    found, _ = led(Search(3, 1), lambda w: (made_up(w, CYLINDER)[0] + 1, made_up(w, CYLINDER)[1]))
    assert found[0].w == 0.0
    assert_found(found, [(0.0, 1), *CYLINDER[:2]])


def test_one_known_pole_is_enough_when_one_is_wanted_but_for_what_lies_behind():
    found, sweeps = led(Search(1, 1), lambda w: (made_up(w, CYLINDER)[0] + 1, made_up(w, CYLINDER)[1]))
    assert_found(found, [(0.0, 1)])
    assert sweeps == 1
    assert 1.0 < found[0].separation <= np.pi**2


def test_gives_up_where_no_cell_has_modes():
    found, _ = led(Search(3, 0), lambda w: made_up(w, [(0.5, 1)]))
    assert_found(found, [(0.5, 1)])
    assert found[0].separation == np.inf


def test_few_sweeps_where_the_determinant_is_smooth():
    _, sweeps = led(Search(3, 0), lambda w: made_up(w, CYLINDER))
    assert sweeps <= 5


@pytest.mark.parametrize("key", range(5))
def test_counts_alone_suffice(key):
    # The determinant may say what it likes: counts prove every bracket, and none does worse than halving.
    rng = np.random.default_rng(key)
    found, sweeps = led(Search(3, 0), lambda w: (made_up(w, CYLINDER)[0], rng.normal(0, 20, len(w))))
    assert_found(found, CYLINDER[:3])
    assert sweeps <= 45


@pytest.mark.parametrize("wanted", [1, 3, 20])
def test_random_poles(wanted):
    rng = np.random.default_rng(8)
    for _ in range(10):
        at = np.sort(10 ** rng.uniform(-3, 2.4, 30))
        poles = list(zip(at.tolist(), rng.integers(1, 4, 30).tolist(), strict=True))
        found, _ = led(Search(wanted, 0), lambda w, poles=poles: made_up(w, poles), n=4 * (wanted + 1))
        assert_found(found, poles[:wanted])
