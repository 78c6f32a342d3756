import joblib
import pytest

from tests.commands.folders import STUDY


@pytest.fixture
def beside_the_samples(tmp_path, monkeypatch):
    """Stand in a folder that has the sample study in it, on a machine of one processor."""
    (tmp_path / "sample_morphologies").symlink_to(STUDY, target_is_directory=True)
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(joblib, "cpu_count", lambda: 1)
    return tmp_path
