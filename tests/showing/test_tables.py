"""CSV text: what is read back equals what was written, by pandas and by the letter of RFC 4180."""

import csv
import io
from math import inf, nan

import numpy as np
import pandas as pd
import pytest

from morphotone.commands.survey import _EXACT
from morphotone.showing.tables import csv_line, csv_texts


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


TABLE = {"n": np.array([1, 2]), "x": np.array([0.1, nan]), "word": ["plain", 'a, "b"'], "maybe": [None, 7]}


def test_a_table_worked_by_hand():
    (text,) = csv_texts([TABLE], [["f.swc", "f"]])
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
    "=SUM(A1).swc",
    "'apostrophe'.swc",
    "#hash.swc",
    "NA",
]


@pytest.mark.parametrize("name", NAMES)
def test_any_name_comes_back(name):
    (text,) = csv_texts([TABLE], [[name, name]])
    assert [record[:2] for record in records(text)] == [[name, name]] * 2
    assert [record[:2] for record in csv.reader(io.StringIO(text, newline=""), strict=True)] == [
        [name, name]
    ] * 2
    frame = pd.read_csv(io.StringIO(text), header=None, keep_default_na=False, dtype=str)
    assert frame[0].tolist() == [name, name]
    assert records(csv_line([name, "x"])) == [[name, "x"]]


def test_numbers_are_read_back_equal():
    rng = np.random.default_rng(1)
    exotic = [
        0.0,
        5e-324,
        2.2250738585072014e-308,
        1.7976931348623157e308,
        0.1,
        1 / 3,
        1e22,
        123456789.0,
        inf,
        -inf,
    ]
    bits = rng.integers(0, 2**63, 2_000, dtype=np.int64).view(np.float64)
    bits = bits[np.isfinite(bits)]
    values = np.concatenate((exotic, rng.normal(size=1000), 10 ** rng.uniform(-300, 300, 1000), bits))
    values = np.concatenate((values, -values))
    (text,) = csv_texts([{"x": values, "same": values.tolist()}], [["f"]])
    frame = pd.read_csv(io.StringIO(text), header=None, **_EXACT)
    for column in (1, 2):
        np.testing.assert_array_equal(frame[column].to_numpy(), values)
    assert [float(record[1]) for record in records(text)][:10] == exotic


def test_whole_numbers_stay_whole_and_true_stays_true():
    columns = {"long": [2**53 + 1], "np": [np.int64(7)], "yes": [True], "none": [None], "nan": [nan]}
    assert csv_texts([columns], [["f"]]) == [f"f,{2**53 + 1},7,True,,\r\n"]


def test_each_table_has_its_own_text_whatever_its_length():
    def table(*values):
        return {"x": np.array(values, float), "y": list(values)}

    texts = csv_texts([table(1, 2, 3), table(), table(4)], [["a"], ["b"], ["c"]])
    assert texts == ["a,1.0,1\r\na,2.0,2\r\na,3.0,3\r\n", "", "c,4.0,4\r\n"]


def test_tables_in_company_are_written_as_alone():
    """A neighbour's empty cells must not turn another's whole numbers into 7.0."""
    whole = {"branch": np.array([1, 2]), "x": np.array([0.5, 0.25])}
    blank = {"branch": np.array([3, None], object), "x": np.array([1.5, nan])}
    together = csv_texts([whole, blank, whole], [["a"], ["b"], ["a"]])
    alone = [csv_texts([table], [[name]])[0] for table, name in ((whole, "a"), (blank, "b"), (whole, "a"))]
    assert together == alone
    assert together[1] == "b,3,1.5\r\nb,,\r\n"


@pytest.mark.parametrize("tables", [[], [{"x": np.array([])}], [{"x": []}, {"x": []}]])
def test_nothing_gives_nothing(tables):
    assert csv_texts(tables, [["a"]] * len(tables)) == [""] * len(tables)


def test_a_sentence_with_a_bare_line_feed_or_return_stays_one_cell():
    table = {"sentence": ["first\nsecond", "third\rfourth"]}
    (text,) = csv_texts([table], [["f"]])
    assert [record[1] for record in records(text)] == table["sentence"]


def test_one_record():
    assert csv_line(["a", "b,c", ""]) == 'a,"b,c",\r\n'
