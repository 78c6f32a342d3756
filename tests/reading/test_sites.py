"""A file of sites: what is read, how rows are turned away, and when the whole file is."""

import hashlib

import numpy as np
import pytest

from morphotone.errors import ReadingError
from morphotone.reading.sites import parse_sites, read_sites

HEADER = (
    "cell,site,sample,fraction,x_um,y_um,z_um,branch,along_um,"
    "g_peak_nS,driving_force_mV,rise_ms,decay_ms,group"
)
GOOD = "rook,s1,12,0.25,,,,,,0.5,70,0.4,4,north"


def parse(*rows, header=HEADER, end="\n"):
    return parse_sites(end.join([header, *rows, ""]).encode(), "sites.csv")


# ---------------------------------------------------------------- what is read


def test_three_ways_to_give_a_place():
    file = parse(GOOD, "rook,s2,,,1.5,-2,3e1,,,,,,,", "rook.swc,s3,,,,,,4,17.25,,,,,")
    sites = file.sites
    assert file.rows_in == len(sites) == 3
    assert file.turned_away == ()
    assert sites.file == "sites.csv"
    assert sites.line.tolist() == [2, 3, 4]
    assert sites.cell.tolist() == ["rook", "rook", "rook.swc"]
    assert sites.site.tolist() == ["s1", "s2", "s3"]
    assert sites.group.tolist() == ["north", "", ""]
    assert sites.way.tolist() == ["sample", "space", "branch"]
    assert sites.sample.tolist() == [12, -1, -1]
    assert sites.fraction.tolist() == [0.25, 0.0, 0.0]
    np.testing.assert_array_equal(sites.position, [[np.nan] * 3, [1.5, -2, 30], [np.nan] * 3])
    assert sites.branch.tolist() == [-1, -1, 4]
    np.testing.assert_array_equal(sites.along_um, [np.nan, np.nan, 17.25])
    np.testing.assert_array_equal(sites.g_peak_nS, [0.5, np.nan, np.nan])
    np.testing.assert_array_equal(sites.driving_force_mV, [70, np.nan, np.nan])
    np.testing.assert_array_equal(sites.rise_ms, [0.4, np.nan, np.nan])
    np.testing.assert_array_equal(sites.decay_ms, [4, np.nan, np.nan])
    assert (sites.sample.dtype, sites.branch.dtype, sites.line.dtype) == (np.int64,) * 3


def test_columns_in_any_order_and_only_those_needed():
    file = parse("3,b,rook", header="sample,site,cell")
    assert (file.sites.cell[0], file.sites.site[0], file.sites.sample[0]) == ("rook", "b", 3)
    assert file.sites.group[0] == ""
    assert np.isnan(file.sites.g_peak_nS[0])


def test_further_columns_keep_their_text():
    file = parse('rook,a,1," 0010 ",TRUE', "rook,b,2,NA,1e5", header="cell,site,sample,note,drug")
    assert list(file.sites.others) == ["note", "drug"]
    assert file.sites.others["note"].tolist() == [" 0010 ", "NA"]
    assert file.sites.others["drug"].tolist() == ["TRUE", "1e5"]


def test_labels_and_names_that_look_like_something_else_stay_text():
    file = parse("007,1e3,1", "NA,nan,2", "True,,3", header="cell,site,sample")
    assert file.sites.cell.tolist() == ["007", "NA"]
    assert file.sites.site.tolist() == ["1e3", "nan"]
    assert [away.reason for away in file.turned_away] == ["site_missing"]


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_line_ends_byte_order_mark_empty_lines_and_quotes(end):
    rows = ["", GOOD, ",,,,,,,,,,,,,", '"rook, left","say ""s""",3,,,,,,,,,,,', "   ", "rook,s4,4,,,,,,,,,,,"]
    data = end.join([HEADER, *rows]).encode("utf-8-sig")
    file = parse_sites(data, "sites.csv")
    assert file.sites.line.tolist() == [3, 5, 7]
    assert file.sites.cell.tolist() == ["rook", "rook, left", "rook"]
    assert file.sites.site.tolist() == ["s1", 'say "s"', "s4"]
    assert file.rows_in == 3
    assert file.sha256 == hashlib.sha256(data).hexdigest()


def test_lines_are_counted_through_quoted_line_breaks():
    file = parse('rook,a,1,"two\nlines"', "rook,b,2,x", "rook,c,z,y", header="cell,site,sample,note")
    assert file.sites.line.tolist() == [2, 4]
    assert file.sites.others["note"].tolist() == ["two\nlines", "x"]
    assert file.turned_away[0].line == 5


def test_white_space_around_known_fields_and_names_is_no_part_of_them():
    file = parse(" rook , a ,\t5 , 0.5 ", header=" cell, site ,sample,fraction")
    assert (file.sites.cell[0], file.sites.site[0]) == ("rook", "a")
    assert (file.sites.sample[0], file.sites.fraction[0]) == (5, 0.5)


def test_short_rows_end_in_empty_fields_and_empty_fields_may_follow_the_last():
    file = parse("rook,a,5", "rook,b,6,,,,,,,,,,,,,", header=HEADER + ",,")
    assert file.sites.sample.tolist() == [5, 6]
    assert file.sites.others == {}


def test_a_header_alone_has_no_rows():
    file = parse()
    assert (len(file.sites), file.rows_in, file.turned_away) == (0, 0, ())


def test_rows_can_be_taken_apart():
    sites = parse(*(f"rook,s{k},{k},{k}" for k in range(5)), header="cell,site,sample,note").sites
    some = sites.at(np.array([3, 1]))
    assert some.site.tolist() == ["s3", "s1"]
    assert some.others["note"].tolist() == ["3", "1"]
    assert len(sites.at(sites.sample > 2)) == 2


def test_whole_numbers_may_be_written_as_a_spreadsheet_does():
    assert parse("rook,a,12.0", "rook,b,1.3e1", header="cell,site,sample").sites.sample.tolist() == [12, 13]


def test_reading_from_disk_gives_the_same(tmp_path):
    path = tmp_path / "sites.csv"
    path.write_text(f"{HEADER}\n{GOOD}\n", encoding="utf-8")
    file = read_sites(path)
    assert file.sites.file == str(path)
    assert file.sites.sample.tolist() == [12]


# ---------------------------------------------------------------- rows turned away


BAD = {
    # what is wrong: (fields by name, reason, part of the sentence)
    "no cell": ({"cell": ""}, "cell_missing", "read no cell, expected the name of a reconstruction's file"),
    "no label": ({"site": " "}, "site_missing", "read no site, expected a label"),
    "no place": ({"sample": ""}, "place_missing", "read no place, expected sample with or without fraction"),
    "two ways": (
        {"x_um": "1", "y_um": "2", "z_um": "3"},
        "place_several",
        "read sample, x_um, y_um and z_um, expected one way only",
    ),
    "three ways, none whole": (
        {"x_um": "1", "along_um": "3"},
        "place_several",
        "read sample, x_um and along_um",
    ),
    "fraction alone": (
        {"sample": "", "fraction": "0.5"},
        "place_incomplete",
        "read no sample, expected one beside fraction",
    ),
    "no z": (
        {"sample": "", "x_um": "1", "y_um": "2"},
        "place_incomplete",
        "read no z_um, expected one beside x_um and y_um",
    ),
    "branch alone": (
        {"sample": "", "branch": "2"},
        "place_incomplete",
        "read no along_um, expected one beside branch",
    ),
    "path alone": (
        {"sample": "", "along_um": "2"},
        "place_incomplete",
        "read no branch, expected one beside along_um",
    ),
    "NaN": ({"fraction": "NaN"}, "not_finite", "read fraction 'NaN', expected a number from 0"),
    "infinite": (
        {"driving_force_mV": "-inf"},
        "not_finite",
        "read driving_force_mV '-inf', expected a voltage",
    ),
    "overflow": ({"g_peak_nS": "1e999"}, "not_finite", "read g_peak_nS '1e999', expected a conductance"),
    "a word": ({"sample": "tip"}, "not_a_number", "read sample 'tip', expected a sample's number"),
    "NA": ({"g_peak_nS": "NA"}, "not_a_number", "read g_peak_nS 'NA'"),
    "decimal comma": ({"fraction": '"0,5"'}, "not_a_number", "read fraction '0,5'"),
    "digits grouped": ({"sample": "1_000"}, "not_a_number", "read sample '1_000'"),
    "other digits": ({"sample": "٣"}, "not_a_number", "read sample '٣'"),
    "half a sample": (
        {"sample": "1.5"},
        "out_of_range",
        "read sample '1.5', expected a sample's number in the file, whole",
    ),
    "negative sample": ({"sample": "-1"}, "out_of_range", "whole and not negative"),
    "fraction above 1": (
        {"fraction": "1.0001"},
        "out_of_range",
        "a number from 0 (at the sample) to 1 (at its parent)",
    ),
    "fraction below 0": ({"fraction": "-0.1"}, "out_of_range", "read fraction '-0.1'"),
    "branch 0": ({"sample": "", "branch": "0", "along_um": "1"}, "out_of_range", "whole and 1 or more"),
    "negative path": (
        {"sample": "", "branch": "1", "along_um": "-1"},
        "out_of_range",
        "a path from the branch's start",
    ),
    "far from any animal": (
        {"sample": "", "x_um": "1e8", "y_um": "0", "z_um": "0"},
        "out_of_range",
        "read x_um '1e8', expected a length in um within",
    ),
    "negative conductance": ({"g_peak_nS": "-2"}, "out_of_range", "a conductance in nS, 0 or more"),
    "no time": ({"rise_ms": "0", "decay_ms": "1"}, "out_of_range", "read rise_ms '0', expected a time"),
    "rise alone": (
        {"rise_ms": "1"},
        "time_missing",
        "read rise_ms without decay_ms, expected both or neither",
    ),
    "decay alone": ({"decay_ms": "1"}, "time_missing", "read decay_ms without rise_ms"),
    "times exchanged": (
        {"rise_ms": "5", "decay_ms": "1"},
        "times_exchanged",
        "read rise_ms 5 with decay_ms 1, expected rise_ms no longer than decay_ms",
    ),
}


@pytest.mark.parametrize("wrong", BAD)
def test_a_bad_row_is_turned_away_and_the_others_go_on(wrong):
    fields, reason, sentence = BAD[wrong]
    row = {"cell": "rook", "site": "bad", "sample": "7"} | fields
    file = parse(GOOD, ",".join(row.get(name, "") for name in HEADER.split(",")), "rook,s3,8")
    assert file.sites.site.tolist() == ["s1", "s3"]
    assert file.sites.line.tolist() == [2, 4]
    (away,) = file.turned_away
    assert (away.line, away.reason) == (3, reason)
    assert (away.cell, away.site) == (row["cell"].strip(), row["site"].strip())
    assert away.sentence.startswith("sites.csv: line 3: read ")
    assert sentence in away.sentence
    assert ";" in away.sentence, "the way out"


def test_a_row_with_more_fields_than_the_header_is_turned_away():
    file = parse("rook,a,1,x", "rook,b,2", header="cell,site,sample")
    assert file.turned_away[0].reason == "fields_extra"
    assert "read more than 3 fields, expected 3 as in the header" in file.turned_away[0].sentence
    assert file.sites.site.tolist() == ["b"]


def test_the_first_thing_wrong_is_the_reason():
    (away,) = parse(",a,tip,2", header="cell,site,sample,fraction").turned_away
    assert away.reason == "cell_missing"


def test_every_row_is_a_site_or_turned_away():
    rows = [GOOD, "rook,s2", "rook,s3,x", "", "rook,s4,5", ",s5,6"]
    file = parse(*rows)
    assert file.rows_in == 5 == len(file.sites) + len(file.turned_away)
    assert sorted([*file.sites.line.tolist(), *(away.line for away in file.turned_away)]) == [2, 3, 4, 6, 7]


# ---------------------------------------------------------------- files turned away


@pytest.mark.parametrize(
    ("data", "reason", "message"),
    [
        (b"", "empty", "sites.csv: read no line with text, expected a header and rows"),
        (b"\n\n , ,\n", "empty", "read no line with text"),
        (
            b"site,sample\na,1\n",
            "columns_missing",
            "line 1: read the columns 'site,sample', expected cell, site, and",
        ),
        (b"cell,site,x_um,y_um\n", "columns_missing", "or x_um, y_um and z_um, or branch and along_um"),
        (b"cell,site,branch\n", "columns_missing", "or branch and along_um, separated by commas"),
        (b"\n\nrook,a,1\n", "columns_missing", "line 3: read the columns 'rook,a,1'"),
        (b"Cell,Site,Sample\n", "columns_missing", "read the columns 'Cell,Site,Sample'"),
        (b"cell;site;sample\nrook;a;1\n", "columns_missing", "read the columns 'cell;site;sample'"),
        (b"cell,site,sample,note,note\n", "columns_twice", "rename the column note"),
        (b"cell,site,sample,sample\n", "columns_twice", "rename the column sample"),
        (b"cell,site,,sample\n", "columns_twice", "rename the column without a name"),
        (
            b'cell,site,sample\nrook,a,1\nrook,"b,2\nrook,c,3\n',
            "quotes",
            "line 3: read fields that cannot be told",
        ),
        (b'cell,site,sample\nrook,"b"c,2\n', "quotes", "line 2: .*expected quotation marks in pairs"),
        (
            b"cell,site,sample\nrook,\xb5,2\n",
            "not_utf8",
            "line 2: read the byte 0xb5, expected text in UTF-8",
        ),
    ],
)
def test_a_file_that_is_no_such_table(data, reason, message):
    with pytest.raises(ReadingError, match=message) as caught:
        parse_sites(data, "sites.csv")
    assert caught.value.reason == reason


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(ReadingError, match="could not be read: no such file"):
        read_sites(tmp_path / "none.csv")
