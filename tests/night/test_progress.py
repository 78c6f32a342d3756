from __future__ import annotations

import io

import pytest

from morphotone.night.progress import Bar, Lines, Silent, Step, describe, progress_on


class Terminal(io.StringIO):
    def isatty(self) -> bool:
        return True


class Clock:
    def __init__(self) -> None:
        self.now = 1000.0

    def __call__(self) -> float:
        return self.now


def test_a_line_only_after_the_interval_and_one_at_the_end() -> None:
    stream, clock = io.StringIO(), Clock()
    lines = Lines(stream, interval=60.0, clock=clock)
    lines.begin(files=10, size=1000)
    for seconds in (20, 20, 30, 30, 29, 61):  # in sum 20, 40, 70 (line), 100, 129, 190 (line)
        clock.now += seconds
        lines.advance(Step(files=1, size=100, samples=500, turned_away=int(seconds == 29)))
    clock.now += 10
    lines.end()
    # 3 files in 70 s; 300 of 1000 bytes done, 70 x 700/300 = 163 s left
    # 6 files in 190 s; 600 of 1000 bytes done, 190 x 400/600 = 126.7 s left; at 200 s 133 s left
    assert stream.getvalue().splitlines() == [
        "3/10 files, 1.50k samples, 0.04 files/s, 0 turned away, 01:10 passed, about 02:43 left",
        "6/10 files, 3.00k samples, 0.03 files/s, 1 turned away, 03:10 passed, about 02:06 left",
        "6/10 files, 3.00k samples, 0.03 files/s, 1 turned away, 03:20 passed, about 02:13 left",
    ]


def test_a_run_that_is_through_has_no_time_left() -> None:
    line = describe(Step(2, 200, 10, 0), Step(2, 200), seconds=4.0)
    assert line == "2/2 files, 10 samples, 0.50 files/s, 0 turned away, 00:04 passed"


def test_nothing_done_and_no_time_passed() -> None:
    assert describe(Step(), Step(2, 200), seconds=0.0).endswith("0.00 files/s, 0 turned away, 00:00 passed")


def test_a_terminal_gets_a_bar_and_a_log_gets_lines() -> None:
    assert isinstance(progress_on(Terminal()), Bar)
    assert isinstance(progress_on(io.StringIO()), Lines)


@pytest.mark.parametrize("size", [400, 0])
def test_the_bar_counts_bytes_and_ends_on_a_new_line(size: int) -> None:
    stream = Terminal()
    bar = Bar(stream)
    bar.begin(files=4, size=size)
    bar.advance(Step(files=1, size=size // 2, samples=500, turned_away=1))
    bar.end()
    last = stream.getvalue().split("\r")[-1]
    assert last.startswith(" 50%" if size else "  0%")
    assert "1/4 files, 500 samples" in last
    assert "1 turned away" in last
    assert last.endswith("\n")


def test_silence(capfd: pytest.CaptureFixture[str]) -> None:
    silent = Silent()
    silent.begin(1, 1)
    silent.advance(Step(1, 1, 1, 1))
    silent.end()
    assert capfd.readouterr() == ("", "")
