"""From a table to a reconstruction: order, pieces, units, names, loops."""

import gzip
import hashlib
import time

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from morphotone.errors import AssumptionError, ReadingError
from morphotone.reading.reconstruction import domain_name, parents_first, read, reconstruct, trees

CELL = b"# made by hand\n1 1 0 0 0 5 -1\n2 3 0 10 0 0.5 1\n3 3 1 20 -3 0.25 2\n"


def as_text(parent, number=None):
    """A text with one sample a row; parents are row indices."""
    number = np.arange(1, len(parent) + 1) if number is None else number
    above = [number[p] if p >= 0 else -1 for p in parent]
    return "\n".join(
        f"{n} 3 {i} 0 0 1 {p}" for i, (n, p) in enumerate(zip(number, above, strict=True))
    ).encode()


def build(data, **kwargs):
    return reconstruct(data, file="a.swc", cell="a", **kwargs)


def test_a_standard_file_is_kept_as_it_stands():
    rec = reconstruct(CELL, file="b/a.swc", cell="the cell")
    assert (rec.cell, rec.file, rec.unit_um, rec.comments) == ("the cell", "b/a.swc", 1.0, ("made by hand",))
    assert rec.sha256 == hashlib.sha256(CELL).hexdigest()
    assert reconstruct(CELL, file="a.swc", cell="a", sha256="known already").sha256 == "known already"
    np.testing.assert_array_equal(rec.number, [1, 2, 3])
    np.testing.assert_array_equal(rec.kind, [1, 3, 3])
    np.testing.assert_array_equal(rec.parent, [-1, 0, 1])
    np.testing.assert_array_equal(rec.position, [[0, 0, 0], [0, 10, 0], [1, 20, -3]])
    np.testing.assert_array_equal(rec.radius, [5, 0.5, 0.25])
    np.testing.assert_array_equal(rec.line, [2, 3, 4])
    np.testing.assert_array_equal(rec.tree, [0, 0, 0])


def test_arrays_cannot_be_written_to():
    with pytest.raises(ValueError, match="read-only"):
        build(CELL).radius[0] = 1


def test_the_unit_scales_positions_and_radii():
    rec = build(CELL, unit_um=0.5)
    np.testing.assert_array_equal(rec.position[2], [0.5, 10, -1.5])
    np.testing.assert_array_equal(rec.radius, [2.5, 0.25, 0.125])
    assert rec.unit_um == 0.5


@pytest.mark.parametrize("unit", [0, -1, float("nan"), float("inf")])
def test_an_impossible_unit_is_refused(unit):
    with pytest.raises(AssumptionError, match="expected a positive length in um"):
        build(CELL, unit_um=unit)


@pytest.mark.parametrize(
    ("name", "cell"),
    [
        ("a.swc", "a"),
        ("a.b #3 (left).SWC", "a.b #3 (left)"),
        ("c.swc.gz", "c"),
        ("d.Swc.GZ", "d"),
        ("e.txt", "e.txt"),
    ],
)
def test_the_cell_is_named_after_its_file(tmp_path, name, cell):
    path = tmp_path / name
    path.write_bytes(gzip.compress(CELL) if name.lower().endswith("gz") else CELL)
    rec = read(path)
    assert (rec.cell, rec.file) == (cell, str(path))
    assert rec.sha256 == hashlib.sha256(path.read_bytes()).hexdigest()
    assert read(path, cell="x", unit_um=2.0).cell == "x"
    np.testing.assert_array_equal(rec.number, [1, 2, 3])


def test_children_before_parents_are_put_behind_them():
    rec = build(b"3 3 1 20 -3 0.25 2\n2 3 0 10 0 0.5 1\n1 1 0 0 0 5 -1\n")
    np.testing.assert_array_equal(rec.number, [1, 2, 3])
    np.testing.assert_array_equal(rec.parent, [-1, 0, 1])
    np.testing.assert_array_equal(rec.radius, [5, 0.5, 0.25])
    np.testing.assert_array_equal(rec.line, [3, 2, 1])


@pytest.mark.parametrize(
    ("parent", "order"),
    [
        ([-1, 0, 1, 0], [0, 1, 2, 3]),
        ([-1, 3, 1, 0, 3], [0, 3, 1, 2, 4]),  # rows 1 and 2 wait for row 3
        ([2, 2, -1, 0], [2, 0, 1, 3]),
        ([1, 2, 3, -1], [3, 2, 1, 0]),
        ([-1, -1, 0, 1], [0, 1, 2, 3]),
        ([-1, 2, 1], [0]),  # rows 1 and 2 are a loop
        ([0, 0, 1], []),
    ],
)
def test_rows_wait_for_the_latest_ancestor_and_no_longer(parent, order):
    np.testing.assert_array_equal(parents_first(np.array(parent)), order)


@st.composite
def shuffled_forests(draw):
    n = draw(st.integers(2, 40))
    parent = [draw(st.integers(-1, i - 1)) for i in range(n)]
    place = draw(st.permutations(range(n)))
    shuffled = np.empty(n, dtype=np.int64)
    for row, above in enumerate(parent):
        shuffled[place[row]] = place[above] if above >= 0 else -1
    return shuffled


@given(shuffled_forests())
def test_any_order_of_rows_gives_the_same_forest_parents_first(parent):
    rec = build(as_text(parent))
    assert sorted(rec.number) == list(range(1, len(parent) + 1))
    assert (rec.parent < np.arange(len(parent))).all()
    above = [rec.number[p] - 1 if p >= 0 else -1 for p in rec.parent]
    np.testing.assert_array_equal(above, parent[rec.number - 1])
    np.testing.assert_array_equal(rec.line, rec.number)


@given(shuffled_forests())
def test_pieces_are_numbered_by_their_roots(parent):
    def root_of(row):
        while parent[row] >= 0:
            row = parent[row]
        return row

    roots = [row for row in range(len(parent)) if parent[row] < 0]
    np.testing.assert_array_equal(trees(parent), [roots.index(root_of(row)) for row in range(len(parent))])


MANY = 100_000
EXTREME = {
    "reversed chain": np.append(np.arange(1, MANY), -1),
    "star with its centre last": np.append(np.full(MANY - 1, MANY - 1), -1),
    "reversed binary tree": np.append(MANY - 1 - (np.arange(MANY - 1, 0, -1) - 1) // 2, -1),
}


@pytest.mark.parametrize("parent", EXTREME.values(), ids=EXTREME.keys())
def test_ordering_does_not_slow_down_on_extreme_shapes(parent):
    start = time.perf_counter()
    order = parents_first(parent)
    assert time.perf_counter() - start < 1  # some 20 ms; quadratic time would take minutes
    np.testing.assert_array_equal(np.sort(order), np.arange(MANY))


@pytest.mark.parametrize(
    ("parent", "loop", "lost"),
    [
        (
            [-1, 0, 3, 2, 3],
            "line 3: read '3 -> 4 -> 3'",
            "2 samples are their own ancestors, 3 reach no root",
        ),
        ([1, 2, 0], "line 1: read '1 -> 2 -> 3 -> 1'", "3 samples are their own ancestors, 3 reach no root"),
    ],
)
def test_a_loop_is_named(parent, loop, lost):
    with pytest.raises(
        ReadingError, match=f"^a.swc: {loop}, expected parents that lead to a root: {lost}"
    ) as caught:
        build(as_text(parent))
    assert caught.value.reason == "loop"
    assert len(caught.value.faults) == 1


def test_a_long_loop_is_shortened():
    parent = np.append(np.arange(1, 1000), 0)
    with pytest.raises(ReadingError, match=r"read '1 -> 2 -> .* -> 10 -> 990 more -> 1'"):
        build(as_text(parent))


def test_findings_of_the_reading_are_kept():
    assert [finding.code for finding in build(CELL.replace(b"0.5 1\n", b"0.5 1 8\n")).findings] == [
        "columns_extra"
    ]


@pytest.mark.parametrize(
    ("kind", "name"), [(1, "soma"), (2, "axon"), (3, "basal"), (4, "apical"), (0, "0"), (17, "17")]
)
def test_domains_have_the_names_of_the_standard(kind, name):
    # SWC type codes: INCF swc-specification, docs/source/swc.rst
    assert domain_name(kind) == name
