from __future__ import annotations

import json
import sys
from datetime import UTC, datetime, timedelta, timezone
from pathlib import Path

import numpy as np
import pytest

from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Outcome
from morphotone.night.record import run_record, write_record
from morphotone.night.runner import Tally


def test_the_record_of_a_run(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "argv", ["morphotone", "survey", "cells"])
    started = datetime(2031, 5, 1, 1, 30, tzinfo=timezone(timedelta(hours=2)))
    tally = Tally(found=2, analysed=1, turned_away=1, unchanged=0, samples=3)
    with Ledger(tmp_path, {}) as ledger:
        ledger.record(
            [
                Outcome("é.swc", "analysed", "12ab", 3),
                Outcome("lost.swc", "turned away", reason="unreadable", sentence="s"),
                Outcome("other.swc", "analysed", "34cd", 3),
            ]
        )
        record = run_record(
            started=started,
            tally=tally,
            ledger=ledger,
            names=["lost.swc", "é.swc"],
            details={"assumptions": {"R_m_ohm_cm2": 20000.0}},
        )
    write_record(tmp_path / "run.json", record)
    read = json.loads((tmp_path / "run.json").read_text(encoding="utf-8"))
    assert read["started"] == "2031-04-30T23:30:00+00:00"
    assert abs(datetime.fromisoformat(read["ended"]) - datetime.now(UTC)) < timedelta(minutes=1)
    assert read["command"] == ["morphotone", "survey", "cells"]
    assert read["assumptions"] == {"R_m_ohm_cm2": 20000.0}
    assert read["counts"] == {"found": 2, "analysed": 1, "turned_away": 1, "unchanged": 0, "samples": 3}
    assert read["packages"]["numpy"] == np.__version__
    assert read["python"] == sys.version.split()[0]
    assert read["inputs_sha256"] == {"lost.swc": None, "é.swc": "12ab"}


def test_a_value_that_is_no_json_leaves_the_old_record(tmp_path: Path) -> None:
    path = tmp_path / "run.json"
    write_record(path, {"a": 1})
    with pytest.raises(ValueError, match="Out of range float values"):
        write_record(path, {"a": float("nan")})
    assert json.loads(path.read_text(encoding="utf-8")) == {"a": 1}
