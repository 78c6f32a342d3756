"""Bytes to arrays: what is read without complaint, what is recorded, what is turned away and how."""

import gzip
import os
import re

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from morphotone.errors import ReadingError
from morphotone.reading import swc
from morphotone.reading.swc import parse, read_bytes

# A small cell, of numbers that binary fractions hold exactly.
ROWS = [
    (1, 1, 0.0, 0.0, 0.0, 5.0, -1),
    (2, 3, 0.0, 10.5, 0.0, 0.5, 1),
    (3, 3, 1.25, 20.0, -3.0, 0.25, 2),
    (4, 4, -1.0, -12.0, 2.0, 0.75, 1),
]
LINES = [" ".join(f"{value:g}" for value in row) for row in ROWS]
PLAIN = "\n".join(LINES).encode() + b"\n"


def assert_is_the_cell(table, lines=(1, 2, 3, 4)):
    np.testing.assert_array_equal(table.number, [1, 2, 3, 4])
    np.testing.assert_array_equal(table.kind, [1, 3, 3, 4])
    np.testing.assert_array_equal(table.position, [row[2:5] for row in ROWS])
    np.testing.assert_array_equal(table.radius, [5.0, 0.5, 0.25, 0.75])
    np.testing.assert_array_equal(table.parent, [-1, 0, 1, 0])
    np.testing.assert_array_equal(table.line, lines)


TOLERATED = {
    "LF": PLAIN,
    "CR LF": PLAIN.replace(b"\n", b"\r\n"),
    "CR": PLAIN.replace(b"\n", b"\r"),
    "mixed line ends": b"%b\r%b\r\n%b\n%b\r\n" % tuple(line.encode() for line in LINES),
    "no final newline": PLAIN.rstrip(),
    "tabs": PLAIN.replace(b" ", b"\t"),
    "several spaces": PLAIN.replace(b" ", b"   "),
    "one padded line": PLAIN.replace(b"3 3 1.25", b"  3 3   1.25"),
    "leading and trailing padding": "".join(f"  {line} \t \n" for line in LINES).encode(),
    "byte-order mark": b"\xef\xbb\xbf" + PLAIN,
    "UTF-16": PLAIN.decode().encode("utf-16"),
    "DOS end of file": PLAIN + b"\x1a",
    "whole numbers with a point": "\n".join(" ".join(f"{v:.3f}" for v in row) for row in ROWS).encode(),
    "exponents": "\n".join(" ".join(f"{v:+.6E}" for v in row) for row in ROWS).encode(),
    "blank lines at the end": PLAIN + b"\n  \n\t\n",
    "comment after data": PLAIN.replace(b"0.5 1\n", b"0.5 1 # bent here\n"),
    "comment touching data": PLAIN.replace(b"0.5 1\n", b"0.5 1#bent here\n"),
    "any byte in a comment": PLAIN.replace(b"0.5 1\n", b"0.5 1 #" + bytes(range(14, 256)) + b"\x00\n"),
    "gzip": gzip.compress(PLAIN),
    "gzip of two members": gzip.compress(PLAIN[:20]) + gzip.compress(PLAIN[20:]),
}


@pytest.mark.parametrize("data", TOLERATED.values(), ids=TOLERATED.keys())
def test_is_read_without_complaint(data):
    table = parse(data, "cell.swc")
    assert_is_the_cell(table)
    assert table.findings == ()


@pytest.mark.parametrize("data", TOLERATED.values(), ids=TOLERATED.keys())
def test_no_tolerated_layout_needs_the_slow_look(data, monkeypatch):
    monkeypatch.setattr(swc, "diagnose", None)
    assert_is_the_cell(parse(data, "cell.swc"))


LAYOUTS = {
    "header": (["# made by hand", "#", *LINES], (3, 4, 5, 6)),
    "blank line in the header": (["# a", "", "  ", "# b", *LINES], (5, 6, 7, 8)),
    "padded comments": (["  # a", *LINES[:2], "\t# b", *LINES[2:]], (2, 3, 5, 6)),
    "comments among the samples": ([LINES[0], "# a", "# b", *LINES[1:], "# c"], (1, 4, 5, 6)),
    "blank lines among the samples": ([*LINES[:3], "", "  ", "", LINES[3]], (1, 2, 3, 7)),
}


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize(("lines", "places"), LAYOUTS.values(), ids=LAYOUTS.keys())
def test_every_sample_knows_its_line(lines, places, end):
    assert_is_the_cell(parse(end.join(lines).encode(), "cell.swc"), places)


def test_comments_are_kept_in_file_order_and_decoded():
    data = "# scale µm\n".encode() + PLAIN + b"# shrinkage \xb5\n"
    assert parse(data, "cell.swc").comments == ("scale µm", "shrinkage µ")


@pytest.mark.parametrize(
    ("numbers", "parents"),
    [
        ([0, 1, 2, 3], [-1, 0, 1, 0]),
        ([10, 20, 35, 70], [-1, 10, 20, 10]),
        ([1, 2, 3, 4], [-2, 1, 2, 1]),
        ([9, 4, 7, 1], [-1, 9, 4, 9]),
    ],
    ids=["from 0", "skipping", "another negative root marker", "unordered"],
)
def test_sample_numbers_may_be_any(numbers, parents):
    rows = [[n, *row[1:6], p] for n, row, p in zip(numbers, ROWS, parents, strict=True)]
    table = parse("\n".join(" ".join(map(str, row)) for row in rows).encode(), "cell.swc")
    np.testing.assert_array_equal(table.number, numbers)
    np.testing.assert_array_equal(table.parent, [-1, 0, 1, 0])


def test_children_may_stand_before_their_parents():
    table = parse("\n".join(reversed(LINES)).encode(), "cell.swc")
    np.testing.assert_array_equal(table.number, [4, 3, 2, 1])
    np.testing.assert_array_equal(table.parent, [3, 2, 3, -1])


@pytest.mark.parametrize("separator", [",", ", ", ";", " ; ", ",\t"])
def test_odd_separators_are_read_and_recorded(separator):
    data = "# saved as a table\n" + PLAIN.decode().replace(" ", separator)
    table = parse(data.encode(), "cell.swc")
    assert_is_the_cell(table, (2, 3, 4, 5))
    (finding,) = table.findings
    assert (finding.code, finding.line, finding.sample, finding.count) == ("separator_odd", 2, 1, 4)


def test_a_comma_at_the_end_of_a_line_is_no_eighth_column():
    table = parse(PLAIN.replace(b" ", b",").replace(b"\n", b",\n"), "cell.swc")
    assert [finding.code for finding in table.findings] == ["separator_odd"]


@pytest.mark.parametrize("places", [[0, 1, 2, 3], [2], [0]])
def test_columns_after_the_seventh_are_recorded_and_left_aside(places):
    lines = [line + " 7 abc" if i in places else line for i, line in enumerate(LINES)]
    table = parse("\n".join(lines).encode(), "cell.swc")
    assert_is_the_cell(table)
    (finding,) = table.findings
    assert (finding.code, finding.line, finding.count) == ("columns_extra", places[0] + 1, len(places))


def cell_with(line, place=3):
    """The small cell with one more line."""
    return "\n".join([*LINES[: place - 1], line, *LINES[place - 1 :]]).encode()


REFUSED = {
    "six columns": ("5 3 0 0 0 1", "fields_missing", "seven columns"),
    "titles": ("n type x y z r parent", "not_a_number", "as sample number, or # in front of a comment"),
    "remark": ("bent here", "fields_missing", "parent), or # in front of a comment"),
    "word": ("5 3 0 zero 0 1 1", "not_a_number", "a number as y"),
    "underscore": ("5 3 0 1_0 0 1 1", "not_a_number", "a number as y"),
    "hexadecimal": ("5 3 0 0x1F 0 1 1", "not_a_number", "a number as y"),
    "truth value": ("5 3 0 True 0 1 1", "not_a_number", "a number as y"),
    "decimal comma": ("5 3 0,5 1 0 1 1", "not_a_number", "a number as x, with a decimal point"),
    "decimal commas between semicolons": ("5;3;0,5;1,5;0;1;1", "not_a_number", "a number as x, with a dec"),
    "no-break spaces": ("5 3 0 0 0 1\u00a01 1", "not_a_number", "a number as radius"),
    "nothing between commas": ("5,3,,0,0,1,1", "not_a_number", "a number as x"),
    "NA coordinate": ("5 3 0 0 NA 1 1", "not_finite", "a finite z"),
    "NA radius": ("5 3 0 0 0 NA 1", "not_finite", "a finite radius"),
    "NaN": ("5 3 0 0 0 nan 1", "not_finite", "a finite radius"),
    "infinity": ("5 3 -inf 0 0 1 1", "not_finite", "a finite x"),
    "overflow": ("5 3 0 1e999 0 1 1", "not_finite", "a finite y below 1e+100"),
    "length whose square overflows": ("5 3 0 1e200 0 1 1", "not_finite", "a finite y below 1e+100"),
    "number not whole": ("5.5 3 0 0 0 1 1", "not_whole", "a whole number as sample number"),
    "type not whole": ("5 3.5 0 0 0 1 1", "not_whole", "a whole number as type"),
    "parent not whole": ("5 3 0 0 0 1 1.5", "not_whole", "a whole number as parent"),
    "parent NA": ("5 3 0 0 0 1 NA", "not_whole", "a whole number as parent"),
    "number too large": ("9007199254740993 3 0 0 0 1 1", "not_whole", "below 2^53"),
    "negative number": ("-5 3 0 0 0 1 1", "not_whole", "a sample number of 0 or more"),
    "number twice": ("2 3 9 9 9 1 1", "number_repeated", "of its own (2 stands on line 2 already)"),
    "absent parent": ("5 3 0 0 0 1 77", "parent_absent", "sample 77 in the file, or parent -1"),
    "own parent": ("5 3 0 0 0 1 5", "parent_self", "another sample as parent"),
}


@pytest.mark.parametrize(("line", "reason", "expected"), REFUSED.values(), ids=REFUSED.keys())
def test_a_fault_is_named_with_line_text_and_expectation(line, reason, expected):
    sentence = f"cells/a.swc: line 3: read {line!r}, expected "
    with pytest.raises(ReadingError, match=f"^{re.escape(sentence)}.*{re.escape(expected)}") as caught:
        parse(cell_with(line), "cells/a.swc")
    assert caught.value.reason == reason
    assert [(fault.line, fault.read) for fault in caught.value.faults] == [(3, line)]
    assert "\n" not in str(caught.value)


def test_a_column_of_truth_values_is_no_column_of_ones():
    data = b"1 1 0 0 0 True -1\n2 3 0 0 9 True 1\n"
    with pytest.raises(ReadingError, match=r"line 1: .* a number as radius"):
        parse(data, "a.swc")


def test_the_text_read_is_quoted_without_padding_and_not_whole_if_long():
    with pytest.raises(ReadingError, match=r"read '5 3 0 0 0 x+…', expected seven columns"):
        parse(cell_with("  5\t3 0 0  0 " + "x" * 500), "a.swc")


def test_many_faults_show_their_lines_and_the_total():
    lines = [LINES[0]] + [f"{i} 3 0 0 {i} NA 1" for i in range(2, 32)]
    with pytest.raises(
        ReadingError, match=r"line 2: .*\(30 such lines, the first 20: 2, 3, .*, 21\)$"
    ) as caught:
        parse("\n".join(lines).encode(), "a.swc")
    assert [fault.line for fault in caught.value.faults] == list(range(2, 22))


def test_faults_of_several_kinds_come_in_line_order_and_the_first_gives_the_reason():
    lines = [*LINES, "2 3 0 0 9 1 1", "6 3 0 0 NA 1 1", "7 3 0 0 1", "8 3 0 0 0 1 8"]
    with pytest.raises(ReadingError, match=r"line 5: .* \(4 faulty lines: 5, 6, 7, 8\)$") as caught:
        parse("\n".join(lines).encode(), "a.swc")
    assert caught.value.reason == "number_repeated"


def test_children_of_an_unreadable_line_are_not_called_orphans():
    lines = [*LINES, "five 3 0 0 9 1 1", "6 3 0 0 12 1 5"]
    with pytest.raises(ReadingError, match=r"line 5: .* a number as sample number; ") as caught:
        parse("\n".join(lines).encode(), "a.swc")
    assert len(caught.value.faults) == 1


@pytest.mark.parametrize(
    ("data", "found"),
    [(b"", "an empty file"), (b"\n \r\n", "only comments"), (b"# a\n# b", "only comments")],
)
def test_a_text_without_samples_is_turned_away(data, found):
    with pytest.raises(ReadingError, match=f"^a.swc: read {found}") as caught:
        parse(data, "a.swc")
    assert caught.value.reason == "empty"


@pytest.mark.parametrize("line", [LINES[0], LINES[0].replace(" ", ",")])
def test_one_sample_is_no_cable(line):
    with pytest.raises(ReadingError, match=r"line 2: .* expected at least two samples") as caught:
        parse(f"# a\n{line}\n".encode(), "a.swc")
    assert caught.value.reason == "single_sample"


OTHERS = {
    "HTML": (b"<!DOCTYPE html>\n<html><body>\n<p>404 Not Found</p>", "HTML or XML"),
    "PDF": (b"%PDF-1.7\n1 0 obj\n1 0 0 1 72 720 cm\n", "a PDF document"),
    "JSON": (b'{"message": "Not Found"}', "JSON"),
    "zip": (b"PK\x03\x04\x14\x00\x00\x00", "a zip archive"),
    "binary": (bytes(range(1, 256)) * 40 + b"\x00" * 100, "a binary file"),
    "UTF-16 without mark": (PLAIN.decode().encode("utf-16-le"), "a binary file"),
    "prose": (b"Dear colleague,\nplease find the cells attached.\n\nYours\n", "another format"),
}


@pytest.mark.parametrize(("data", "kind"), OTHERS.values(), ids=OTHERS.keys())
def test_what_is_no_swc_text_is_said_in_one_sentence(data, kind):
    with pytest.raises(ReadingError, match=f"but this looks like {kind}; export it as SWC") as caught:
        parse(data, "a.swc")
    assert caught.value.reason == "not_swc"
    assert len(str(caught.value)) < 300


@pytest.mark.parametrize(
    "data",
    [gzip.compress(PLAIN)[:-9], gzip.compress(PLAIN)[:20], b"\x1f\x8b", b"no gzip at all", PLAIN],
    ids=["cut at the end", "cut in the middle", "signature alone", "text", "samples"],
)
def test_broken_gzip_is_unreadable(data):
    with pytest.raises(ReadingError, match=r"a.swc.gz: could not be read: broken gzip data") as caught:
        parse(data, "a.swc.gz")
    assert caught.value.reason == "unreadable"


def test_what_grows_too_large_when_decompressed_is_unreadable(monkeypatch):
    monkeypatch.setattr(swc, "SIZE_LIMIT_BYTES", 1000)
    with pytest.raises(ReadingError, match="it decompresses to more than 1,000 bytes") as caught:
        parse(gzip.compress(b"# nothing but air" * 1000), "a.swc.gz")
    assert caught.value.reason == "unreadable"


def test_a_bomb_is_not_blown_up():
    bomb = gzip.compress(b"\n" * 50_000_000)
    assert len(bomb) < 100_000
    with pytest.raises(
        ReadingError, match="it decompresses to more than 10,000,000 bytes, which no"
    ) as caught:
        parse(bomb, "a.swc.gz")
    assert caught.value.reason == "unreadable"


def test_bytes_are_read_as_they_are(tmp_path):
    path = tmp_path / "cell # 7.SWC"
    path.write_bytes(PLAIN)
    assert read_bytes(path) == PLAIN
    assert read_bytes(str(path)) == PLAIN


def test_a_missing_file_is_unreadable(tmp_path):
    with pytest.raises(ReadingError, match=r"gone\.swc: could not be read: no such file") as caught:
        read_bytes(tmp_path / "gone.swc")
    assert caught.value.reason == "unreadable"


def test_a_folder_is_unreadable_under_the_name_given(tmp_path):
    with pytest.raises(
        ReadingError, match=r"^b/a\.swc: could not be read: it is a folder or device"
    ) as caught:
        read_bytes(tmp_path, "b/a.swc")
    assert caught.value.reason == "unreadable"


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="the system has no named pipes")
def test_a_pipe_does_not_keep_the_night_waiting(tmp_path):
    os.mkfifo(tmp_path / "pipe.swc")
    with pytest.raises(ReadingError, match="it is a folder or device"):
        read_bytes(tmp_path / "pipe.swc")


@pytest.mark.skipif(not hasattr(os, "geteuid") or os.geteuid() == 0, reason="root may read everything")
def test_a_forbidden_file_is_unreadable(tmp_path):
    path = tmp_path / "a.swc"
    path.write_bytes(PLAIN)
    path.chmod(0)
    with pytest.raises(ReadingError, match="could not be read: permission denied"):
        read_bytes(path)


def test_a_file_too_large_is_unreadable(tmp_path, monkeypatch):
    monkeypatch.setattr(swc, "SIZE_LIMIT_BYTES", 10)
    path = tmp_path / "a.swc"
    path.write_bytes(PLAIN)
    with pytest.raises(ReadingError, match="it is larger than 10 bytes"):
        read_bytes(path)


@given(
    st.lists(
        st.builds(
            format,
            st.floats(-1e99, 1e99),
            st.sampled_from(["", ".3f", ".9g", ".16e", ".17g", ".25g", ".40f", "+.20E"]),
        ),
        min_size=4,
        max_size=4,
    )
)
def test_numbers_are_what_python_reads(texts):
    table = parse(b"1 1 0 0 0 5 -1\n2 3 " + " ".join(texts).encode() + b" 1\n", "a.swc")
    assert [*table.position[1], table.radius[1]] == [float(text) for text in texts]


def test_a_large_text_is_read_like_a_small_one(monkeypatch):
    data = "\n".join(f"{n} 3 {n / 3!r} {n / 7!r} -0.1 0.2 {n - 1 or -1}" for n in range(1, 40_000)).encode()
    whole = parse(data, "a.swc")
    monkeypatch.setattr(swc, "_LARGE_TEXT", 0)
    pieces = parse(data, "a.swc")
    for name in ("number", "kind", "position", "radius", "parent", "line"):
        np.testing.assert_array_equal(getattr(pieces, name), getattr(whole, name))


coordinate = st.floats(-1e6, 1e6).map(lambda value: float(f"{value:.9g}"))


@st.composite
def trees_and_texts(draw):
    """A random forest and one of the many texts that mean it."""
    n = draw(st.integers(2, 12))
    number = draw(st.lists(st.integers(0, 10_000), min_size=n, max_size=n, unique=True))
    parent = [-1] + [draw(st.integers(-1, i - 1)) for i in range(1, n)]
    order = draw(st.permutations(range(n)))
    lengths = [[draw(coordinate) for _ in range(4)] for _ in range(n)]
    rows = [
        (number[i], draw(st.integers(0, 9)), *lengths[i], number[parent[i]] if parent[i] >= 0 else -1)
        for i in order
    ]
    blank = st.sampled_from(["", "  ", "# 1 1 0 0 0 1 -1", " #", "\t"])
    gap = st.sampled_from([" ", "\t", "   ", " \t"])
    text = ""
    for row in rows:
        for line in draw(st.lists(blank, max_size=2)):
            text += line + draw(st.sampled_from(["\n", "\r\n", "\r"]))
        text += draw(st.sampled_from(["", " "])) + draw(gap).join(map(repr, row))
        text += draw(st.sampled_from(["", " ", " # note", "#"])) + draw(st.sampled_from(["\n", "\r\n", "\r"]))
    return rows, text


@given(trees_and_texts())
def test_any_layout_of_a_tree_is_the_same_tree(drawn):
    rows, text = drawn
    table = parse(text.encode(), "a.swc")
    np.testing.assert_array_equal(table.number, [row[0] for row in rows])
    np.testing.assert_array_equal(table.kind, [row[1] for row in rows])
    np.testing.assert_array_equal(table.position, [row[2:5] for row in rows])
    np.testing.assert_array_equal(table.radius, [row[5] for row in rows])
    parents = [-1 if row < 0 else table.number[row] for row in table.parent]
    np.testing.assert_array_equal(parents, [row[6] for row in rows])
    lines = re.split("\r\n|\r|\n", text)
    assert [int(lines[line - 1].split()[0]) for line in table.line] == [row[0] for row in rows]


@given(st.binary(max_size=300))
def test_no_bytes_bring_anything_but_a_table_or_a_reading_error(data):
    try:
        table = parse(data, "a.swc")
    except ReadingError as error:
        assert error.reason  # noqa: PT017 (either outcome is right)
    else:
        assert len(table.number) > 1
