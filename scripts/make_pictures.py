"""Draws the pictures that README shows, and writes its tables, into sample_morphologies/pictures.

    python scripts/make_pictures.py [--into FOLDER]

All are of the sample study. Pictures are small: enough to be read on a screen. The same versions of the
libraries give the same bytes. The page of the morning after holds times and the machine's name, so it is not
among them: `morphotone report` makes it.
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

import morphotone
from morphotone.showing.sheet import figure_bytes

STUDY = Path(__file__).resolve().parent.parent / "sample_morphologies"
FOLDER = STUDY / "pictures"
_DPI = 120


def map_of_a_cell() -> bytes:
    """Return the map of one cell with its sites, as `morphotone map` draws it."""
    assumptions = morphotone.Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    figure = morphotone.draw_map(STUDY / "spar_01.swc", assumptions, synapses=STUDY / "sites.csv")
    return figure_bytes(figure, "png", _DPI)


@cache
def tables_by_class() -> morphotone.Tabulated:
    """Return the study's classes summarised and compared, as `morphotone tabulate` does."""
    assumptions = morphotone.Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    with TemporaryDirectory() as results:
        morphotone.survey(STUDY, results, assumptions=replace(assumptions, hz=(100.0,)))
        return morphotone.tabulate(results, STUDY / "cells.csv", "class")


PICTURES: dict[str, Callable[[], bytes]] = {
    "map_spar_01.png": map_of_a_cell,
    "tables_by_class.md": lambda: tables_by_class().tables_markdown.encode(),
    "methods_by_class.md": lambda: tables_by_class().methods.encode(),
}


def main() -> None:
    """Draw every picture."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--into", metavar="FOLDER", type=Path, default=FOLDER)
    folder = parser.parse_args().into
    folder.mkdir(parents=True, exist_ok=True)
    for name, draw in PICTURES.items():
        (folder / name).write_bytes(draw())


if __name__ == "__main__":
    main()
