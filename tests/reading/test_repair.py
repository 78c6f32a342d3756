"""Radii mended: from the root's side, from below, never between soma and neurite, always on record."""

import numpy as np
import pytest

from morphotone.errors import ReadingError
from morphotone.reading.reconstruction import Reconstruction, reconstruct
from morphotone.reading.repair import mend_radii
from morphotone.reading.thresholds import Thresholds


def cell(*rows: tuple[int, float, float, int], unit_um: float = 1.0) -> Reconstruction:
    """Read a cell along x from rows of type, x, radius, parent; numbered from 1, one line each."""
    lines = [f"{i} {kind} {x} 0 0 {r} {parent}" for i, (kind, x, r, parent) in enumerate(rows, 1)]
    return reconstruct("\n".join(lines).encode(), file="made.swc", cell="made", unit_um=unit_um)


def radii(*rows: tuple[int, float, float, int]) -> list[float]:
    return [float(radius) for radius in mend_radii(cell(*rows)).radius]


def test_a_sound_cell_is_returned_as_it_is() -> None:
    rec = cell((1, 0, 5, -1), (3, 10, 1, 1))
    assert mend_radii(rec) is rec


def test_a_radius_comes_from_the_nearest_on_the_path_toward_the_root() -> None:
    assert radii((1, 0, 5, -1), (3, 10, 1, 1), (3, 20, 0, 2), (3, 30, -1, 3), (3, 40, 0.3, 4)) == [
        5,
        1,
        1,
        1,
        0.3,
    ]


def test_else_from_the_nearest_below_by_path_length() -> None:
    rows = [(3, 0, 0, -1), (3, 10, 0, 1), (3, 19, 0.7, 2), (3, 22, 0.4, 2), (3, -20, 0.9, 1)]
    assert radii(*rows) == [0.7, 0.7, 0.7, 0.4, 0.9]


def test_of_two_as_near_below_the_earlier_gives_its_radius() -> None:
    assert radii((3, 0, 0, -1), (3, 5, 0.6, 1), (3, -5, 0.8, 1)) == [0.6, 0.6, 0.8]


def test_a_side_twig_follows_the_trunk_that_was_mended_from_below() -> None:
    assert radii((3, 0, 0, -1), (3, 5, 0, 1), (3, 9, 0.5, 1), (3, 7, 0, 2)) == [0.5, 0.5, 0.5, 0.5]


def test_a_stem_does_not_take_the_soma_s_radius() -> None:
    assert radii((1, 0, 8, -1), (3, 10, 0, 1), (3, 20, 0.6, 2)) == [8, 0.6, 0.6]


def test_a_soma_does_not_take_a_neurite_s_radius_while_another_soma_sample_has_one() -> None:
    assert radii((1, 0, 0, -1), (1, 9, 6, 1), (3, 2, 0.5, 1)) == [6, 6, 0.5]
    assert radii((1, 0, 0, -1), (3, 9, 0.8, 1), (3, 2, 0.5, 1)) == [0.5, 0.8, 0.5]


def test_a_dendrite_without_any_radius_takes_the_median_of_the_neurites() -> None:
    rows = [(1, 0, 8, -1), (3, 10, 0, 1), (3, 20, -1, 2), (3, 10, 0.4, 1), (3, 20, 0.6, 4), (3, 30, 1.5, 5)]
    assert radii(*rows) == [8, 0.6, 0.6, 0.4, 0.6, 1.5]


def test_a_soma_alone_mends_itself() -> None:
    assert radii((1, 0, 4, -1), (1, 3, 0, 1)) == [4, 4]


def test_the_mending_is_recorded_with_count_range_and_place() -> None:
    rec = mend_radii(cell((1, 0, 5, -1), (3, 10, 1, 1), (3, 20, 0, 2), (3, 30, 0.25, 3), (3, 40, -3, 4)))
    finding = rec.findings[-1]
    assert finding.code == "radius_mended"
    assert finding.sentence == (
        "2 radii of zero or below were replaced by a neighbour's, 0.25 to 1 µm (first at line 3, sample 3)."
    )
    assert (finding.line, finding.sample, finding.count) == (3, 3, 2)


def test_one_mended_radius_is_told_in_the_singular() -> None:
    rec = mend_radii(cell((1, 0, 5, -1), (3, 10, 1, 1), (3, 20, 0, 2)))
    assert rec.findings[-1].sentence == (
        "1 radius of zero or below was replaced by a neighbour's, 1 µm (first at line 3, sample 3)."
    )


@pytest.mark.parametrize(
    ("broken", "severity"), [(1, "note"), (2, "doubtful"), (10, "doubtful"), (11, "unfit")]
)
def test_the_record_weighs_by_the_share_of_samples(broken: int, severity: str) -> None:
    rows = [(3, float(i), 0.0 if i > 100 - broken else 1.0, i - 1 if i > 1 else -1) for i in range(1, 101)]
    assert mend_radii(cell(*rows)).findings[-1].severity == severity
    assert mend_radii(cell(*rows), Thresholds(mended_few=0.5)).findings[-1].severity == (
        "note" if broken <= 10 else "unfit"
    )


def test_the_reconstruction_that_was_given_stays_as_it_is() -> None:
    rec = cell((1, 0, 5, -1), (3, 10, 1, 1), (3, 20, 0, 2))
    mend_radii(rec)
    assert rec.radius.tolist() == [5, 1, 0]
    assert rec.findings == ()


def test_a_long_broken_neurite_is_mended_in_one_go() -> None:
    rows = [(3, float(i), 0.0 if i < 3000 else 0.5, i - 1 if i > 1 else -1) for i in range(1, 3001)]
    assert set(radii(*rows)) == {0.5}


@pytest.mark.parametrize("soma", [5.0, 0.0])
def test_no_neurite_radius_at_all_is_refused_with_the_place(soma: float) -> None:
    rec = cell((1, 0, soma, -1), (3, 10, -1, 1), (3, 20, -1, 2), unit_um=0.001)
    with pytest.raises(
        ReadingError,
        match=r"made\.swc: line 2: read '-1', expected a positive radius: no sample of 3 has a neurite's",
    ) as refusal:
        mend_radii(rec)
    assert refusal.value.reason == "radius_unusable"


def test_mended_radii_are_positive_for_any_tree() -> None:
    rng = np.random.default_rng(11)
    for _ in range(50):
        n = int(rng.integers(2, 60))
        rows = [
            (
                int(rng.integers(1, 4)),
                float(rng.normal()),
                float(rng.choice([0, -1, 0.5, 2])),
                -1 if i == 0 else int(rng.integers(1, i + 1)),
            )
            for i in range(n)
        ]
        rows.append((3, 1.0, 0.7, 1))
        before, after = cell(*rows), mend_radii(cell(*rows))
        assert (after.radius > 0).all()
        fine = before.radius > 0
        np.testing.assert_array_equal(after.radius[fine], before.radius[fine])
