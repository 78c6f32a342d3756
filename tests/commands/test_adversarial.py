"""Files that nobody would write: mutated ones by the thousand, and some made to hurt."""

import csv
import gzip
import os
import re
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.questions.survey import Request, answers
from morphotone.questions.time_axis import TimeRequest
from tests import trees
from tests.commands.folders import SOUND, fill, rows, run, tables
from tests.mutations import mutated, write_mutations

ORIGINALS = [
    trees.irregular(120, 7, soma=True).encode(),
    trees.irregular(40, 3, soma=True).encode(),
    SOUND.encode(),
    trees.soma_chain().encode(),
]
EVERYTHING = Request(
    Assumptions(hz=(100.0,)),
    keep_unfit=True,
    samples=True,
    time=TimeRequest(True, 2, SynapticCurrent(0.5, 2.0)),
)
MUTATIONS = 10_000
OF_A_RUN = {"cells.csv", "branches.csv", "findings.csv", "turned_away.csv", "assumptions.toml", "run.json"}
OUR_FAULTS = {"program_error", "worker_died", "too_long", "too_large"}


def would_run(cell: str) -> bool:
    """Whether a spreadsheet takes a cell for a formula."""
    return bool(re.match(r"[=+\-@\t\r]", cell)) and not re.fullmatch(r"[+-]?[\d.]+(e[+-]?\d+)?|-inf", cell)


def check_tables(results: Path) -> None:
    for path in results.rglob("*.csv"):
        with path.open(encoding="utf-8", newline="") as stream:
            records = list(csv.reader(stream, strict=True))
        assert {len(record) for record in records} == {len(records[0])}, path
        assert not [cell for record in records for cell in record if would_run(cell)], path


def reasons(results: Path) -> dict[str, str]:
    return {row["file"]: row["reason"] for row in rows(results / "turned_away.csv")}


@settings(deadline=None, max_examples=60)
@given(number=st.integers(0, 10**6), original=st.sampled_from(ORIGINALS))
def test_any_mutation_gets_an_answer_to_every_question(number: int, original: bytes) -> None:
    (answer,) = answers([("m.swc", mutated(original, number))], EVERYTHING)
    assert (answer.cell is None) == bool(answer.reason and answer.sentence)
    assert "\n" not in answer.sentence


@pytest.mark.slow
def test_ten_thousand_mutated_files_are_a_usual_run(tmp_path, capfd):
    write_mutations(tmp_path / "cells", ORIGINALS, MUTATIONS)
    results = tmp_path / "results"
    assert (
        run("survey", tmp_path / "cells", "--into", results, "--keep-unfit", "--samples", "--workers", "2")
        == 1
    )
    away, analysed = reasons(results), rows(results / "cells.csv")
    assert len(analysed) + len(away) == MUTATIONS
    assert MUTATIONS / 10 < len(analysed) < MUTATIONS * 0.9  # neither harmless nor hopeless
    assert not OUR_FAULTS & set(away.values())
    out, err = capfd.readouterr()
    assert "Traceback" not in out + err
    assert "Warning" not in out + err
    check_tables(results)


def made_to_hurt() -> dict[str, bytes]:
    """Small files with the worst of numbers, sizes and names; each is well formed."""
    huge = "1 1 0 0 0 5 -1\n2 3 1e308 -1e308 1e308 1 1\n3 3 -1e308 1e308 0 1 2\n"
    sizes = "1 1 0 0 0 5 -1\n2 3 10 0 0 1e-6 1\n3 3 20 0 0 1e6 2\n4 3 1e6 0 0 1e-6 3\n5 3 1000000.1 0 0 1 4\n"
    tiny = "1 1 0 0 0 5e-324 -1\n2 3 5e-324 0 0 5e-324 1\n"
    loop = "1 1 0 0 0 5 2\n2 3 50 0 0 1 1\n"
    return {
        "huge.swc": huge.encode(),
        "sizes.swc": sizes.encode(),
        "tiny.swc": tiny.encode(),
        "loop.swc": loop.encode(),
        "bomb.swc.gz": gzip.compress(b"\n" * 50_000_000),
        "bomb_of_samples.swc.gz": gzip.compress(b"2 3 50 0 0 1 1\n" * 3_000_000),
        "nothing.swc": b"",
        "nul.swc": b"\x00" * 100_000,
        "one_line.swc": b"1 " * 200_000,
        "deep header.swc": b"#" * 200_000 + b"\n" + SOUND.encode(),
        "=1+1.swc": b"# =cmd\n" + SOUND.encode(),
        "@import.swc": b"=1+1 2 3\n",
        "+x\n=y.swc": SOUND.encode(),
        "%2e%2e%2fout.swc": SOUND.encode(),
        " ..swc": SOUND.encode(),
        "a\\..\\..\\out.swc": SOUND.encode(),
        "con.swc": SOUND.encode(),
    }


@pytest.mark.parametrize("more", [[], ["--keep-unfit", "--samples"]], ids=["plain", "kept"])
def test_files_made_to_hurt(tmp_path, capfd, more):
    folder = fill(tmp_path / "in" / "cells", made_to_hurt())
    for name, target in {"round": ".", "up": "..", "self.swc": "self.swc", "gone.swc": "nowhere"}.items():
        (folder / name).symlink_to(target)
    os.mkfifo(folder / "pipe.swc")
    results = tmp_path / "results"
    assert run("survey", folder, "--into", results, "--workers", "1", *more) == 1
    away, analysed = reasons(results), rows(results / "cells.csv")
    assert (
        len(away) + len(analysed) == len(made_to_hurt()) + 3
    )  # the links to itself and to nothing, the pipe
    assert not OUR_FAULTS & set(away.values())
    assert {path.name for path in tmp_path.iterdir()} == {"in", "results"}
    assert {path.name for path in (tmp_path / "in").iterdir()} == {"cells"}
    check_tables(results)
    assert "Traceback" not in "".join(capfd.readouterr())


def a_million(parents: np.ndarray) -> bytes:
    """A cell of 10^6 samples beside its soma, a step of 0.01 um each."""
    number = np.arange(2, len(parents) + 2)
    lines = (
        f"{n} 3 {5 + 0.01 * n:.2f} 0 0 0.5 {p}"
        for n, p in zip(number.tolist(), parents.tolist(), strict=True)
    )
    return b"1 1 0 0 0 5 -1\n" + "\n".join(lines).encode() + b"\n"


@pytest.mark.slow
@pytest.mark.parametrize("shape", ["children of one sample", "one line of cable"])
def test_a_million_samples(tmp_path, shape):
    parents = np.ones(10**6, int) if shape == "children of one sample" else np.arange(1, 10**6 + 1)
    folder = fill(tmp_path / "cells", {"million.swc": a_million(parents)})
    results = tmp_path / "results"
    assert run("survey", folder, "--into", results, "--keep-unfit", "--workers", "1") in (0, 1)
    (row,) = rows(results / "cells.csv")
    assert int(row["samples"]) == 10**6 + 1
    assert int(row["tips"]) == (10**6 if shape == "children of one sample" else 1)
    assert set(tables(results)) >= {"cells.csv", "turned_away.csv"}
