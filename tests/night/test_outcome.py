from __future__ import annotations

import csv
import io

import pytest

from morphotone.night.outcome import Outcome, csv_cell, csv_line


def test_csv_line_reads_back() -> None:
    fields = ["a b.swc", 'with "quotes", commas', "new\nline", ""]
    text = csv_line(*fields)
    assert text.endswith("\r\n")
    assert next(csv.reader(io.StringIO(text, newline=""))) == fields


@pytest.mark.parametrize(
    "text", ["=1+1", "@SUM(A1)", "+A1", "-A1", "-", "\t=1", "\r=1", "\uff1d1", "-1_000", "+1e", "--1", "-inf"]
)
def test_text_that_a_spreadsheet_would_run_gets_an_apostrophe(text: str) -> None:
    assert next(csv.reader(io.StringIO(csv_line(text), newline=""))) == [f"'{text}"]


@pytest.mark.parametrize("text", ["-1", "+1.5e-3", "-.5", "-3.", "", "a=1", " =1", "'=1", "µ", "#=1"])
def test_other_text_and_numbers_stay_as_they_are(text: str) -> None:
    assert csv_cell(text) == text


def test_a_part_without_line_end_is_refused() -> None:
    with pytest.raises(ValueError, match=r"a: part 'cells' ends with b'1\\n', expected b'\\r\\n'"):
        Outcome("a", "analysed", parts={"cells": b"1\n"})


def test_an_empty_part_is_fine() -> None:
    assert Outcome("a", "analysed", parts={"findings": b""}).rows() == {"findings": b""}


@pytest.mark.parametrize(
    ("status", "reason", "sentence"),
    [("turned away", "", "why"), ("turned away", "code", ""), ("analysed", "code", "why")],
)
def test_a_reason_goes_with_being_turned_away(status: str, reason: str, sentence: str) -> None:
    with pytest.raises(ValueError, match=f"a: '{status}' with reason '{reason}'"):
        Outcome("a", status, reason=reason, sentence=sentence)  # type: ignore[arg-type]


def test_a_file_turned_away_keeps_its_other_parts() -> None:
    outcome = Outcome("a", "turned away", parts={"findings": b"f\r\n"}, reason="code", sentence="why")
    assert outcome.rows() == {"findings": b"f\r\n", "turned_away": b"a,code,why\r\n"}
