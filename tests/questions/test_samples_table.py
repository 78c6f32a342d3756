"""The table by sample: against the engine and the walk, in file order, empty where nothing is analysed."""

from math import cosh, hypot

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from tests import trees
from tests.outside.cells import lambda_um
from tests.questions.walking import branches_by_definition, differing, tables_of, walk

HZ = (0.5, 100.0)
BY_CASE = (
    "R_in_MOhm",
    "R_transfer_MOhm",
    "attenuation_to_soma",
    "attenuation_from_soma",
    "log_attenuation_to_soma",
    "log_attenuation_from_soma",
)


def rows(table):
    """Return sample number -> row."""
    columns = [np.asarray(values).tolist() for values in table.values()]
    cells = [dict(zip(table, row, strict=True)) for row in zip(*columns, strict=True)]
    return {row["sample"]: row for row in cells}


def expected_rows(swc, assumptions, rule):
    """Return what stands in each row but for the straight distance, by walking."""
    walked = walk(swc, assumptions, rule)
    choices, cable = walked.cable.choices, walked.cable
    kinds = {row.number: row.kind for row in trees.rows_of(swc)}
    branch_of = {0: None} | {p.end: w for w in walked.walks for p in w.pieces}
    ends = branches_by_definition(walked)
    out = {}
    for row in trees.rows_of(swc):
        node = cable.node[row.number]
        branch = branch_of[node]
        piece = next((p for p in cable.pieces if p.end == node), None)
        at = piece.kind if piece else kinds[row.number]
        c = choices.of(at)
        soma = not piece and rule != "none"
        d = float(2 * piece.r_end) if piece else 2 * trees.rows_of(swc)[0].r
        out[row.number] = {
            "sample": row.number,
            "domain": {1: "soma", 2: "axon", 3: "basal", 4: "apical"}[row.kind],
            "diameter_um": 2 * row.r,
            "branch": ends[walked.number[branch.pieces[-1].end]]["sample_end"] if branch else 0,
            "order": branch.order if branch else 0,
            "path_um": float(cable.path[row.number]),
            "lambda_um": float("nan") if soma else lambda_um(c.R_m / c.F, c.R_i, d),
            "X": float(cable.X[row.number]),
        }
        for case, suffix in enumerate(("", "_0.5Hz", "_100Hz")):
            for name in BY_CASE:
                out[row.number][name + suffix] = float(
                    getattr(walked.solved, name)[walked.row[row.number], case]
                )
        out[row.number]["charge_to_soma"] = 1 / out[row.number]["attenuation_from_soma"]
    return out


ASSUMPTIONS = {
    "defaults": Assumptions(hz=HZ),
    "own radius": Assumptions(hz=HZ, branch_start="own radius"),
    "domains": Assumptions(
        Membrane(spine_factor=1.4), {2: Membrane(9000.0), 4: Membrane(7000.0, 80.0)}, hz=HZ
    ),
}


@pytest.mark.parametrize("assumed", ASSUMPTIONS)
@pytest.mark.parametrize("family", trees.FAMILIES)
def test_every_column_against_the_walk(family, assumed):
    build, rule = trees.FAMILIES[family]
    tables = tables_of(build(), ASSUMPTIONS[assumed])
    expected = expected_rows(build(), ASSUMPTIONS[assumed], rule)
    end = {0: 0} | dict(
        zip(tables.branch_table["branch"].tolist(), tables.branch_table["sample_end"].tolist(), strict=True)
    )
    got = rows(tables.sample_table)
    assert list(got) == list(expected)
    for row in got.values():
        row["branch"] = end[row["branch"]]
        assert row.pop("straight_um") >= 0
    assert {number: wrong for number in got if (wrong := differing(got[number], expected[number]))} == {}


def test_the_columns_are_these_in_this_order():
    """A frequency's columns follow those of 0 Hz; a fraction of a hertz is written as it is."""
    first = ["sample", "domain", "diameter_um", "branch", "order", "path_um", "straight_um", "lambda_um", "X"]
    assert list(tables_of(trees.cylinder(), Assumptions(hz=HZ)).sample_table) == [
        *first,
        *BY_CASE,
        "charge_to_soma",
        *(name + "_0.5Hz" for name in BY_CASE),
        *(name + "_100Hz" for name in BY_CASE),
    ]


def test_a_stick_on_a_ball_worked_by_hand():
    """From the soma V falls as cosh(L - X)/cosh L (Rall 1959); straight distance counts from the centre."""
    table = tables_of(trees.ball_and_stick(10.0, 600.0, 2.0, 3)).sample_table
    assert table["sample"].tolist() == [1, 2, 3, 4, 5]
    assert table["domain"].tolist() == ["soma", "basal", "basal", "basal", "basal"]
    assert table["diameter_um"].tolist() == [20.0, 2.0, 2.0, 2.0, 2.0]
    assert table["branch"].tolist() == [0, 0, 1, 1, 1]  # the second sample lies on the soma's surface
    assert table["path_um"] == pytest.approx([0, 0, 200, 400, 600])
    assert table["straight_um"][2:] == pytest.approx([210, 410, 610])
    lam = lambda_um(20000, 150, 2.0)
    assert table["lambda_um"][2:] == pytest.approx(lam)
    L = 600 / lam
    V = np.cosh(L - np.array([0, 0, 200, 400, 600]) / lam) / cosh(L)
    assert table["attenuation_from_soma"] == pytest.approx(1 / V)
    assert table["charge_to_soma"] == pytest.approx(V)
    assert table["log_attenuation_from_soma"] == pytest.approx(-np.log(V))
    assert table["R_transfer_MOhm"] == pytest.approx(table["R_in_MOhm"][0] * V)


def test_straight_distance_is_by_air_and_path_along_the_cable():
    swc = "1 1 0 0 0 5 -1\n2 3 35 0 0 1 1\n3 3 35 40 0 1 2\n4 3 5 40 0 1 3\n"
    table = tables_of(swc).sample_table
    assert table["path_um"] == pytest.approx([0, 30, 70, 100])
    assert table["straight_um"] == pytest.approx([0, 35, hypot(35, 40), hypot(5, 40)])


def test_straight_distance_without_a_soma_counts_from_the_root():
    table = tables_of("1 3 10 10 10 1 -1\n2 3 10 13 14 1 1\n").sample_table
    assert table["straight_um"] == pytest.approx([0, 5])


AXON = "1 1 0 0 0 5 -1\n2 3 55 0 0 1 1\n3 2 0 35 0 0.5 1\n4 2 0 65 0 0.5 3\n"


def blank(table):
    """Return sample number -> names of its empty cells."""
    return {
        number: [name for name, value in row.items() if value is None or value != value]
        for number, row in rows(table).items()
    }


def test_an_axon_left_out_has_rows_that_are_empty_after_the_diameter():
    table = tables_of(AXON, Assumptions(axon="left out", hz=HZ)).sample_table
    empty = list(table)[3:]
    assert blank(table) == {1: ["lambda_um"], 2: [], 3: empty, 4: empty}
    assert table["diameter_um"].tolist() == [10.0, 2.0, 1.0, 1.0]
    assert [type(value) for value in table["branch"].tolist()] == [int, int, type(None), type(None)]


def test_an_axon_cut_has_empty_rows_beyond_the_cut():
    table = tables_of(AXON, Assumptions(axon="cut", axon_cut_um=40.0)).sample_table
    assert blank(table) == {1: ["lambda_um"], 2: [], 3: [], 4: list(table)[3:]}
    assert table["path_um"][:3].tolist() == [0.0, 50.0, 30.0]


def test_orphans_have_empty_rows_until_they_are_joined():
    swc = "1 1 0 0 0 5 -1\n2 3 55 0 0 1 1\n3 3 60 0 0 1 -1\n4 3 90 0 0 1 3\n"
    table = tables_of(swc).sample_table
    assert blank(table) == {1: ["lambda_um"], 2: [], 3: list(table)[3:], 4: list(table)[3:]}
    joined = tables_of(swc, Assumptions(orphans="joined", orphan_gap_um=5.0)).sample_table
    assert blank(joined) == {1: ["lambda_um"], 2: [], 3: [], 4: []}
    assert joined["path_um"].tolist() == [0.0, 50.0, 55.0, 85.0]


def test_rows_are_in_file_order_whatever_the_order_of_the_file():
    swc = trees.with_axon()
    order = np.random.default_rng(5).permutation(len(trees.rows_of(swc)))
    shuffled = tables_of(trees.reordered(swc, order)).sample_table
    plain = tables_of(swc).sample_table
    assert shuffled["sample"].tolist() == (order + 1).tolist()
    got, expected = rows(shuffled), rows(plain)
    for number in got:  # branches are numbered in the order they are met
        assert differing(got[number], expected[number]).keys() <= {"branch"}


def test_corrected_diameters_are_shown():
    table = tables_of(AXON, Assumptions(diameter_factor=2.0, diameter_offset_um=0.5)).sample_table
    assert table["diameter_um"].tolist() == [20.5, 4.5, 2.5, 2.5]
