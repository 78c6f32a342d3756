from __future__ import annotations

from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from joblib.externals.loky import get_reusable_executor

from morphotone.night.folder import Found, find_files


@pytest.fixture
def numbers(tmp_path: Path) -> Path:
    """A folder of twelve files of numbers in two subfolders; "b/07.swc" holds a negative one."""
    folder = tmp_path / "numbers"
    for index in range(12):
        path = folder / ("a" if index % 2 == 0 else "b") / f"{index:02}.swc"
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(f"{index}\n{-1 if index == 7 else index + 0.5}\n", encoding="utf-8")
    return folder


@pytest.fixture
def found(numbers: Path) -> Callable[[], list[Found]]:
    return lambda: find_files(numbers)


@pytest.fixture(autouse=True, scope="session")
def _workers_end() -> Iterator[None]:
    """End the workers that joblib keeps for reuse, so that none outlives the tests."""
    yield
    get_reusable_executor().shutdown(wait=True, kill_workers=True)
