from __future__ import annotations

import csv
import io

import pytest

from morphotone.night.outcome import Outcome, csv_line


def test_csv_line_reads_back() -> None:
    fields = ["a b.swc", 'with "quotes", commas', "new\nline", ""]
    text = csv_line(*fields)
    assert text.endswith("\r\n")
    assert next(csv.reader(io.StringIO(text, newline=""))) == fields


def test_a_part_without_line_end_is_refused() -> None:
    with pytest.raises(ValueError, match=r"a: part 'cells' ends with '1\\n', expected '\\r\\n'"):
        Outcome("a", "analysed", parts={"cells": "1\n"})


def test_an_empty_part_is_fine() -> None:
    assert Outcome("a", "analysed", parts={"findings": ""}).rows() == {"findings": ""}


@pytest.mark.parametrize(
    ("status", "reason", "sentence"),
    [("turned away", "", "why"), ("turned away", "code", ""), ("analysed", "code", "why")],
)
def test_a_reason_goes_with_being_turned_away(status: str, reason: str, sentence: str) -> None:
    with pytest.raises(ValueError, match=f"a: '{status}' with reason '{reason}'"):
        Outcome("a", status, reason=reason, sentence=sentence)  # type: ignore[arg-type]


def test_a_file_turned_away_keeps_its_other_parts() -> None:
    outcome = Outcome("a", "turned away", parts={"findings": "f\r\n"}, reason="code", sentence="why")
    assert outcome.rows() == {"findings": "f\r\n", "turned_away": "a,code,why\r\n"}
