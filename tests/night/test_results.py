from __future__ import annotations

import errno
import os
import sys
from pathlib import Path, PurePosixPath, PureWindowsPath

import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from morphotone.errors import ResultsError
from morphotone.night.ledger import Ledger
from morphotone.night.outcome import Outcome, csv_line
from morphotone.night.results import atomic, atomic_bytes, export, export_each, file_names


def fill(ledger: Ledger, *names: str) -> None:
    ledger.record(
        [Outcome(name, "analysed", "hash", 1, {"cells": csv_line(name, "1").encode()}) for name in names],
    )


def test_rows_in_the_order_given_with_header_and_crlf(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        fill(ledger, "b", "gone", "new\nline", "a")
        export(ledger, ["a", "b", "new\nline"], {"cells": "file,n", "branches": "file,x"})
    assert (tmp_path / "cells.csv").read_bytes() == b'file,n\r\na,1\r\nb,1\r\n"new\nline",1\r\n'
    assert (tmp_path / "branches.csv").read_bytes() == b"file,x\r\n"
    assert list(pd.read_csv(tmp_path / "cells.csv")["file"]) == ["a", "b", "new\nline"]


def test_bytes_take_their_place_when_all_are_written(tmp_path: Path) -> None:
    path = tmp_path / "new" / "pairs.npz"
    with atomic_bytes(path) as stream:
        stream.write(b"\x00\r\n\xff")
        assert not path.exists()
    assert path.read_bytes() == b"\x00\r\n\xff"

    def fail_halfway() -> None:
        with atomic_bytes(path) as stream:
            stream.write(b"part")
            raise ZeroDivisionError("halfway")

    with pytest.raises(ZeroDivisionError, match="halfway"):
        fail_halfway()
    assert path.read_bytes() == b"\x00\r\n\xff"
    assert list(path.parent.iterdir()) == [path]


def test_pandas_writes_the_same_line_ends(tmp_path: Path) -> None:
    frame = pd.DataFrame({"file": ["a b", 'c"d'], "n": [1, 2]})
    text = frame.to_csv(header=False, index=False, lineterminator="\r\n")
    assert text == csv_line("a b", "1") + csv_line('c"d', "2")


def test_a_failure_in_the_middle_leaves_every_old_table(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        fill(ledger, "a")
        export(ledger, ["a"], {"cells": "file,n", "branches": "file"})
        before = {path: path.read_bytes() for path in tmp_path.glob("*.csv")}
        fill(ledger, "b")
        with pytest.raises(TypeError, match=r"unsupported operand|concatenate"):
            export(ledger, ["a", "b"], {"cells": "file,n", "branches": None})  # type: ignore[dict-item]
        assert {path: path.read_bytes() for path in tmp_path.glob("*.csv")} == before
        assert not list(tmp_path.glob(".*"))


def test_a_disk_that_is_full_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "cells.csv"
    path.write_text("old", encoding="utf-8")

    def full(_: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "fsync", full)
    expected = r"cells\.csv: cannot be written \(No space left on device\); make room"
    with pytest.raises(ResultsError, match=expected), atomic(path) as stream:
        stream.write("new")
    assert path.read_text(encoding="utf-8") == "old"
    assert [p.name for p in tmp_path.iterdir()] == ["cells.csv"]


def test_nothing_is_in_place_before_all_is_written(tmp_path: Path) -> None:
    with atomic(tmp_path / "sub" / "x.csv") as stream:
        stream.write("a\r\n")
        assert not (tmp_path / "sub" / "x.csv").exists()
    assert (tmp_path / "sub" / "x.csv").read_bytes() == b"a\r\n"


@pytest.mark.skipif(not hasattr(os, "link"), reason="no hard links here")
def test_the_old_file_is_replaced_and_not_written_over(tmp_path: Path) -> None:
    path, reader = tmp_path / "x.csv", tmp_path / "reader"
    path.write_text("old", encoding="utf-8")
    os.link(path, reader)  # like a program that has the old file open
    with atomic(path) as stream:
        stream.write("new")
    assert (path.read_text(encoding="utf-8"), reader.read_text(encoding="utf-8")) == ("new", "old")


def test_one_file_per_item_mirrors_the_folders(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        fill(ledger, "a.swc", "sub/b c.swc", "../up.swc")
        export_each(ledger, ["../up.swc", "a.swc", "sub/b c.swc"], "cells", "file,n")
    files = {path.relative_to(tmp_path).as_posix() for path in tmp_path.rglob("*.csv")}
    assert files == {"cells/a.swc.csv", "cells/sub/b c.swc.csv", "cells/%2E%2E/up.swc.csv"}
    assert (tmp_path / "cells" / "sub" / "b c.swc.csv").read_bytes() == b"file,n\r\nsub/b c.swc,1\r\n"


def test_the_file_of_an_item_that_is_gone_is_deleted_and_strangers_are_not(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        fill(ledger, "a.swc", "b.swc")
        ledger.record([Outcome("c.swc", "turned away", reason="r", sentence="s")])
        export_each(ledger, ["a.swc", "b.swc"], "cells", "file,n")
        (tmp_path / "cells" / "mine.csv").write_text("", encoding="utf-8")
        export_each(ledger, ["b.swc"], "cells", "file,n")
    assert sorted(path.name for path in (tmp_path / "cells").iterdir()) == ["b.swc.csv", "mine.csv"]


def test_an_item_that_comes_to_share_its_name_leaves_no_stale_file(tmp_path: Path) -> None:
    with Ledger(tmp_path, {}) as ledger:
        fill(ledger, "a.swc")
        export_each(ledger, ["a.swc"], "cells", "file,n")
        fill(ledger, "A.swc")
        export_each(ledger, ["A.swc", "a.swc"], "cells", "file,n")
        written = {path.name for path in (tmp_path / "cells").iterdir()}
    assert written == {f"{file}.csv" for file in file_names(["A.swc", "a.swc"]).values()}
    assert all("~" in name for name in written)


@pytest.mark.parametrize(
    ("name", "file"),
    [
        ("plain/cell 1 (left)_v2.swc", "plain/cell 1 (left)_v2.swc"),
        ("Größe/神経.swc", "Größe/神経.swc"),
        ("u\u0308.swc", "u%CC%88.swc"),
        ("\u1112\u1161\u11ab.swc", "%E1%84%92%E1%85%A1%E1%86%AB.swc"),  # 한 taken apart, as macOS does
        ("../../etc/x", "%2E%2E/%2E%2E/etc/x"),
        ("/etc/x", "%/etc/x"),
        ("a//b", "a/%/b"),
        ("new\nline", "new%0Aline"),
        ('<>:"|?*\\', "%3C%3E%3A%22%7C%3F%2A%5C"),
        ("100%", "100%25"),
        ("con", "%63on"),
        ("LPT1.swc", "%4CPT1.swc"),
        ("control.swc", "control.swc"),
        ("end. ", "end.%20"),
        (".hidden", "%2Ehidden"),
        ("x.csv/y", "x.cs%76/y"),
    ],
)
def test_safe_names(name: str, file: str) -> None:
    assert file_names([name]) == {name: file}


@given(st.sets(st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=300), max_size=8))
def test_any_names_become_distinct_paths_inside_the_folder(names: set[str]) -> None:
    files = file_names(names)
    assert set(files) == names
    assert len({file.casefold() for file in files.values()}) == len(names)
    for file in files.values():
        parts = PurePosixPath(file).parts
        assert "/".join(parts) == file
        assert parts == PureWindowsPath(file).parts
        assert not {"..", "."} & set(parts)
        assert all(len(part.encode()) <= 220 and part.isprintable() for part in parts)


@pytest.mark.skipif(sys.platform == "win32", reason="umask is a POSIX matter")
def test_colleagues_may_read_what_was_written(tmp_path: Path) -> None:
    (tmp_path / "usual").touch()
    with atomic(tmp_path / "x.csv") as stream:
        stream.write("a")
    assert (tmp_path / "x.csv").stat().st_mode == (tmp_path / "usual").stat().st_mode
