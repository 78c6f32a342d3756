"""The two set-up commands say clearly what went wrong. That they work, CI shows by using them."""

import importlib
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType

import pytest

SCRIPTS = Path(__file__).resolve().parent.parent / "scripts"
CELLS = "cell,grade,samples,R_in_MOhm\nspar_01,sound,735,110.5\n"
TURNED_AWAY = "file,reason\nempty.swc,empty\n"


@pytest.fixture
def script(monkeypatch: pytest.MonkeyPatch) -> Callable[[str], ModuleType]:
    monkeypatch.syspath_prepend(str(SCRIPTS))
    return importlib.import_module


def test_an_old_python_is_named(
    script: Callable[[str], ModuleType], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> None:
    monkeypatch.setattr(sys, "version_info", (3, 10, 4, "final", 0))
    with pytest.raises(SystemExit, match=r"This is Python 3\.10; Morphotone needs 3\.11 or later"):
        script("environment").prepare(tmp_path / "venv", ".")
    assert not (tmp_path / "venv").exists()


def test_a_step_that_fails_ends_with_its_advice(script: Callable[[str], ModuleType]) -> None:
    command = [sys.executable, "-c", "raise SystemExit(3)"]
    with pytest.raises(SystemExit, match=r"Could not install it: .* exit code 3\. Ask the network\."):
        script("environment").run_step(command, "install it", "Ask the network.")


def test_an_environment_is_kept_only_if_it_works(script: Callable[[str], ModuleType], tmp_path: Path) -> None:
    usable = script("environment").usable
    assert usable(Path(sys.executable))
    assert not usable(tmp_path / "bin" / "python")


@pytest.fixture
def try_it(
    script: Callable[[str], ModuleType], monkeypatch: pytest.MonkeyPatch, tmp_path: Path
) -> Callable[..., int]:
    """Return try_it with a made-up survey: `try_it(exit code, {table: text})`, of two files."""
    module = script("try_it")
    samples, results = tmp_path / "samples", tmp_path / "results"
    (samples / "troubles").mkdir(parents=True)
    for name in ("spar_01.swc", "troubles/empty.swc"):
        (samples / name).touch()
    for name, value in {"CHECKOUT": tmp_path, "SAMPLES": samples, "RESULTS": results}.items():
        monkeypatch.setattr(module, name, value)
    monkeypatch.setattr(module, "prepare", lambda *_: Path(sys.executable))

    def run(code: int, tables: dict[str, str]) -> int:
        def survey(_: Path) -> int:
            for name, text in tables.items():
                results.mkdir(exist_ok=True)
                (results / name).write_text(text, encoding="utf-8")
            return code

        monkeypatch.setattr(module, "survey", survey)
        result: int = module.main()
        return result

    return run


def test_trying_it_explains_the_surveys_exit_code(
    try_it: Callable[..., int], capsys: pytest.CaptureFixture[str]
) -> None:
    assert try_it(1, {"cells.csv": CELLS, "turned_away.csv": TURNED_AWAY}) == 0
    shown = capsys.readouterr().out
    assert (
        "exit code was 1, as it should be here: 1 of the files in samples/troubles were turned away" in shown
    )
    assert "  spar_01                 sound                   735" in shown


@pytest.mark.parametrize(
    ("code", "tables"),
    [
        (1, {}),
        (0, {"cells.csv": CELLS, "turned_away.csv": TURNED_AWAY}),
        (2, {"cells.csv": CELLS, "turned_away.csv": TURNED_AWAY}),
        (1, {"cells.csv": CELLS}),
    ],
)
def test_a_survey_that_went_wrong_is_a_fault(
    try_it: Callable[..., int], capsys: pytest.CaptureFixture[str], code: int, tables: dict[str, str]
) -> None:
    assert try_it(code, tables) == 1
    assert f"This is a fault: the survey ended with exit code {code}" in capsys.readouterr().out
