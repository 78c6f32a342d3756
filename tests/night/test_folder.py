from __future__ import annotations

import errno
import os
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest

from morphotone.errors import MorphotoneError
from morphotone.night import folder as folder_module
from morphotone.night.folder import Found, find_files

no_links = pytest.mark.skipif(sys.platform == "win32", reason="links need special rights on Windows")


def lay(folder: Path, *names: str) -> Path:
    for name in names:
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text("1\n", encoding="utf-8")
    return folder


def names(found: list[Found]) -> list[str]:
    return [file.name for file in found]


def test_names_are_posix_paths_in_byte_order(tmp_path: Path) -> None:
    lay(tmp_path, "b.swc", "a/z.swc", "a.swc", "a-1.swc", "a/b/c.swc.gz", "ä.swc", "Z.swc")
    # "-" (2D) < "." (2E) < "/" (2F) < letters; upper case before lower; two-byte letters last
    expected = ["Z.swc", "a-1.swc", "a.swc", "a/b/c.swc.gz", "a/z.swc", "b.swc", "ä.swc"]
    assert names(find_files(tmp_path)) == expected


def test_size_and_path_lead_to_the_file(tmp_path: Path) -> None:
    lay(tmp_path, "sub/a.swc")
    (file,) = find_files(tmp_path)
    assert file == Found(tmp_path / "sub" / "a.swc", "sub/a.swc", 2)


def test_endings_match_in_any_case_and_nothing_else_does(tmp_path: Path) -> None:
    lay(tmp_path, "A.SWC", "b.Swc.GZ", "c.swc.bak", "d.txt", "swc", "e.swcx")
    assert names(find_files(tmp_path)) == ["A.SWC", "b.Swc.GZ"]


def test_other_patterns(tmp_path: Path) -> None:
    lay(tmp_path, "cell_1.swc", "cell_2.swc", "old_1.swc")
    assert names(find_files(tmp_path, ["CELL_*.swc"])) == ["cell_1.swc", "cell_2.swc"]


@no_links
def test_odd_names_are_kept(tmp_path: Path) -> None:
    odd = ["two words.swc", "no#1.swc", '"quoted".swc', "a=b.swc", "ångström.swc", "sub/=x.swc"]
    lay(tmp_path, *odd)
    assert sorted(names(find_files(tmp_path))) == sorted(odd)


@no_links
@pytest.mark.parametrize(
    ("given", "written"),
    [
        ("new\nline.swc", r"new\u000aline.swc"),
        ("back\\slash.swc", r"back\u005cslash.swc"),
        ("=sum(a).swc", r"\u003dsum(a).swc"),
        ("+1.swc", r"\u002b1.swc"),
        ("-1.swc", r"\u002d1.swc"),
        ("@a.swc", r"\u0040a.swc"),
        ("\tx.swc", r"\u0009x.swc"),
        ("\uff1dx.swc", r"\uff1dx.swc"),
        ("\u202ecws.a.swc", r"\u202ecws.a.swc"),
        ("\u2028.swc", r"\u2028.swc"),
        ("\U000e0041.swc", r"\U000e0041.swc"),
        ("=sub/a.swc", r"\u003dsub/a.swc"),
    ],
)
def test_a_name_is_one_line_that_no_spreadsheet_runs(tmp_path: Path, given: str, written: str) -> None:
    lay(tmp_path, given)
    (file,) = find_files(tmp_path)
    assert file.name == written
    assert file.path == tmp_path / given


@no_links
def test_escaped_names_stay_apart(tmp_path: Path) -> None:
    lay(tmp_path, "=a.swc", r"\u003da.swc", r"\x3da.swc")
    assert len(set(names(find_files(tmp_path)))) == 3


@pytest.mark.skipif(sys.platform != "linux", reason="other systems refuse such names")
def test_a_name_that_is_no_utf8_gets_one_that_is(tmp_path: Path) -> None:
    Path(os.fsdecode(os.fsencode(tmp_path) + b"/caf\xe9.swc")).write_text("1\n", encoding="utf-8")
    (file,) = find_files(tmp_path)
    assert file.name == r"caf\xe9.swc"
    assert file.path.read_text(encoding="utf-8") == "1\n"


def test_hidden_files_and_folders_are_passed_over(tmp_path: Path) -> None:
    lay(tmp_path, "a.swc", "._a.swc", ".swc", ".trash/b.swc")
    assert names(find_files(tmp_path)) == ["a.swc"]


def test_the_results_are_not_looked_into(tmp_path: Path) -> None:
    lay(tmp_path, "a.swc", "out/b.swc", "output/c.swc")
    assert names(find_files(tmp_path, exclude=tmp_path / "out")) == ["a.swc", "output/c.swc"]
    assert names(find_files(tmp_path, exclude=tmp_path)) == names(find_files(tmp_path))


@no_links
def test_a_loop_of_links_ends(tmp_path: Path) -> None:
    lay(tmp_path, "a.swc", "sub/b.swc")
    (tmp_path / "sub" / "up").symlink_to(tmp_path)
    assert names(find_files(tmp_path)) == ["a.swc", "sub/b.swc"]


@no_links
def test_what_lies_below_the_folder_goes_by_its_own_place(tmp_path: Path) -> None:
    lay(tmp_path, "z/b.swc")
    (tmp_path / "a").symlink_to(tmp_path / "z")
    assert names(find_files(tmp_path)) == ["z/b.swc"]


@no_links
def test_links_to_the_outside_are_followed_once(tmp_path: Path) -> None:
    outside = lay(tmp_path / "outside", "c.swc", "deep/d.swc")
    inside = lay(tmp_path / "inside", "a.swc")
    (outside / "back").symlink_to(inside)
    for link in ("l1", "l2"):
        (inside / link).symlink_to(outside)
    (inside / "one.swc").symlink_to(outside / "c.swc")
    assert names(find_files(inside)) == ["a.swc", "l1/c.swc", "l1/deep/d.swc", "one.swc"]


@no_links
def test_a_broken_link_is_found_with_its_problem(tmp_path: Path) -> None:
    lay(tmp_path, "a.swc")
    (tmp_path / "b.swc").symlink_to(tmp_path / "gone")
    a, b = find_files(tmp_path)
    assert not a.problem
    assert "No such file or directory" in b.problem


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="no pipes here")
def test_a_pipe_is_found_with_its_problem(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "p.swc")
    (pipe,) = find_files(tmp_path)
    assert "pipe" in pipe.problem


def test_a_subfolder_that_cannot_be_listed_is_found_with_its_problem(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    lay(tmp_path, "a.swc", "shut/b.swc", "z.swc")
    scandir = os.scandir

    def refuse(place: str) -> Iterator[os.DirEntry[str]]:
        if Path(place).name == "shut":
            raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), str(place))
        return scandir(place)

    monkeypatch.setattr(folder_module.os, "scandir", refuse)
    found = find_files(tmp_path)
    assert names(found) == ["a.swc", "shut/", "z.swc"]
    assert "cannot be listed (Permission denied)" in found[1].problem


def test_a_folder_that_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(MorphotoneError, match=r"gone: there is no such file or folder"):
        find_files(tmp_path / "gone")


def test_a_file_in_place_of_the_folder(tmp_path: Path) -> None:
    lay(tmp_path, "a.swc")
    with pytest.raises(MorphotoneError, match=r"a\.swc is a file; give the folder"):
        find_files(tmp_path / "a.swc")


def test_a_folder_that_cannot_be_listed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def refuse(place: str) -> None:
        raise PermissionError(errno.EACCES, os.strerror(errno.EACCES), str(place))

    monkeypatch.setattr(folder_module.os, "scandir", refuse)
    with pytest.raises(MorphotoneError, match=r"the folder cannot be listed \(Permission denied\)"):
        find_files(tmp_path)


def test_a_folder_without_a_match_says_what_was_looked_for(tmp_path: Path) -> None:
    lay(tmp_path, "a.txt", "b/c.asc")
    with pytest.raises(MorphotoneError, match=r"no file named \*\.swc or \*\.swc\.gz at any depth \(2 other"):
        find_files(tmp_path)
