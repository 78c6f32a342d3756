"""Which files a folder holds: every one under a name that is the same on each machine."""

from __future__ import annotations

import os
import stat
import unicodedata
from collections import deque
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fnmatch import fnmatchcase
from pathlib import Path, PurePath

from morphotone.errors import MorphotoneError

PATTERNS = ("*.swc", "*.swc.gz")
_UNSEEN = frozenset({"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"})  # Unicode's controls, formats and line ends
_FORMULA = frozenset("=+-@")


@dataclass(frozen=True)
class Found:
    """One thing a folder holds that a run has to account for."""

    path: Path  #: where it is
    name: str  #: POSIX path below the folder; what tells it apart everywhere else
    size: int  #: bytes on disk
    problem: str = ""  #: why it cannot be opened, one sentence; empty when nothing is known against it


def find_files(
    folder: str | os.PathLike[str],
    patterns: Sequence[str] = PATTERNS,
    exclude: str | os.PathLike[str] | None = None,
) -> list[Found]:
    """List the files below a folder whose names match.

    Links to folders are followed; a folder that can be reached in several ways is listed once, under
    its own place if that lies below `folder`. Files and folders whose names start with "." are passed
    over: among them are the "._name.swc" companions that macOS leaves on other disks.

    A subfolder that cannot be listed, a link that leads nowhere and a pipe named like a file are part
    of the list, with their `problem` filled in, so that whoever counts the list counts them too.

    Parameters
    ----------
    folder : path
        Where to look, at any depth.
    patterns : sequence of str
        Shell-style patterns for the file's name; upper and lower case count as the same.
    exclude : path, optional
        A folder below `folder` that is not looked into (the results).

    Returns
    -------
    list of Found
        Sorted by the bytes of the name in UTF-8, at least one.

    Raises
    ------
    MorphotoneError
        The folder is missing, is no folder, cannot be listed, or holds no match.
    """
    top = Path(folder)
    _check_folder(top)
    wanted = tuple(pattern.lower() for pattern in patterns)
    found: list[Found] = []
    others = 0
    for path, error in _walk(top, exclude):
        if error is not None:
            sentence = f"this folder cannot be listed ({error.strerror}), so that what it holds is unknown"
            found.append(Found(path, written_name(path.relative_to(top)) + "/", 0, sentence))
        elif any(fnmatchcase(path.name.lower(), pattern) for pattern in wanted):
            found.append(_look_at(path, written_name(path.relative_to(top))))
        else:
            others += 1
    if not found:
        looked_for = " or ".join(patterns)
        raise MorphotoneError(f"{top}: no file named {looked_for} at any depth ({others} other files seen)")
    return sorted(found, key=lambda item: item.name.encode())


def _check_folder(top: Path) -> None:
    """Refuse at once what cannot be searched at all."""
    if not top.exists():
        raise MorphotoneError(
            f"{top}: there is no such file or folder; check the spelling, or that its disk is there"
        )
    if not top.is_dir():
        raise MorphotoneError(f"{top} is a file; give the folder that holds it")
    try:
        os.scandir(top).close()
    except OSError as error:
        raise MorphotoneError(f"{top}: the folder cannot be listed ({error.strerror})") from error


def _walk(top: Path, exclude: str | os.PathLike[str] | None) -> Iterator[tuple[Path, OSError | None]]:
    """Yield every visible file below `top`, and every folder that could not be listed with its error."""
    visited = {os.path.realpath(exclude)} if exclude is not None else set()
    visited.discard(os.path.realpath(top))
    # Links wait until the real folders are through: what has a place of its own is named by that place.
    waiting = deque([top])
    while waiting:
        errors: list[OSError] = []
        for place, folders, files in os.walk(waiting.popleft(), onerror=errors.append):
            real = os.path.realpath(place)
            if real in visited:
                folders.clear()
                continue
            visited.add(real)
            here = Path(place)
            folders[:] = sorted(name for name in folders if not name.startswith("."))
            waiting.extend(here / name for name in folders if (here / name).is_symlink())
            yield from ((here / name, None) for name in files if not name.startswith("."))
        yield from ((Path(error.filename), error) for error in errors)


def written_name(path: PurePath) -> str:
    r"""Return a path as one line of text that every table can hold.

    A byte that is no UTF-8 is written as \xNN. Written as \uNNNN: what breaks lines, hides or turns text, a
    first character that has spreadsheets take the name for a formula, and the backslash itself, so that
    no two names become one.
    """
    text = os.fsencode(path.as_posix()).decode("utf-8", "surrogateescape")
    kept = [not (unicodedata.category(character) in _UNSEEN or character == "\\") for character in text]
    if unicodedata.normalize("NFKC", text[0]) in _FORMULA:  # normalised: a full-width = is one too
        kept[0] = False
    return "".join(c if keep else _escaped(c) for c, keep in zip(text, kept, strict=True))


def _escaped(character: str) -> str:
    code = ord(character)
    if 0xDC80 <= code <= 0xDCFF:  # what surrogateescape makes of a byte that is no UTF-8
        return f"\\x{code - 0xDC00:02x}"
    return f"\\u{code:04x}" if code <= 0xFFFF else f"\\U{code:08x}"


def _look_at(path: Path, name: str) -> Found:
    """Take the size; a thing that is no regular file is never opened, since a pipe would wait forever."""
    try:
        status = path.stat()
    except OSError as error:
        return Found(path, name, 0, f"the file cannot be reached ({error.strerror}); is it a broken link?")
    if not stat.S_ISREG(status.st_mode):
        return Found(path, name, 0, "this is a pipe or a device, not a regular file")
    return Found(path, name, status.st_size)
