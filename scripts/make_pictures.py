"""Draws the pictures that README shows, from the sample study, into sample_morphologies/pictures.

    python scripts/make_pictures.py [--into FOLDER]

They are small: enough to be read on a screen. The same versions of the libraries give the same bytes.
"""

from __future__ import annotations

import argparse
from collections.abc import Callable
from pathlib import Path

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


PICTURES: dict[str, Callable[[], bytes]] = {"map_spar_01.png": map_of_a_cell}


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
