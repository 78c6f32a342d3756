from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Mapping, Sequence
from functools import partial
from pathlib import Path
from types import SimpleNamespace

import pandas as pd
import pytest

from morphotone.errors import MorphotoneError
from morphotone.night import pool as pools
from morphotone.night import runner
from morphotone.night.folder import Found, find_files
from morphotone.night.ledger import Ledger
from morphotone.night.limits import Limits
from morphotone.night.outcome import BatchFunction, Item, Outcome
from morphotone.night.pool import WorkerDiedError, in_processes, in_this_process, pool_of
from morphotone.night.progress import Step
from morphotone.night.results import export
from morphotone.night.runner import Tally, run
from morphotone.night.sitting import Nobody, Sitting
from tests.night import roots

SMALL = 12_000  # bytes: three of the small files a batch, with what opening each of them costs

both = pytest.mark.parametrize("workers", [1, 2])


class Listener:
    """Keeps what it is told."""

    def __init__(self) -> None:
        self.told: list[object] = []

    def begin(self, files: int, size: int) -> None:
        self.told.append((files, size))

    def advance(self, step: Step) -> None:
        self.told.append(step)

    def end(self) -> None:
        self.told.append("end")


def night(
    found: list[Found], function: BatchFunction, results: Path, workers: int = 1, **options: object
) -> Tally:
    """One run as a command makes it, with its tables."""
    with Ledger(results, {}) as ledger:
        tally = run(
            found,
            function,
            ledger=ledger,
            pool=pool_of(workers),
            batch_bytes=SMALL,
            **options,  # type: ignore[arg-type]
        )
        export(ledger, [file.name for file in found], roots.TABLES)
    return tally


def turned_away(results: Path) -> dict[str, str]:
    table = pd.read_csv(results / "turned_away.csv")
    return dict(zip(table["file"], table["reason"] + ": " + table["sentence"], strict=True))


def tables(results: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in results.glob("*.csv")}


@both
def test_every_file_is_accounted_for(found: Callable[[], list[Found]], tmp_path: Path, workers: int) -> None:
    tally = night(found(), roots.roots, tmp_path / "out", workers)
    assert tally == Tally(found=12, analysed=11, turned_away=1, unchanged=0, samples=24)
    table = pd.read_csv(tmp_path / "out" / "roots.csv")
    assert list(table["file"].unique()) == [file.name for file in found() if file.name != "b/07.swc"]
    assert (table["root"] == table["number"] ** 0.5).all()
    assert turned_away(tmp_path / "out") == {"b/07.swc": "negative: no root of -1.0"}


def test_the_same_bytes_for_any_number_of_workers(found: Callable[[], list[Found]], tmp_path: Path) -> None:
    for workers in (1, 2, 3):
        night(found(), roots.roots, tmp_path / str(workers), workers)
    assert tables(tmp_path / "1") == tables(tmp_path / "2") == tables(tmp_path / "3")


@both
def test_what_is_finished_is_not_computed_again(
    found: Callable[[], list[Found]], numbers: Path, tmp_path: Path, workers: int
) -> None:
    diary, out = tmp_path / "diary", tmp_path / "out"
    function = partial(roots.roots_noted, diary=diary)
    first = night(found(), function, out, workers)
    before = tables(out)
    assert sorted(diary.read_text(encoding="utf-8").split()) == [file.name for file in found()]
    diary.unlink()

    assert night(found(), function, out, workers) == Tally(12, 11, 1, unchanged=12, samples=24)
    assert first.unchanged == 0
    assert diary.read_text(encoding="utf-8") == ""
    assert tables(out) == before

    (numbers / "a" / "04.swc").write_text("9\n", encoding="utf-8")
    (numbers / "b" / "07.swc").write_text("4\n", encoding="utf-8")
    (numbers / "a" / "00.swc").unlink()
    (numbers / "new.swc").write_text("16\n", encoding="utf-8")
    assert night(found(), function, out, workers) == Tally(12, 12, 0, unchanged=9, samples=21)
    assert sorted(diary.read_text(encoding="utf-8").split()) == ["a/04.swc", "b/07.swc", "new.swc"]
    table = pd.read_csv(out / "roots.csv").set_index("file")["root"]
    assert table["a/04.swc"] == 3.0
    assert "a/00.swc" not in table.index
    assert turned_away(out) == {}


@both
def test_a_fault_of_the_program_costs_one_file(
    found: Callable[[], list[Found]], tmp_path: Path, workers: int
) -> None:
    function = partial(roots.roots_but, culprit="a/04.swc")
    tally = night(found(), function, tmp_path / "out", workers)
    assert (tally.analysed, tally.turned_away) == (10, 2)
    said = turned_away(tmp_path / "out")
    assert list(said) == ["a/04.swc", "b/07.swc"]
    assert said["a/04.swc"].startswith(
        "program_error: ZeroDivisionError: what nobody thought of (roots.py, line "
    )
    # the next run, of a mended program, takes it up again
    assert night(found(), roots.roots, tmp_path / "out", workers) == Tally(12, 11, 1, 11, 24)


@both
@pytest.mark.parametrize(
    ("function", "expected"),
    [
        (roots.roots_forgetful, r"RuntimeError: outcomes are for \[\], expected \['a/00.swc'\]"),
        (roots.roots_unfounded, r"RuntimeError: a/00.swc is called unchanged, but its hash is not the known"),
        (roots.roots_unended, r"ValueError: a/00.swc: part 'roots' ends with b'1\\n'"),
    ],
)
def test_a_function_that_breaks_its_word_loses_nothing_in_silence(
    found: Callable[[], list[Found]], tmp_path: Path, workers: int, function: BatchFunction, expected: str
) -> None:
    tally = night(found(), function, tmp_path / "out", workers)
    assert tally == Tally(12, 0, 12, 0, 0)
    said = pd.Series(turned_away(tmp_path / "out"))
    assert said.str.startswith("program_error").all()
    assert said[:1].str.contains(expected).all()


@pytest.mark.parametrize("workers", [2, 3])
def test_a_worker_that_dies_costs_one_file(
    found: Callable[[], list[Found]], tmp_path: Path, workers: int
) -> None:
    function = partial(roots.roots_deadly, culprit="a/04.swc")
    tally = night(found(), function, tmp_path / "out", workers)
    assert (tally.analysed, tally.turned_away) == (10, 2)
    said = turned_away(tmp_path / "out")
    assert said["a/04.swc"].startswith("worker_died: the process that worked on this file was ended")


@pytest.mark.slow
def test_one_death_is_not_held_against_a_file_that_is_well_alone(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    function = partial(roots.roots_unlucky, culprit="a/04.swc", deaths=tmp_path / "deaths")
    assert night(found(), function, tmp_path / "out", workers=2).analysed == 11
    assert (tmp_path / "deaths").read_text(encoding="utf-8") == "died\n" * 2


@pytest.mark.slow
def test_the_file_beyond_a_limit_is_found_and_the_others_go_on(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    limits = Limits(seconds=1.0, size=300_000_000, grace=1.0)
    function = partial(roots.roots_hungry, slow="a/02.swc", stalled="b/03.swc", greedy="b/05.swc")
    assert night(found(), function, tmp_path / "out", workers=2, limits=limits).analysed == 8
    said = turned_away(tmp_path / "out")
    assert said["a/02.swc"].startswith("too_long: this file took longer than 0.0166667 minutes, the limit")
    assert said["b/03.swc"].startswith("too_long: this file took longer than")
    if sys.platform == "linux":
        assert said["b/05.swc"].startswith("too_large: this file needs more memory than 0.3 GB, the limit")
    # none is held for known: the next run tries them all again
    assert night(found(), roots.roots, tmp_path / "out").unchanged == 9


def test_what_happens_is_witnessed(found: Callable[[], list[Found]], tmp_path: Path) -> None:
    with Ledger(tmp_path / "out", {}) as ledger, Sitting(ledger, "ab12") as sitting:
        function = partial(roots.roots_deadly, culprit="a/04.swc")
        run(found(), function, ledger=ledger, pool=pool_of(2), batch_bytes=1, witness=sitting)
        sitting.end("ended")
        (facts,) = ledger.sittings()
    assert (facts["entered"], facts["how"]) == ({"analysed": 10, "turned_away": 2}, "ended")
    log = (tmp_path / "out" / "log.txt").read_text(encoding="utf-8")
    assert "assumptions' SHA-256 ab12" in log
    assert "a worker died; " in log
    assert "turned away: b/07.swc: negative: no root of -1.0\n" in log


@pytest.mark.slow
@pytest.mark.skipif(sys.platform == "win32", reason="results go another way there")
def test_a_worker_killed_while_it_hands_over_does_not_stop_the_night(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    pool = in_processes(2)
    items = [Item(file.name, file.path, None) for file in found()]
    function = partial(roots.roots_cut_off, culprit="a/00.swc")
    work = pool({index: [item] for index, item in enumerate(items[:2])}, [], roots.roots)
    assert sum(done is not None for done in work) == 2  # the workers are there
    work = pool({index: [item] for index, item in enumerate(items[:2])}, [], function)
    with pytest.raises(WorkerDiedError, match="ended while it handed over"):
        list(work)
    assert [len(done[1]) for done in pool({0: items}, [], roots.roots) if done is not None] == [12]


def test_another_joblib_costs_the_search_for_such_a_worker_not_the_night() -> None:
    executor = SimpleNamespace(_processes={1: SimpleNamespace(exitcode=-9)})
    assert pools._check_workers(executor) is None
    assert pools._check_workers(object()) is None


def test_workers_end_with_the_run_even_if_somebody_keeps_its_error(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    """As an interactive Python does; they would be ended much later, maybe those of another run by then."""
    left = []

    def pool(waiting, handed_out, function):  # type: ignore[no-untyped-def]
        try:
            yield from in_this_process(waiting, handed_out, function)
        finally:
            left.append(True)

    class Interrupted(Nobody):
        def enter(self, outcomes: Sequence[Outcome], seconds: Mapping[str, float]) -> None:
            if outcomes:
                raise KeyboardInterrupt

    with Ledger(tmp_path / "out", {}) as ledger, pytest.raises(KeyboardInterrupt) as kept:
        run(found(), roots.roots, ledger=ledger, pool=pool, witness=Interrupted())
    assert left == [True]
    assert kept.tb


def test_work_is_handed_out_no_faster_than_outcomes_are_taken(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    with Ledger(tmp_path / "out", {}) as ledger:
        batches = runner._batches(found(), ledger.known(), batch_bytes=1)
    handed_out: list[int] = []
    pool = in_processes(2)(dict(enumerate(batches)), handed_out, roots.roots)
    assert any(done is not None for done in pool)
    time.sleep(0.3)  # long enough for the workers to finish everything, if they were given it
    assert len(handed_out) == 4
    assert sum(done is not None for done in pool) == 11
    assert handed_out == list(range(12))


def test_a_worker_has_one_thread_of_linear_algebra(found: Callable[[], list[Found]], tmp_path: Path) -> None:
    night(found(), roots.roots_with_threads, tmp_path / "out", workers=2)
    assert set(pd.read_csv(tmp_path / "out" / "roots.csv")["number"]) == {1}


@both
def test_strict_stops_at_the_first_file_turned_away(
    found: Callable[[], list[Found]], tmp_path: Path, workers: int
) -> None:
    expected = r"stopped at the first file turned away .*: b/07\.swc,negative,no root of -1\.0"
    # the second time, when the ledger knows the file already, all the same
    for _ in range(2):
        with pytest.raises(MorphotoneError, match=expected):
            night(found(), roots.roots, tmp_path / "out", workers, strict=True)
    with Ledger(tmp_path / "out", {}) as ledger:
        assert ledger.known()["b/07.swc"].status == "turned away"


def test_workers_do_not_go_on_after_strict_has_stopped(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    diary = tmp_path / "diary"
    bad, *others = sorted(found(), key=lambda file: file.name != "b/07.swc")
    with Ledger(tmp_path / "out", {}) as ledger, pytest.raises(MorphotoneError, match="stopped at the first"):
        run(
            [bad, *others],
            partial(roots.roots_slow, diary=diary),
            ledger=ledger,
            pool=pool_of(2),
            batch_bytes=1,
            strict=True,
        )
    time.sleep(1.5)
    assert not diary.exists()


def test_strict_says_nothing_when_all_is_well(found: Callable[[], list[Found]], tmp_path: Path) -> None:
    good = [file for file in found() if file.name != "b/07.swc"]
    assert night(good, roots.roots, tmp_path / "out", strict=True).analysed == 11


def test_an_interruption_leaves_the_finished_batches(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    function = partial(roots.roots_interrupted, at="b/03.swc")
    listener = Listener()
    with pytest.raises(KeyboardInterrupt, match=r"^$"):
        night(found(), function, tmp_path / "out", progress=listener)
    with Ledger(tmp_path / "out", {}) as ledger:
        assert list(ledger.known()) == [f"a/{index:02}.swc" for index in range(0, 12, 2)]
    assert listener.told[-1] == "end"
    assert night(found(), roots.roots, tmp_path / "out") == Tally(12, 11, 1, 6, 24)


def test_what_cannot_be_opened_is_turned_away_unopened(
    found: Callable[[], list[Found]], tmp_path: Path
) -> None:
    spoilt = [*found(), Found(tmp_path / "shut", "shut/", 0, "this folder cannot be listed")]
    listener = Listener()
    tally = night(spoilt, roots.roots, tmp_path / "out", progress=listener)
    assert tally == Tally(13, 11, 2, 0, 24)
    assert turned_away(tmp_path / "out")["shut/"] == "unreadable: this folder cannot be listed"
    assert listener.told[1] == Step(files=1, turned_away=1)


@both
def test_progress_hears_of_everything(found: Callable[[], list[Found]], tmp_path: Path, workers: int) -> None:
    size = sum(file.size for file in found())
    for _ in range(2):  # files that are unchanged count like the others
        listener = Listener()
        night(found(), roots.roots, tmp_path / "out", workers, progress=listener)
        begin, *steps, end = listener.told
        assert (begin, end) == ((12, size), "end")
        assert sum(steps, Step()) == Step(12, size, 24, 1)  # type: ignore[arg-type]


def test_batches_depend_on_the_files_alone(tmp_path: Path) -> None:
    files = [
        Found(tmp_path / str(i), str(i), size) for i, size in enumerate([10, 10, 99_999, 10, 10, 10, 10])
    ]
    with Ledger(tmp_path / "out", {}) as ledger:
        ledger.record([Outcome("1", "analysed", "h")])
        batches = list(runner._batches(files, ledger.known(), SMALL))
    assert [[item.name for item in batch] for batch in batches] == [["0", "1", "2"], ["3", "4", "5"], ["6"]]
    assert batches[0][1] == Item("1", tmp_path / "1", "h")
    assert batches[0][0].known_sha256 is None


@pytest.mark.parametrize(("whole", "expected"), [(1, 600_000), (16_000_000, 1_016_000), (10**9, 2_000_000)])
def test_batches_are_as_large_as_suits_the_whole(tmp_path: Path, whole: int, expected: int) -> None:
    files = [Found(tmp_path / str(index), str(index), whole // 64) for index in range(64)]
    assert runner._suitable_bytes(files) == expected


def test_two_files_of_one_name_are_refused(found: Callable[[], list[Found]], tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="two of the files found have the same name"):
        night([*found(), found()[0]], roots.roots, tmp_path / "out")


def test_a_run_that_loses_files_is_loud(
    found: Callable[[], list[Found]], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(runner, "finished", lambda *_: (nothing for nothing in ()))
    with pytest.raises(RuntimeError, match="12 files were found, but 0 analysed and 0 turned away"):
        night(found(), roots.roots, tmp_path / "out")


INTERRUPTED = """
import sys, time
from pathlib import Path
from morphotone.night.folder import find_files
from morphotone.night.ledger import Ledger
from morphotone.night.pool import pool_of
from morphotone.night.runner import run
from tests.night.roots import roots_large

class Herald:
    def begin(self, files, size): pass
    def advance(self, step):
        if step.files:
            print("batch", flush=True)
            time.sleep(0.2)
    def end(self): print("end", flush=True)

with Ledger(Path(sys.argv[2]), {}) as ledger:
    try:
        found, two = find_files(sys.argv[1]), pool_of(2)
        run(found, roots_large, ledger=ledger, progress=Herald(), pool=two, batch_bytes=1)
    except KeyboardInterrupt:
        sys.exit(130)
"""


def _control_c(run: int) -> None:
    os.killpg(run, signal.SIGINT)  # a terminal sends it to the run and its workers


def _kill(run: int) -> None:
    os.kill(run, signal.SIGKILL)


@pytest.mark.slow
@pytest.mark.skipif(sys.platform == "win32", reason="signals to a process group are a POSIX matter")
@pytest.mark.parametrize(("stop", "code"), [(_control_c, 130), (_kill, -9)])
def test_a_stopped_run_keeps_what_is_finished_and_leaves_no_workers(
    numbers: Path, tmp_path: Path, stop: Callable[[int], None], code: int
) -> None:
    child = subprocess.Popen(
        [sys.executable, "-c", INTERRUPTED, str(numbers), str(tmp_path / "out")],
        stdout=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    assert child.stdout is not None
    assert [child.stdout.readline() for _ in range(3)] == ["batch\n"] * 3
    stop(child.pid)
    child.communicate(timeout=30)
    assert child.returncode == code
    with Ledger(tmp_path / "out", {}) as ledger:
        assert 3 <= len(ledger.known()) < 12
    deadline = time.monotonic() + 20
    while _group_lives(child.pid) and time.monotonic() < deadline:
        time.sleep(0.1)
    assert not _group_lives(child.pid)
    assert night(find_files(numbers), roots.roots, tmp_path / "out").analysed == 11


def _group_lives(group: int) -> bool:
    try:
        os.killpg(group, 0)
    except ProcessLookupError:
        return False
    return True
