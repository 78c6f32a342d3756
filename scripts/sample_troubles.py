"""One small invented cell, spoilt in each of the ways that files are commonly spoilt."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from sample_growth import BASAL, SOMA, Arbor, Sample, draw_soma, grow

TWIG = Arbor(
    kind=BASAL,
    stems=(3, 3),
    stem_diameter=(1.4, 2.2),
    tip_diameter=(0.5, 0.8),
    between_forks=(15.0, 30.0),
    last_branch=(30.0, 60.0),
    reach=(90.0, 120.0),
    forks=2,
    share=(0.5, 0.6),
    step=2.6,
    wander=0.12,
)
UNKNOWN_KIND = 7
Rows = list[list[str]]


def small_cell() -> list[Sample]:
    """Return a sound cell of a few dozen samples."""
    rng = np.random.default_rng(707)
    samples, bases = draw_soma(rng, "one point", 6.5, (120.0, 80.0, 40.0))
    grow(rng, TWIG, samples, bases[BASAL])
    return samples


def rows_of(samples: Sequence[Sample]) -> Rows:
    """Return the seven fields of each sample as text."""
    return [
        [
            str(row + 1),
            str(sample.kind),
            f"{sample.x:.2f}",
            f"{sample.y:.2f}",
            f"{sample.z:.2f}",
            f"{sample.radius:.3f}",
            str(sample.parent + 1 if sample.parent >= 0 else -1),
        ]
        for row, sample in enumerate(samples)
    ]


def plain(rows: Rows) -> str:
    """Return rows as an SWC body."""
    return "".join(" ".join(row) + "\n" for row in rows)


def in_columns(rows: Rows, columns: Sequence[int], change: Callable[[int, str], str]) -> str:
    """Return the body with ``change(row, text)`` applied in some columns."""
    for number, row in enumerate(rows):
        for column in columns:
            row[column] = change(number, row[column])
    return plain(rows)


def _dendrite_radius(change: Callable[[int, str], str]) -> Callable[[Rows], str]:
    """Return a trouble that changes the radii below the soma."""
    return lambda rows: in_columns(rows, [5], lambda row, text: change(row, text) if row else text)


def nanometres(rows: Rows) -> str:
    """Give every length in nanometres."""
    return in_columns(rows, [2, 3, 4, 5], lambda _, text: f"{1000 * float(text):.0f}")


def roots_several(rows: Rows) -> str:
    """Cut two places of the tree loose."""
    return in_columns(rows, [6], lambda row, text: "-1" if row in (12, len(rows) - 6) else text)


def soma_absent(rows: Rows) -> str:
    """Call the soma a dendrite."""
    rows[0][5] = rows[1][5]
    return in_columns(rows, [1], lambda _, __: str(BASAL))


def soma_not_root(rows: Rows) -> str:
    """Start the file's tree from its last tip, the soma in the middle."""
    parents = {row[0]: row[6] for row in rows}
    above, here = "-1", rows[-1][0]
    turned = {}
    while here != "-1":
        turned[here] = above
        above, here = here, parents[here]
    return in_columns(rows, [6], lambda row, text: turned.get(str(row + 1), text))


def soma_outline(rows: Rows) -> str:
    """Trace the soma's edge as a dozen thin samples in place of one thick one."""
    x, y, radius = (float(rows[0][column]) for column in (2, 3, 5))
    edge = np.linspace(0.0, 2 * np.pi, 12, endpoint=False)
    rows[0][2:6] = [f"{x + radius:.2f}", f"{y:.2f}", rows[0][4], "0.200"]
    for angle in edge[1:]:
        above = "1" if angle == edge[1] else rows[-1][0]
        place = f"{x + radius * np.cos(angle):.2f}", f"{y + radius * np.sin(angle):.2f}", rows[0][4]
        rows.append([str(len(rows) + 1), str(SOMA), *place, "0.200", above])
    return plain(rows)


def numbers_twice(rows: Rows) -> str:
    """Give one sample its neighbour's number."""
    rows[20][0] = rows[19][0]
    return plain(rows)


def coordinates_na(rows: Rows) -> str:
    """Lose the depth of three samples."""
    return in_columns(rows, [4], lambda row, text: "NA" if row in (9, 10, 31) else text)


def padded_crlf(rows: Rows) -> str:
    """Pad the columns with spaces and end lines as Windows does."""
    return "".join("  ".join(field.rjust(8) for field in row) + " \r\n" for row in rows)


def commas(rows: Rows) -> str:
    """Separate the columns with commas."""
    return "".join(",".join(row) + "\n" for row in rows)


def loop(rows: Rows) -> str:
    """Hang a stem's first sample from a sample below it."""
    rows[1][6] = rows[4][0]
    return plain(rows)


def unordered(rows: Rows) -> str:
    """Shuffle the rows, so that children come before parents."""
    return plain([rows[row] for row in np.random.default_rng(711).permutation(len(rows))])


def columns_extra(rows: Rows) -> str:
    """Add two columns of somebody's own."""
    return plain([[*row, "0", "checked"] for row in rows])


def columns_missing(rows: Rows) -> str:
    """Lose the parent column of one row, as a broken copy does."""
    del rows[25][6]
    return plain(rows)


def samples_coincident(rows: Rows) -> str:
    """Put every fifth sample on its parent."""
    for row in rows[5::5]:
        row[2:5] = rows[int(row[6]) - 1][2:5]
    return plain(rows)


def parent_absent(rows: Rows) -> str:
    """Hang a sample from one that is not there."""
    rows[-1][6] = "9999"
    return plain(rows)


def domain_unknown(rows: Rows) -> str:
    """Use a type code of somebody's own."""
    return in_columns(rows, [1], lambda row, text: text if row < 30 else str(UNKNOWN_KIND))


def radius_negative(rows: Rows) -> str:
    """Give a few radii the wrong sign."""
    return in_columns(rows, [5], lambda row, text: f"-{text}" if row in (14, 15, 27) else text)


#: File name without ending, what is wrong in words, and what spoils the rows.
TROUBLES: tuple[tuple[str, str, Callable[[Rows], str]], ...] = (
    ("nanometres", "lengths in nanometres", nanometres),
    ("radii_zero", "every third radius is 0", _dendrite_radius(lambda row, text: text if row % 3 else "0")),
    ("radii_minus_one", "no radius was traced below the soma: -1", _dendrite_radius(lambda _, __: "-1")),
    ("radius_negative", "three radii with the wrong sign", radius_negative),
    ("radius_placeholder", "one radius for all dendrites", _dendrite_radius(lambda _, __: "0.5")),
    (
        "diameters_coarse",
        "radii in steps of 0.25 um",
        _dendrite_radius(lambda _, text: f"{max(1, round(float(text) * 4)) / 4}"),
    ),
    (
        "diameters_thin",
        "dendrites a quarter as thick as they were",
        _dendrite_radius(lambda _, text: f"{float(text) / 4:.3f}"),
    ),
    (
        "decimal_slipped",
        "one radius ten times too large",
        _dendrite_radius(lambda row, text: f"{10 * float(text):.3f}" if row == 60 else text),
    ),
    ("roots_several", "two pieces are cut loose", roots_several),
    ("soma_absent", "no soma", soma_absent),
    ("soma_not_root", "the tree starts from a tip", soma_not_root),
    ("soma_outline", "a soma traced as its outline", soma_outline),
    ("numbers_twice", "two samples share a number", numbers_twice),
    ("coordinates_NA", "three depths are NA", coordinates_na),
    ("padded_CRLF", "padded columns, Windows line ends", padded_crlf),
    ("commas", "commas between the columns", commas),
    ("loop", "a stem hangs from its own branch", loop),
    ("unordered", "children before parents", unordered),
    ("columns_extra", "nine columns", columns_extra),
    ("columns_missing", "a row of six columns", columns_missing),
    ("samples_coincident", "every fifth sample lies on its parent", samples_coincident),
    ("flat", "no depth", lambda rows: in_columns(rows, [4], lambda _, __: "0.00")),
    ("parent_absent", "a parent that is not in the file", parent_absent),
    ("domain_unknown", "a type code of somebody's own", domain_unknown),
    ("header_only", "a header and no sample", lambda _: ""),
)
EMPTY = "empty"


def draw_troubles(header: str) -> dict[str, bytes]:
    """Return file name -> bytes; ``header`` is the sentence that says the file is invented."""
    files = {f"{EMPTY}.swc": b""}
    for name, what, spoil in TROUBLES:
        text = f"# {header}\n# spoilt on purpose: {what}\n"
        body = spoil(rows_of(small_cell()))
        if "\r" in body:
            text = text.replace("\n", "\r\n")
        files[f"{name}.swc"] = (text + body).encode("ascii")
    return files
