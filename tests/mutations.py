"""Good files made bad: in their bytes, lines, numbers and structure; the same for the same number."""

import gzip
from collections.abc import Callable
from pathlib import Path

import numpy as np

Random = np.random.Generator

STRANGE_NUMBERS = [
    *(
        b"nan",
        b"inf",
        b"-inf",
        b"1e308",
        b"-1e308",
        b"1e-308",
        b"5e-324",
        b"1e400",
        b"-0",
        b"0",
        b"-1",
        b"1e12",
    ),
    *(
        b"1e-12",
        b"2147483648",
        b"9223372036854775808",
        b"18446744073709551617",
        b"0x10",
        b"1_000",
        b"1,5",
        b"--3",
    ),
    *(
        b"NA",
        b"None",
        b"",
        b"=1+1",
        b"1e",
        b".",
        b"+",
        b"1.5.2",
        "１２".encode(),
        b"\x00",
        b"1e5",
        b"3.0",
        b"1.5",
    ),
]
STRANGE_LINES = [
    *(
        b"",
        b"#",
        b"# =cmd()",
        b"\x00\x00",
        b"1 1 0 0 0 1",
        b"1 1 0 0 0 1 -1",
        b"0 3 0 0 0 1 0",
        b"\xff\xfe",
        b"\x1a",
    ),
    *(b"7 3 1e308 -1e308 1e308 1 1", b"-1 3 0 0 0 1 -1", b"99999999 3 0 0 0 1 1", b"1 3 0 0 0 1 1" * 20),
]


def mutated(text: bytes, number: int) -> bytes:
    """Return a file of its own for each number: mostly one mutation of the text, at most four."""
    random = np.random.default_rng(number)
    for _ in range(1 + random.binomial(3, 0.1)):
        text = KINDS[random.integers(len(KINDS))](text, random)
    return text


def write_mutations(folder: Path, originals: list[bytes], count: int) -> None:
    """Write so many mutated files into a folder, in some subfolders, some of them compressed."""
    for number in range(count):
        text = mutated(originals[number % len(originals)], number)
        packed = number % 50 == 7
        place = folder / f"{number % 13:02}" / f"m{number:05}.swc{'.gz' if packed else ''}"
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_bytes(gzip.compress(text, mtime=0) if packed else text)


def _a_byte(text: bytes, random: Random) -> bytes:
    place = int(random.integers(len(text) + 1))
    return text[:place] + bytes([random.integers(256)]) + text[place + int(random.integers(2)) :]


def _a_stretch(text: bytes, random: Random) -> bytes:
    """Take a stretch out, or repeat it."""
    first = int(random.integers(len(text) + 1))
    stretch = text[first : first + int(random.integers(300))]
    return text[:first] + stretch * int(random.integers(3)) + text[first + len(stretch) :]


def _cut_off(text: bytes, random: Random) -> bytes:
    return text[: int(random.integers(len(text) + 1))]


def _of_lines(change: Callable[[list[bytes], Random], None]) -> Callable[[bytes, Random], bytes]:
    """Return a mutation of the text from one of its lines."""

    def mutation(text: bytes, random: Random) -> bytes:
        lines = text.split(b"\n")
        change(lines, random)
        return random.choice([b"\n", b"\r\n", b"\r"], p=[0.9, 0.05, 0.05]).item().join(lines)

    return mutation


def _swap(lines: list[bytes], random: Random) -> None:
    one, other = random.integers(0, len(lines), 2)
    lines[one], lines[other] = lines[other], lines[one]


def _repeat(lines: list[bytes], random: Random) -> None:
    one = int(random.integers(len(lines)))
    lines[one:one] = [lines[one]] * int(random.integers(1, 40))


def _drop(lines: list[bytes], random: Random) -> None:
    one = int(random.integers(len(lines)))
    del lines[one : one + int(random.integers(1, 10))]
    lines.append(b"")


def _put_in(lines: list[bytes], random: Random) -> None:
    lines.insert(int(random.integers(len(lines) + 1)), STRANGE_LINES[random.integers(len(STRANGE_LINES))])


def _a_number(lines: list[bytes], random: Random) -> None:
    one = int(random.integers(len(lines)))
    words = lines[one].split(b" ")
    words[random.integers(len(words))] = STRANGE_NUMBERS[random.integers(len(STRANGE_NUMBERS))]
    lines[one] = b" ".join(words)


def _a_column(lines: list[bytes], random: Random) -> None:
    """Give a whole column one value, or scale it."""
    column, factor = int(random.integers(7)), 10.0 ** int(random.integers(-14, 15))
    flat = random.random() < 0.5
    for place, line in enumerate(lines):
        words = line.split(b" ")
        if len(words) == 7 and not line.startswith(b"#"):
            try:
                words[column] = b"3" if flat else repr(float(words[column]) * factor).encode()
            except ValueError:
                continue
            lines[place] = b" ".join(words)


def _a_parent(lines: list[bytes], random: Random) -> None:
    """Hang one sample on any other: loops, second roots, parents that come later or are absent."""
    one, other = random.integers(0, len(lines), 2)
    words, elsewhere = lines[one].split(b" "), lines[other].split(b" ")
    words[-1] = random.choice([elsewhere[0], words[0], b"-1", b"0", b"-2", b"1000000"]).item()
    lines[one] = b" ".join(words)


KINDS = (
    _a_byte,
    _a_stretch,
    _cut_off,
    *map(_of_lines, (_swap, _repeat, _drop, _put_in, _a_number, _a_number, _a_column, _a_parent, _a_parent)),
)
