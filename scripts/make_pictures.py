"""Draws the pictures that README shows, and writes its tables, into sample_morphologies/pictures.

    python scripts/make_pictures.py [--into FOLDER] [--page]

All are of the sample study. Pictures are small: enough to be read on a screen. The same versions of the
libraries give the same bytes. With --page the page of the morning after is made too, with a picture of a part
of it for which Chromium and its driver are needed; it holds times and the machine's name, so that no two are
the same.
"""

from __future__ import annotations

import argparse
import shutil
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path
from tempfile import TemporaryDirectory

from selenium import webdriver

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


def survey_into(results: str) -> None:
    """Survey the study, at 0 and 100 Hz."""
    assumptions = morphotone.Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    morphotone.survey(STUDY, results, assumptions=replace(assumptions, hz=(100.0,)))


@cache
def tables_by_class() -> morphotone.Tabulated:
    """Return the study's classes summarised and compared, as `morphotone tabulate` does."""
    with TemporaryDirectory() as results:
        survey_into(results)
        return morphotone.tabulate(results, STUDY / "cells.csv", "class")


PAGE_PICTURE = "report_spread.png"
PICTURES: dict[str, Callable[[], bytes]] = {
    "map_spar_01.png": map_of_a_cell,
    "tables_by_class.md": lambda: tables_by_class().tables_markdown.encode(),
    "methods_by_class.md": lambda: tables_by_class().methods.encode(),
}


def write_page(folder: Path) -> None:
    """Write the study's page of the morning after, and a picture of how its cells spread."""
    page = folder.resolve() / "report.html"
    with TemporaryDirectory() as results:
        survey_into(results)
        morphotone.report(results, STUDY / "cells.csv", "class", into=page)
    options = webdriver.ChromeOptions()
    for word in ("headless=new", "no-sandbox", "disable-gpu", "hide-scrollbars", "window-size=1000,700"):
        options.add_argument(f"--{word}")
    browser = webdriver.Chrome(options, webdriver.ChromeService(shutil.which("chromedriver")))
    try:
        browser.get(f"{page.as_uri()}#spread")
        browser.save_screenshot(str(folder / PAGE_PICTURE))
    finally:
        browser.quit()


def main() -> None:
    """Draw every picture."""
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--into", metavar="FOLDER", type=Path, default=FOLDER)
    parser.add_argument("--page", action="store_true")
    args = parser.parse_args()
    folder = args.into
    folder.mkdir(parents=True, exist_ok=True)
    for name, draw in PICTURES.items():
        (folder / name).write_bytes(draw())
    if args.page:
        write_page(folder)


if __name__ == "__main__":
    main()
