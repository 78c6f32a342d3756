"""The program as a whole: help, version, commands there are and are not, exit codes, what is loaded when."""

import re
import signal
import subprocess
import sys
from importlib.metadata import version
from types import SimpleNamespace

import pytest

from morphotone import commands
from morphotone.commands import COMMANDS, survey
from morphotone.errors import AssumptionError, MorphotoneError, ReadingError, ResultsError, TurnedAwayError
from tests.commands.folders import SOUND, called, examples, fill, run


@pytest.mark.parametrize("words", [["--help"], []])
def test_help_names_every_command_and_an_example(words, capsys):
    assert run(*words) == (0 if words else 2)
    text = " ".join(capsys.readouterr().out.split())
    for name, question in COMMANDS.items():
        assert f"{name} {question}" in text
    assert "not for clinical or device decisions" in text


@pytest.mark.parametrize("name", COMMANDS)
def test_help_of_a_command_has_its_question_an_example_and_its_exit_codes(name, capsys):
    assert run(name, "--help") == 0
    text = capsys.readouterr().out
    assert text.startswith(f"usage: morphotone {name} ")
    assert COMMANDS[name][1:] in " ".join(text.split())
    assert f"  morphotone {name} " in text.partition("example:")[2]
    assert re.search(r"exit code: 0 .* 2 ", text.replace("\n", " "))


@pytest.mark.parametrize(("name", "codes"), [("", [1]), ("vet", [1, 1, 0]), ("assumptions", [0, 0])])
def test_the_examples_of_help_work(beside_the_samples, capsys, name, codes):
    """Those of survey have a test of their own, which looks at the results."""
    assert [called(line, capsys) for line in examples(capsys, name)] == codes
    assert "Traceback" not in capsys.readouterr().err


def test_every_command_has_its_example_tried():
    assert set(COMMANDS) == {"vet", "survey", "map", "rank", "tabulate", "report", "assumptions"}


def test_version(capsys):
    assert run("--version") == 0
    assert capsys.readouterr().out == f"morphotone {version('morphotone')}\n"


@pytest.mark.parametrize("words", [["analyse"], ["--loud"], ["analyse", "survey"], ["vet", "--loud", "x"]])
def test_unknown_words_are_exit_code_2(words, capsys):
    assert run(*words) == 2
    printed = capsys.readouterr()
    assert printed.out == ""
    assert printed.err.startswith("usage: morphotone")
    assert "error: " in printed.err.splitlines()[-1]


def test_a_file_may_have_a_commands_name(tmp_path, monkeypatch, capsys):
    fill(tmp_path, {"survey": SOUND, "vet/x.swc": SOUND})
    monkeypatch.chdir(tmp_path)
    assert run("vet", "survey") == 0
    assert capsys.readouterr().out.startswith("file    grade")
    assert run("survey", "vet", "--into", "assumptions", "--workers", "1") == 0


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (MorphotoneError("it went wrong"), 2),
        (TurnedAwayError("it went wrong"), 1),
        (ReadingError("it went wrong", "why"), 2),
        (AssumptionError("it went wrong"), 2),
        (ResultsError("it went wrong"), 2),
    ],
)
def test_each_error_of_ours_is_one_line_and_an_exit_code(monkeypatch, capsys, error, code):
    def fails(args):
        raise error

    monkeypatch.setattr(survey, "run", fails)
    assert run("survey", "x", "--into", "y") == code
    assert capsys.readouterr().err == "morphotone survey: it went wrong\n"


def test_an_interrupt_is_exit_code_130(monkeypatch, capsys):
    def interrupted(args):
        raise KeyboardInterrupt

    monkeypatch.setattr(survey, "run", interrupted)
    assert run("survey", "x", "--into", "y") == 130
    assert capsys.readouterr().err == "interrupted; the same command goes on from here\n"


def test_a_fault_of_the_program_shows_itself(monkeypatch):
    def faulty(args):
        raise ZeroDivisionError("on purpose")

    monkeypatch.setattr(survey, "run", faulty)
    with pytest.raises(ZeroDivisionError, match="on purpose"):
        run("survey", "x", "--into", "y")


def test_as_a_process_it_leaves_with_its_code_and_prints_utf_8(tmp_path):
    fill(tmp_path, {"µ.swc": SOUND, "no.swc": ""})
    command = [sys.executable, "-X", "utf8=0", "-m", "morphotone", "vet", str(tmp_path)]
    done = subprocess.run(command, capture_output=True, check=False, env={"LC_ALL": "C", "PATH": ""})
    assert done.returncode == 1
    assert done.stderr == b""
    assert "µ.swc" in done.stdout.decode("utf-8")


@pytest.mark.skipif(sys.platform == "win32", reason="signals to a process are a POSIX matter")
def test_a_signal_to_end_is_an_interrupt_and_a_second_one_does_not_break_it_off(monkeypatch, capsys):
    before = signal.getsignal(signal.SIGTERM)
    cleaned_up = []

    def interrupted(args):
        try:
            signal.raise_signal(signal.SIGTERM)
        except KeyboardInterrupt as error:
            signal.raise_signal(signal.SIGINT)
            cleaned_up.append(str(error))
            raise

    monkeypatch.setattr(survey, "run", interrupted)
    assert run("survey", "x", "--into", "y") == 130
    assert cleaned_up == ["SIGTERM"]
    assert capsys.readouterr().err == "interrupted; the same command goes on from here\n"
    assert signal.getsignal(signal.SIGTERM) is before


@pytest.mark.skipif(sys.platform == "win32", reason="signals to a process are a POSIX matter")
def test_who_keeps_asking_is_heard_again_after_some_seconds(monkeypatch):
    clock, heard = iter([100.0, 100.0, 103.0, 106.0, 106.0]), []
    monkeypatch.setattr(commands, "time", SimpleNamespace(monotonic=lambda: next(clock)))

    def asked(args):
        for _ in range(3):
            try:
                signal.raise_signal(signal.SIGINT)
            except KeyboardInterrupt as error:
                heard.append(str(error))
        return 0

    monkeypatch.setattr(survey, "run", asked)
    assert run("survey", "x", "--into", "y") == 0
    assert heard == ["SIGINT", "SIGINT"]


def test_an_interrupt_while_libraries_are_loaded_is_one_too(monkeypatch, capsys):
    def interrupted(name):
        raise KeyboardInterrupt

    monkeypatch.setattr(commands, "import_module", interrupted)
    assert run("survey", "x", "--into", "y") == 130
    assert capsys.readouterr().err == "interrupted; the same command goes on from here\n"


@pytest.mark.skipif(not hasattr(signal, "SIGHUP"), reason="no terminal hangs up on Windows")
def test_a_signal_that_was_to_be_ignored_stays_ignored(monkeypatch):
    before = signal.signal(signal.SIGHUP, signal.SIG_IGN)  # as nohup does
    monkeypatch.setattr(survey, "run", lambda args: signal.raise_signal(signal.SIGHUP) or 0)
    try:
        assert run("survey", "x", "--into", "y") == 0
    finally:
        signal.signal(signal.SIGHUP, before)
