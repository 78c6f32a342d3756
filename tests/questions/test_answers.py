"""A batch of files: each answered as if alone, whatever is wrong with its company."""

import hashlib
from dataclasses import replace

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.errors import ReadingError
from morphotone.questions.survey import Request, answers, cell_name, headers
from morphotone.questions.trust import FINDINGS_COLUMNS, findings_table, unfit_sentence
from morphotone.reading.findings import CATALOGUE, Finding
from morphotone.reading.reconstruction import reconstruct
from morphotone.reading.vetting import Vetting
from tests import trees
from tests.questions.walking import tables_of

REQUEST = Request(Assumptions(hz=(100.0,)), samples=True)
BUSHY = trees.irregular(60, 4, soma=True)
CONSTANT = trees.rall_neuron(1, 5)  # many samples, diameters by a rule
BRANCHLESS = "1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n"
BROKEN = "1 1 0 0 0 5 -1\n2 3 50 0 0 x 1\n"
#: Coordinates in nanometres: wider than any neuron with steps longer than any tracer makes.
ABSURD = trees.scaled(BUSHY, 1000.0, 1000.0)


def content(swc):
    return swc.encode()


FILES = {
    "a.swc": content(trees.ball_and_stick()),
    "deep/b.swc": content(BUSHY),
    "broken.swc": content(BROKEN),
    "c.SWC": content(trees.with_axon()),
    "empty.swc": b"",
    "gone.swc": ReadingError("gone.swc: cannot be opened (No such file)", "unreadable"),
    "inside.swc": content(BRANCHLESS),
    "long.swc": content(trees.cylinder(20_000.0, 4.0, 300)),
    "nm.swc": content(ABSURD),
    "outline.swc": content(trees.soma_outline()),
}


def same(one, other):
    """Tell whether two answers agree in every bit; NaN is like NaN."""
    for name in ("name", "sha256", "samples", "reason", "sentence"):
        if getattr(one, name) != getattr(other, name):
            return False
    for name in ("findings", "cell", "branches", "by_sample"):
        left, right = getattr(one, name), getattr(other, name)
        if (left is None) != (right is None) or list(left or ()) != list(right or ()):
            return False
        for column in left or ():
            a, b = np.asarray(left[column], object), np.asarray(right[column], object)
            if a.shape != b.shape or not all(
                x == y or (x != x and y != y) for x, y in zip(a.flat, b.flat, strict=True)
            ):
                return False
    return True


@pytest.fixture(scope="module")
def together():
    return answers(list(FILES.items()), replace(REQUEST, keep_unfit=True))


def test_company_changes_nothing_at_all(together):
    for (name, each), among_others in zip(FILES.items(), together, strict=True):
        (alone,) = answers([(name, each)], replace(REQUEST, keep_unfit=True))
        assert same(alone, among_others), name


@pytest.mark.parametrize("key", range(4))
def test_the_order_is_kept_and_changes_nothing(together, key):
    files = list(FILES.items())
    order = np.random.default_rng(key).permutation(len(files))
    shuffled = answers([files[k] for k in order], replace(REQUEST, keep_unfit=True))
    assert [answer.name for answer in shuffled] == [files[k][0] for k in order]
    assert all(same(answer, together[k]) for answer, k in zip(shuffled, order, strict=True))


def test_a_bad_file_harms_nobody(together):
    turned_away = {answer.name: answer.reason for answer in together if answer.reason}
    assert turned_away == {"broken.swc": "not_a_number", "empty.swc": "empty", "gone.swc": "unreadable"}
    for answer in together:
        assert (answer.cell is None) == (answer.branches is None) == (answer.by_sample is None)
        assert (answer.cell is None) == (answer.name in turned_away)


def test_who_is_turned_away_has_hash_sentence_and_what_was_counted(together):
    by_name = {answer.name: answer for answer in together}
    assert by_name["broken.swc"].sha256 == hashlib.sha256(FILES["broken.swc"]).hexdigest()
    assert by_name["broken.swc"].sentence.startswith("broken.swc: line 2: read '2 3 50 0 0 x 1', expected")
    assert (by_name["broken.swc"].samples, by_name["gone.swc"].samples) == (0, 0)
    assert by_name["gone.swc"].sha256 == ""
    assert by_name["gone.swc"].sentence == "gone.swc: cannot be opened (No such file)"


def test_tables_are_those_of_the_cell_alone(together):
    by_name = {answer.name: answer for answer in together}
    alone = tables_of(BUSHY, REQUEST.assumptions)
    assert (
        by_name["deep/b.swc"].branches["R_in_end_MOhm"].tolist()
        == alone.branch_table["R_in_end_MOhm"].tolist()
    )
    assert by_name["deep/b.swc"].by_sample["X"].tolist() == alone.sample_table["X"].tolist()
    assert by_name["deep/b.swc"].cell["R_in_MOhm_100Hz"] == alone.cell_row["R_in_MOhm_100Hz"]
    assert by_name["deep/b.swc"].cell["sha256"] == hashlib.sha256(BUSHY.encode()).hexdigest()


def test_no_files_give_no_answers():
    assert answers([], REQUEST) == []


def test_only_bad_files_give_their_reasons():
    given = answers([("empty.swc", b""), ("broken.swc", FILES["broken.swc"])], REQUEST)
    assert [answer.reason for answer in given] == ["empty", "not_a_number"]


def test_an_unfit_file_is_turned_away_with_its_findings():
    (answer,) = answers([("nm.swc", content(ABSURD))], REQUEST)
    assert (answer.reason, answer.cell, answer.samples) == ("unfit", None, 60)
    assert "unit_implausible" in answer.findings["code"]
    assert set(answer.findings["grade"]) == {"unfit"}
    assert answer.sentence.startswith("nm.swc: unfit: ")
    assert "(unit_implausible)" in answer.sentence
    assert answer.sentence.endswith("--keep-unfit.")


def test_an_unfit_file_is_kept_and_flagged_on_request():
    (answer,) = answers([("nm.swc", content(ABSURD))], replace(REQUEST, keep_unfit=True))
    assert (answer.reason, answer.sentence) == ("", "")
    assert answer.cell["grade"] == "unfit"
    assert answer.cell["findings_unfit"] == 1


def test_the_unit_settles_what_was_absurd():
    request = Request(Assumptions(unit_um=0.001))
    in_um, in_nm = (answers([("x.swc", content(swc))], request)[0] for swc in (ABSURD, ABSURD))
    (plain,) = answers([("x.swc", content(BUSHY))], Request(Assumptions()))
    assert in_nm.reason == plain.reason == ""
    assert in_nm.cell["R_in_MOhm"] == pytest.approx(plain.cell["R_in_MOhm"])
    assert in_nm.cell["unit_um"] == 0.001
    assert in_um.by_sample is None  # not asked for


MENDED = "1 1 0 0 0 5 -1\n" + "".join(
    f"{k} 3 {20 * k} {k % 3} {k % 5} {0 if k == 40 else 0.5 + 0.01 * k} {k - 1}\n" for k in range(2, 150)
)


def test_radii_are_mended_before_the_cell_is_solved_and_the_mending_is_on_record():
    (answer,) = answers([("m.swc", content(MENDED))], REQUEST)
    assert answer.reason == ""
    codes = answer.findings["code"]
    assert codes.index("radius_zero") < codes.index("radius_mended")
    assert set(answer.findings["grade"]) == {answer.cell["grade"]}
    counts = [answer.cell[f"findings_{severity}"] for severity in ("note", "doubtful", "unfit")]
    assert counts == [answer.findings["severity"].count(each) for each in ("note", "doubtful", "unfit")]
    # The nearest positive radius toward the root: that of sample 39.
    assert answer.by_sample["diameter_um"][39] == answer.by_sample["diameter_um"][38] == 2 * (0.5 + 0.39)


def test_what_cannot_be_mended_is_turned_away_and_still_has_its_findings():
    swc = "1 1 0 0 0 5 -1\n2 3 50 0 0 0 1\n3 3 90 0 0 0 2\n"
    (answer,) = answers([("zero.swc", content(swc))], replace(REQUEST, keep_unfit=True))
    assert (answer.reason, answer.samples) == ("radius_unusable", 3)
    assert "radius_zero" in answer.findings["code"]


@pytest.mark.parametrize(
    ("assumptions", "swc", "reason"),
    [
        (Assumptions(diameter_offset_um=-2.5), trees.ball_and_stick(), "radius_absurd"),
        (
            Assumptions(orphans="refused"),
            trees.soma_chain() + "12 3 90 0 0 1 -1\n13 3 95 0 0 1 12\n",
            "orphans_refused",
        ),
        (Assumptions(axon="left out"), "1 2 0 0 0 1 -1\n2 2 50 0 0 1 1\n", "nothing_left"),
    ],
)
def test_a_file_that_the_assumptions_leave_nothing_of_is_turned_away(assumptions, swc, reason):
    (answer, other) = answers(
        [("x.swc", content(swc)), ("y.swc", content(trees.soma_outline()))], Request(assumptions)
    )
    assert answer.reason == reason
    assert answer.sentence.startswith("x.swc: ")
    assert (other.reason == "") == (reason != "radius_absurd")


def test_headers_are_the_columns_that_a_cell_gets(together):
    named = headers(REQUEST)
    analysed = [answer for answer in together if answer.cell]
    assert len(analysed) == 7
    for answer in analysed:
        assert list(answer.cell) == named["cells"]
        assert list(answer.branches) == named["branches"]
        assert list(answer.by_sample) == named["samples"]
        assert list(answer.findings) == named["findings"]


@pytest.mark.parametrize(
    "assumptions",
    [
        Assumptions(axon="left out", orphans="refused"),
        Assumptions(soma_rule="none"),
        Assumptions(domains={1: Membrane(1000.0), 3: Membrane(2000.0)}),
        Assumptions(unit_um=1e-6),
        Assumptions(diameter_offset_um=-5.0),
    ],
)
def test_headers_can_be_had_under_any_assumptions(assumptions):
    named = headers(Request(assumptions, samples=True))
    assert set(named) == {"cells", "branches", "samples", "findings"}


def test_headers_carry_the_frequencies():
    named = headers(Request(Assumptions(hz=(0.5, 100.0, 1250.75)), samples=True))
    assert [name for name in named["cells"] if name.startswith("R_in")] == [
        "R_in_MOhm",
        "R_in_MOhm_0.5Hz",
        "R_in_MOhm_100Hz",
        "R_in_MOhm_1250.75Hz",
    ]
    assert "attenuation_to_soma_end_0.5Hz" in named["branches"]
    assert "log_attenuation_from_soma_1250.75Hz" in named["samples"]
    assert "samples" not in headers(Request(Assumptions()))


def test_cells_are_named_by_their_path_without_the_ending():
    names = {
        "a.swc": "a",
        "in/b.SWC.GZ": "in/b",
        "c.swc.gz": "c",
        "d.swc.txt": "d.swc.txt",
        "e.swc.swc": "e.swc",
    }
    assert {name: cell_name(name) for name in names} == names


FINDINGS = (
    Finding("columns_extra", "Seen once.", 7, 3, 12),
    Finding("flat", "Without a place."),
    Finding("radius_zero", "Half of them.", 9, 4, 50, "unfit"),
)


def test_findings_are_a_row_each_with_their_effect():
    table = findings_table(FINDINGS, "unfit")
    assert tuple(table) == FINDINGS_COLUMNS
    assert table == {
        "grade": ["unfit"] * 3,
        "code": ["columns_extra", "flat", "radius_zero"],
        "severity": ["note", CATALOGUE["flat"].severity, "unfit"],
        "line": [7, None, 9],
        "sample": [3, None, 4],
        "count": [12, 1, 50],
        "sentence": ["Seen once.", "Without a place.", "Half of them."],
        "effect": [CATALOGUE[f.code].effect for f in FINDINGS],
    }


def test_no_findings_are_an_empty_table_with_its_columns():
    assert findings_table((), "sound") == {name: [] for name in FINDINGS_COLUMNS}


def test_the_sentence_of_an_unfit_file_gives_only_what_made_it_unfit():
    sentence = unfit_sentence("x.swc", Vetting(FINDINGS, "unfit"))
    assert sentence == (
        "x.swc: unfit: Half of them. (radius_zero) Mend the file, settle it in the assumptions, or analyse "
        "it all the same with --keep-unfit."
    )


def test_the_name_of_a_file_never_reaches_the_arithmetic():
    """A name that looks like a format, a path or a number is a name."""
    for name in ("%s{0}.swc", "../up.swc", "1.swc", "NaN.swc"):
        (answer,) = answers([(name, content(BRANCHLESS))], REQUEST)
        assert (answer.name, answer.reason) == (name, "")
    assert reconstruct(content(BRANCHLESS), file="NaN.swc", cell="NaN").cell == "NaN"
