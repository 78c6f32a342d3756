"""README's pictures and tables: each is there, small, and what scripts/make_pictures.py makes now."""

import io
import re
import runpy
from pathlib import Path

import numpy as np
import pytest
from matplotlib.image import imread

CHECKOUT = Path(__file__).parents[1]
FOLDER = CHECKOUT / "sample_morphologies" / "pictures"
SCRIPT = runpy.run_path(str(CHECKOUT / "scripts" / "make_pictures.py"))
PICTURES = SCRIPT["PICTURES"]
README = (CHECKOUT / "README.md").read_text(encoding="utf-8")


def test_readme_shows_what_is_drawn_and_nothing_else():
    shown = re.findall(r"\[[^]]+\]\(sample_morphologies/pictures/([^)]+)\)", README)
    assert set(shown) == {*PICTURES, SCRIPT["PAGE_PICTURE"]} == {path.name for path in FOLDER.iterdir()}
    assert sum(path.stat().st_size for path in FOLDER.iterdir()) < 1_000_000


@pytest.mark.slow
@pytest.mark.parametrize("name", [name for name in PICTURES if name.endswith(".png")])
def test_a_picture_is_up_to_date(name):
    """Other versions of the libraries may move an edge by a dot, hence blocks of 8 by 8 dots."""
    kept, drawn = imread(FOLDER / name), imread(io.BytesIO(PICTURES[name]()))
    assert kept.shape == drawn.shape
    assert np.abs(blocks(kept) - blocks(drawn)).max() < 0.1


@pytest.mark.slow
@pytest.mark.parametrize(
    ("name", "end"), [("tables_by_class.md", "**Table 2.**"), ("methods_by_class.md", "**Soft")]
)
def test_a_text_is_up_to_date(name, end):
    """Up to where versions of the libraries come in: bootstrap intervals, and their own numbers."""
    kept, written = (
        text.decode().partition(end) for text in ((FOLDER / name).read_bytes(), PICTURES[name]())
    )
    assert kept[0] == written[0]
    assert kept[1] == written[1] == end


def test_readme_quotes_the_tables_and_the_methods_as_they_are():
    section = README.partition("## Groups for a paper")[2].partition("\n## ")[0]
    table = (FOLDER / "tables_by_class.md").read_text(encoding="utf-8")
    rows = [line for line in section.splitlines() if line.startswith("| ")]
    assert len(rows) == 5
    assert [row for row in rows if row not in table.splitlines()] == []
    methods = (FOLDER / "methods_by_class.md").read_text(encoding="utf-8")
    quoted = " ".join(line.removeprefix("> ") for line in section.splitlines() if line.startswith("> "))
    assert [part for part in quoted.split(" … ") if part not in methods] == []


def blocks(image):
    rows, columns = (length // 8 * 8 for length in image.shape[:2])
    return image[:rows, :columns, :3].reshape(rows // 8, 8, columns // 8, 8, 3).mean(axis=(1, 3))
