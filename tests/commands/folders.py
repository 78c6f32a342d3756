"""Small folders of files, and the command line as a person calls it."""

import csv
import re
import shlex
from pathlib import Path

from morphotone.commands import main
from tests import trees

CHECKOUT = Path(__file__).resolve().parents[2]
STUDY = CHECKOUT / "sample_morphologies"

SOUND = trees.with_axon()
BROKEN = "1 1 0 0 0 5 -1\n2 3 50 0 0 x 1\n"
DOUBTFUL = trees.cylinder()  # no soma
UNFIT = trees.scaled(trees.irregular(60, 4, soma=True), 1000.0, 1000.0)  # nanometres

SMALL = {
    "b.swc": trees.ball_and_stick(),
    "a.swc": SOUND,
    "deep/er/c.SWC": trees.soma_chain(),
    "deep/broken.swc": BROKEN,
    "deep/unfit.swc": UNFIT,
    "note.txt": "not asked for",
}
SMALL_FOUND = ["a.swc", "b.swc", "deep/broken.swc", "deep/er/c.SWC", "deep/unfit.swc"]


def fill(folder, files):
    """Write files, text or bytes, by their path below a folder."""
    for name, content in files.items():
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
    return folder


def run(*words):
    """Call the command line and return its exit code."""
    try:
        return main([str(word) for word in words])
    except SystemExit as left:  # argparse leaves by itself: --help, wrong usage
        return left.code


def rows(path):
    """Return a CSV file's rows, one dict each, by the standard library."""
    with path.open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream, strict=True))


def tables(results):
    """Return path below the results folder -> bytes, of all that must not depend on how a run went."""
    return {
        path.relative_to(results).as_posix(): path.read_bytes()
        for path in sorted(results.rglob("*"))
        if path.suffix in (".csv", ".toml")
    }


def examples(capsys, name):
    """Return the command lines under "example:" in a command's help ("": the program's), remarks left out."""
    assert run(*([name] if name else []), "--help") == 0
    _, _, after = capsys.readouterr().out.partition("example:\n")
    block = after.partition("\n\n")[0]
    return [re.split(r"\s{2,}", line.strip())[0] for line in block.splitlines()]


def called(line, capsys):
    """Run one command line in this process, with `>` as the shell would have it; return its exit code."""
    program, *words = shlex.split(line)
    assert program == "morphotone"
    words, _, target = (words[:-2], *words[-2:]) if ">" in words else (words, "", "")
    code = run(*words)
    if target:
        Path(target).write_text(capsys.readouterr().out, encoding="utf-8")
    return code
