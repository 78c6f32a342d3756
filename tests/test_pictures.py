"""The pictures in README: each is there, small, and what scripts/make_pictures.py draws now."""

import io
import re
import runpy
from pathlib import Path

import numpy as np
import pytest
from matplotlib.image import imread

CHECKOUT = Path(__file__).parents[1]
FOLDER = CHECKOUT / "sample_morphologies" / "pictures"
PICTURES = runpy.run_path(str(CHECKOUT / "scripts" / "make_pictures.py"))["PICTURES"]
README = (CHECKOUT / "README.md").read_text(encoding="utf-8")


def test_readme_shows_what_is_drawn_and_nothing_else():
    shown = re.findall(r"!\[[^]]+\]\(sample_morphologies/pictures/([^)]+)\)", README)
    assert set(shown) == set(PICTURES) == {path.name for path in FOLDER.iterdir()}
    assert sum(path.stat().st_size for path in FOLDER.iterdir()) < 1_000_000


@pytest.mark.slow
@pytest.mark.parametrize("name", [name for name in PICTURES if name.endswith(".png")])
def test_a_picture_is_up_to_date(name):
    """Other versions of the libraries may move an edge by a dot, hence blocks of 8 by 8 dots."""
    kept, drawn = imread(FOLDER / name), imread(io.BytesIO(PICTURES[name]()))
    assert kept.shape == drawn.shape
    assert np.abs(blocks(kept) - blocks(drawn)).max() < 0.1


def blocks(image):
    rows, columns = (length // 8 * 8 for length in image.shape[:2])
    return image[:rows, :columns, :3].reshape(rows // 8, 8, columns // 8, 8, 3).mean(axis=(1, 3))
