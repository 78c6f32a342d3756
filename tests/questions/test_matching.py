"""Cells by name: with and without folder and ending, several files, none, labels twice."""

from pathlib import Path

import pytest

from morphotone.questions.matching import matched
from morphotone.reading.sites import parse_sites

FILES = [
    (name, Path("data") / name) for name in ("a.swc", "deep/b.swc.gz", "deep/c.SWC", "other/c.swc", "d.e.swc")
]


def match(*cells):
    text = "cell,site,sample\n" + "".join(f"{cell},s{row},1\n" for row, cell in enumerate(cells))
    return matched(parse_sites(text.encode(), "sites.csv").sites, FILES)


@pytest.mark.parametrize(
    ("cell", "file"),
    [
        *((cell, "a.swc") for cell in ("a", "a.swc", "data/a", "data/a.swc")),
        *((cell, "deep/b.swc.gz") for cell in ("b", "b.swc.gz", "deep/b", "data/deep/b.swc.gz")),
        *((cell, "deep/c.SWC") for cell in ("deep/c", "c.SWC")),
        ("other/c", "other/c.swc"),
        ("d.e", "d.e.swc"),
    ],
)
def test_a_cell_is_found_by_its_file_with_or_without_folder_and_ending(cell, file):
    per_file, turned_away = match(cell)
    assert list(per_file) == [file]
    assert turned_away == ()


def test_unknown_and_ambiguous_cells_are_turned_away_and_the_others_go_on():
    per_file, (unknown, ambiguous) = match("a", "nobody", "c")
    assert {file: sites.site.tolist() for file, sites in per_file.items()} == {"a.swc": ["s0"]}
    assert (unknown.line, unknown.cell, unknown.site, unknown.reason) == (3, "nobody", "s1", "cell_unknown")
    assert unknown.sentence.startswith("sites.csv: line 3: read cell 'nobody', expected the name of one of")
    assert ambiguous.reason == "cell_ambiguous"
    assert (
        "can be any of 2 files (deep/c.SWC, other/c.swc), expected one; write the folder"
        in ambiguous.sentence
    )


def test_many_possible_files_are_not_all_listed():
    files = [(f"{n}/x.swc", Path(f"{n}/x.swc")) for n in range(5)]
    sites = parse_sites(b"cell,site,sample\nx,s,1\n", "sites.csv").sites
    (away,) = matched(sites, files)[1]
    assert "any of 5 files (0/x.swc, 1/x.swc, 2/x.swc, …)" in away.sentence


def test_the_whole_name_goes_before_a_part_of_anothers():
    files = [(name, Path(name)) for name in ("x.swc", "deep/x.swc")]
    sites = parse_sites(b"cell,site,sample\nx,s,1\n", "sites.csv").sites
    assert list(matched(sites, files)[0]) == ["x.swc"]


def test_a_label_twice_under_two_spellings_of_a_cell_is_turned_away():
    text = b"cell,site,sample\na,p,1\na.swc,p,1\na,q,1\ndeep/b,p,1\n"
    per_file, turned_away = matched(parse_sites(text, "sites.csv").sites, FILES)
    assert per_file["a.swc"].site.tolist() == ["q"]
    assert per_file["deep/b.swc.gz"].site.tolist() == ["p"]
    assert [(one.line, one.reason) for one in turned_away] == [(2, "label_twice"), (3, "label_twice")]
    assert "expected labels unique in a cell; rename one" in turned_away[0].sentence


def test_files_come_in_their_own_order():
    assert list(match("other/c", "d.e", "a", "b")[0]) == ["a.swc", "deep/b.swc.gz", "other/c.swc", "d.e.swc"]
