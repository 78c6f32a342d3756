"""Draws the cells that the benchmark works on: random trees with taper, listed branch after branch.

Nothing here was measured; `sample_growth` draws handsomer cells, but a hundred times more slowly.
"""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray

Index = NDArray[np.int64]
Real = NDArray[np.float64]

_ROW = "%d %d %.3f %.3f %.3f %.4f %d\n"
_ROWS_AT_ONCE = 10_000
_FIRST_NUMBER = 20_261  # of the random generator; the cell's own number is added to it
_SOMA_RADIUS_UM = 8.0
_STEM_KINDS = (3, 3, 3, 3, 4, 2)  # basal, apical, axon
_SAMPLES_A_BRANCH = 30
_STEP_UM = (0.8, 2.8)
_WANDER, _TURN = 0.3, 0.7  # how far the direction strays at a sample and at a branch point
_STEM_DIAMETER_UM = (1.5, 3.0)
_LEAST_DIAMETER_UM = 0.4
_DAUGHTER = (0.62, 0.85)  # daughter's over parent's diameter; 2^(-2/3) = 0.63 keeps Rall's 3/2 rule
_TAPER = (0.8, 1.0)  # a branch's last over its first diameter


def draw_folder(folder: Path, cells: int, samples: int) -> Path:
    """Write drawn cells into a new folder, the same each time, and return it.

    Parameters
    ----------
    folder : Path
        Made; must not exist.
    cells, samples : int
        How many cells, and how many samples each has, at least 2.
    """
    folder.mkdir(parents=True)
    for number in range(cells):
        rng = np.random.default_rng(_FIRST_NUMBER + number)
        with (folder / f"drawn_{number:05d}.swc").open("w", encoding="ascii") as stream:
            stream.writelines(draw_cell(rng, samples))
    return folder


def draw_cell(rng: Generator, samples: int) -> Iterator[str]:
    """Yield the text of one cell: a soma of one sample, then its branches, depth first."""
    branches = max(1, (samples - 1) // _SAMPLES_A_BRANCH)
    above = _tree_of_branches(rng, branches)
    weights = rng.uniform(0.5, 1.5, branches)
    count = 1 + rng.multinomial(samples - 1 - branches, weights / weights.sum())
    of = np.repeat(np.arange(branches), count)
    first = np.cumsum(count) - count
    position = _positions(rng, above, of, first)
    radius = _radii(rng, above, of, first)
    parent = np.arange(1, samples)
    parent[first] = np.where(above < 0, 1, (first + count + 1)[above])
    yield "# Invented: drawn by scripts/benchmark.py\n"
    yield _ROW % (1, 1, 0.0, 0.0, 0.0, _SOMA_RADIUS_UM, -1)
    yield from _text(_kinds(above)[of], position, radius, parent)


def _tree_of_branches(rng: Generator, branches: int) -> Index:
    """Return the branch that each one leaves, -1 for stems; random tips fork until there are enough."""
    stems = min(len(_STEM_KINDS), branches)
    above, tips = [-1] * stems, list(range(stems))
    for chance in rng.random((branches - stems) // 2):
        which = int(chance * len(tips))
        forked, tips[which] = tips[which], len(above)
        tips.append(len(above) + 1)
        above += [forked, forked]
    above += [len(above) - 1] * (branches - len(above))  # the odd one, if any, goes on from a tip
    return _depth_first(above)


def _depth_first(above: list[int]) -> Index:
    daughters: list[list[int]] = [[] for _ in above]
    for branch, up in enumerate(above):
        if up >= 0:
            daughters[up].append(branch)
    waiting = [branch for branch, up in enumerate(above) if up < 0]
    place: dict[int, int] = {-1: -1}
    while waiting:
        branch = waiting.pop()
        place[branch] = len(place) - 1
        waiting += daughters[branch]
    ordered = [branch for branch in place if branch >= 0]
    return np.array([place[above[branch]] for branch in ordered])


def _positions(rng: Generator, above: Index, of: Index, first: Index) -> Real:
    """Return where the samples lie, µm, shape (samples - 1, 3)."""
    heading = rng.normal(size=(len(above), 3))
    for branch, up in enumerate(above.tolist()):
        turned = heading[branch] * (_TURN if up >= 0 else 1.0)
        heading[branch] = _unit(turned + heading[up] if up >= 0 else turned)
    direction = _unit(heading[of] + _WANDER * rng.normal(size=(len(of), 3)))
    along = np.cumsum(direction * rng.uniform(*_STEP_UM, (len(of), 1)), axis=0)
    before = np.concatenate((np.zeros((1, 3)), along))[first]
    extent = along[np.append(first[1:], len(of)) - 1] - before
    start = _SOMA_RADIUS_UM * heading
    for branch, up in enumerate(above.tolist()):
        if up >= 0:
            start[branch] = start[up] + extent[up]
    return np.asarray(along + (start - before)[of])


def _radii(rng: Generator, above: Index, of: Index, first: Index) -> Real:
    """Return the radii of the samples, µm: each branch tapers, daughters are thinner than their parent."""
    begin = rng.uniform(*_DAUGHTER, len(above))
    taper = rng.uniform(*_TAPER, len(above))
    begin[above < 0] = rng.uniform(*_STEM_DIAMETER_UM, int((above < 0).sum()))
    for branch, up in enumerate(above.tolist()):
        if up >= 0:
            begin[branch] = max(begin[up] * taper[up] * begin[branch], _LEAST_DIAMETER_UM)
    count = np.diff(np.append(first, len(of)))
    share = (np.arange(len(of)) - first[of]) / count[of]
    diameter = begin[of] * (1.0 + (taper[of] - 1.0) * share)
    return np.asarray(0.5 * diameter * np.exp(0.04 * rng.normal(size=len(of))))


def _kinds(above: Index) -> Index:
    kind = np.zeros(len(above), np.int64)
    kind[above < 0] = _STEM_KINDS[: int((above < 0).sum())]
    for branch, up in enumerate(above.tolist()):
        if up >= 0:
            kind[branch] = kind[up]
    return kind


def _text(kind: Index, position: Real, radius: Real, parent: Index) -> Iterator[str]:
    """Yield the lines of all samples but the soma, many at a time."""
    number = np.arange(2, len(kind) + 2)
    table = np.column_stack((number, kind, position, radius, parent))
    for start in range(0, len(table), _ROWS_AT_ONCE):
        rows = table[start : start + _ROWS_AT_ONCE]
        yield (_ROW * len(rows)) % tuple(rows.ravel().tolist())


def _unit(vectors: Real) -> Real:
    return np.asarray(vectors / np.sqrt((vectors**2).sum(axis=-1, keepdims=True)))
