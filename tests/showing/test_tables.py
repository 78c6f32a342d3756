"""CSV text: what is read back equals what was written, by pandas and by the letter of RFC 4180."""

import csv
import io
from math import inf, nan

import numpy as np
import pandas as pd
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from morphotone.reading.swc import EXACT
from morphotone.showing import tables
from morphotone.showing.tables import csv_rows, csv_table, csv_texts


def records(text):
    """Read CSV by the letter of RFC 4180: CRLF ends a record, a quote in quotes is doubled."""
    out, record, field, quoted, k = [], [], "", False, 0
    while k < len(text):
        here = text[k]
        if quoted and text[k : k + 2] == '""':
            field, k = field + '"', k + 1
        elif here == '"':
            quoted = not quoted
        elif quoted or here not in ",\r\n":
            field += here
        elif here == ",":
            record, field = [*record, field], ""
        else:
            assert text[k : k + 2] == "\r\n", "a record ends with CRLF"
            out, record, field, k = [*out, [*record, field]], [], "", k + 1
        k += 1
    assert (record, field, quoted) == ([], "", False), "the last record is ended too"
    return out


def written(*tables, names=None):
    """Return the text of each table, led by "f" unless other names are given."""
    return [text.decode() for text in csv_texts(tables, names or [["f"]] * len(tables))]


TABLE = {"n": np.array([1, 2]), "x": np.array([0.1, nan]), "word": ["plain", 'a, "b"'], "maybe": [None, 7]}


def test_a_table_worked_by_hand():
    (text,) = written(TABLE, names=[["f.swc", "f"]])
    assert text == 'f.swc,f,1,0.1,plain,\r\nf.swc,f,2,,"a, ""b""",7\r\n'
    assert records(text) == [["f.swc", "f", "1", "0.1", "plain", ""], ["f.swc", "f", "2", "", 'a, "b"', "7"]]


NAMES = [
    "plain.swc",
    "with space.swc",
    "comma, and more.swc",
    'say "when".swc',
    '",",".swc',
    "line\nbreak.swc",
    "carriage\r\nreturn.swc",
    "µm λ Zürich 細胞.swc",
    " leading.swc",
    "'apostrophe'.swc",
    "#hash.swc",
    "NA",
]


@pytest.mark.parametrize("name", NAMES)
def test_any_name_comes_back(name):
    (text,) = written(TABLE, names=[[name, name]])
    assert [record[:2] for record in records(text)] == [[name, name]] * 2
    assert [record[:2] for record in csv.reader(io.StringIO(text, newline=""), strict=True)] == [
        [name, name]
    ] * 2
    frame = pd.read_csv(io.StringIO(text), header=None, keep_default_na=False, dtype=str)
    assert frame[0].tolist() == [name, name]


EXOTIC = [0.0, 5e-324, 2.2250738585072014e-308, 1.7976931348623157e308, 0.1, 1 / 3, 1e16, 1e22, 1e-5, inf]


def test_pandas_reads_numbers_back_equal():
    rng = np.random.default_rng(1)
    values = np.concatenate((EXOTIC, rng.normal(size=1000), 10 ** rng.uniform(-300, 300, 1000)))
    values = np.concatenate((values, -values))
    (text,) = written({"x": values, "same": values.tolist()})
    frame = pd.read_csv(io.StringIO(text), header=None, **EXACT)
    for column in (1, 2):
        np.testing.assert_array_equal(frame[column].to_numpy(), values)


BITS = arrays(np.uint64, st.integers(1, 30), elements=st.integers(0, 2**64 - 1))


@given(BITS)
@example(np.array([*EXOTIC, -0.0, -inf, nan, -nan]).view(np.uint64))
def test_every_double_is_read_back_to_the_last_bit(bits):
    """Against Python's own reading of decimals; its repr is the measure of how short they may be."""
    values = bits.view(np.float64)
    (array,), (listed,) = written({"x": values}), written({"x": values.tolist()})
    assert array == listed
    for (_, text), value in zip(records(array), values.tolist(), strict=True):
        if value != value:
            assert text == ""
        else:
            assert np.float64(text).tobytes() == np.float64(value).tobytes()
            assert digits(text) == digits(repr(value))


def digits(text):
    """Return the significant digits of a decimal."""
    return text.partition("e")[0].lstrip("-").replace(".", "").strip("0")


MIXED = st.none() | st.booleans() | st.integers() | st.floats() | st.text(st.characters(codec="utf-8"))


@given(st.lists(st.tuples(MIXED, MIXED), max_size=8), st.integers(0, 8))
def test_mixed_cells_are_read_back_by_the_letter_and_by_the_csv_module(rows, cut):
    """Numbers, None and text in one column, in two tables and in one: the same bytes."""
    first, second, whole = (
        {name: [row[k] for row in some] for k, name in enumerate("ab")}
        for some in (rows[:cut], rows[cut:], rows)
    )
    (text,) = written(whole)
    assert "".join(written(first, second)) == text
    assert records(text) == list(csv.reader(io.StringIO(text, newline=""), strict=True))
    for (_, *cells), values in zip(records(text), rows, strict=True):
        for cell, value in zip(cells, values, strict=True):
            if isinstance(value, str):
                assert cell.removeprefix("'") == value.removeprefix("'")
            elif value is None or value != value:
                assert cell == ""
            elif isinstance(value, bool):
                assert cell == str(value)
            else:
                assert type(value)(cell) == value


@pytest.mark.parametrize("text", ["null", "],[", ",,", "\\n", '\\"', "\\u000a", "true", "ÿ", "[1]"])
def test_text_like_the_way_it_is_written_comes_back(text):
    (table,) = written({"text": [text, None], "one": [1, 2]}, names=[[text]])
    assert records(table) == [[text, text, "1"], [text, "", "2"]]


def test_what_a_spreadsheet_would_run_gets_an_apostrophe_and_numbers_get_none():
    values = ["=1+1", -1.5, "-1.5", "@x", np.int64(-7), -inf]
    (text,) = written({"x": values}, names=[["+f"]])
    expected = ["'=1+1", "-1.5", "-1.5", "'@x", "-7", "-inf"]
    assert records(text) == [["'+f", cell] for cell in expected]


def test_whole_numbers_stay_whole_and_true_stays_true():
    columns = {"long": [2**70], "exact": np.array([2**53 + 1]), "yes": [True], "none": [None], "nan": [nan]}
    assert written(columns) == [f"f,{2**70},{2**53 + 1},True,,\r\n"]
    assert written({"some": np.array([True, False])}) == ["f,True\r\nf,False\r\n"]


def test_each_table_has_its_own_text_whatever_its_length():
    def table(*values):
        return {"x": np.array(values, float), "y": list(values)}

    texts = written(table(1, 2, 3), table(), table(4), names=[["a"], ["b"], ["c"]])
    assert texts == ["a,1.0,1\r\na,2.0,2\r\na,3.0,3\r\n", "", "c,4.0,4\r\n"]


def test_tables_in_company_are_written_as_alone():
    """A neighbour's empty cells must not turn another's whole numbers into 7.0."""
    whole = {"branch": np.array([1, 2]), "x": np.array([0.5, 0.25])}
    blank = {"branch": np.array([3, None], object), "x": np.array([1.5, nan])}
    together = written(whole, blank, whole, names=[["a"], ["b"], ["a"]])
    alone = [written(table, names=[[name]])[0] for table, name in ((whole, "a"), (blank, "b"), (whole, "a"))]
    assert together == alone
    assert together[1] == "b,3,1.5\r\nb,,\r\n"


@pytest.mark.parametrize("given_tables", [[], [{"x": np.array([])}], [{"x": []}, {"x": []}]])
def test_nothing_gives_nothing(given_tables):
    assert csv_texts(given_tables, [["a"]] * len(given_tables)) == [b""] * len(given_tables)


def test_a_sentence_with_a_bare_line_feed_or_return_stays_one_cell():
    table = {"sentence": ["first\nsecond", "third\rfourth"]}
    (text,) = written(table)
    assert [record[1] for record in records(text)] == table["sentence"]


def test_a_long_table_is_written_in_pieces_and_reads_as_one():
    count = 3 * tables._AT_ONCE // 2
    values = np.arange(count) + 0.5
    long, short = {"x": values, "n": np.arange(count)}, {"x": values[:1], "n": np.arange(1)}
    texts = written(short, long, short, names=[["a"], ["b"], ["c"]])
    assert texts[::2] == ["a,0.5,0\r\n", "c,0.5,0\r\n"]
    frame = pd.read_csv(io.StringIO(texts[1]), header=None, **EXACT)
    np.testing.assert_array_equal(frame[1].to_numpy(), values)
    np.testing.assert_array_equal(frame[2].to_numpy(), np.arange(count))
    assert set(frame[0]) == {"b"}


def test_rows_are_written_as_tables_of_one_row():
    rows = [{"x": 0.1, "word": "a,b"}, {"x": nan, "word": "="}, {"x": 3, "word": ""}]
    names = [["a"], ["b"], ["c"]]
    texts = csv_rows(rows, names)
    assert texts == csv_texts([{name: [value] for name, value in row.items()} for row in rows], names)
    assert texts == [b'a,0.1,"a,b"\r\n', b"b,,'=\r\n", b"c,3,\r\n"]
    assert csv_rows([], []) == []


def test_a_dataframe_with_its_header():
    frame = pd.DataFrame({"word": ["a,b", None], "n": pd.array([3, None], "Int64"), "=x": [0.5, nan]})
    assert csv_table(frame).decode() == 'word,n,\'=x\r\n"a,b",3,0.5\r\n,,\r\n'
    assert csv_table(frame[:0]).decode() == "word,n,'=x\r\n"
    assert csv_table(frame[["n"]]).decode() == "n\r\n3\r\n\r\n"
