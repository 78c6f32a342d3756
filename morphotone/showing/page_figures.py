"""How a quantity is spread over the cells, group by group, as what an inline SVG draws: points, bars, ticks.

Lengths are in units of the drawing, which is 320 wide and as high as it has rows. Few cells are dots, many
are bars; every row has its median. What is drawn stands here, how it looks in the page's style.
"""

import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.ticker import MaxNLocator
from numpy.typing import NDArray

from morphotone.questions.outliers import rounded

Real = NDArray[np.float64]

WIDTH, _LEFT, _RIGHT = 320.0, 12.0, 308.0
_TOP, _ROW, _BASE, _FOOT = 4.0, 44.0, 34.0, 24.0  # row: its label above, its dots about the base
_DOTS_UP_TO = 200  # cells; beyond it dots hide each other
_BINS = 40
_TALLEST = 18.0
_LOG_FROM = 10.0  # ratio of greatest to least
_TICKS = 5
MOST_GROUPS = 12


@dataclass(frozen=True)
class Dot:
    """One cell: its place in the drawing and its row in the table of cells."""

    x: float
    y: float
    row: int


@dataclass(frozen=True)
class Strip:
    """One group's row.

    Attributes
    ----------
    label : str
        The group's name; empty where there are no groups.
    style : int
        Number of its colour.
    count : int
        Cells with a value.
    base : float
        Height of the row's line.
    dots : tuple of Dot
        Empty where bars are drawn.
    bars : str
        Path of the bars; empty where dots are drawn.
    median_x : float
        Where the median stands.
    median, quartiles : str
        The numbers, rounded.
    """

    label: str
    style: int
    count: int
    base: float
    dots: tuple[Dot, ...]
    bars: str
    median_x: float
    median: str
    quartiles: str


@dataclass(frozen=True)
class Spread:
    """One drawing.

    Attributes
    ----------
    title : str
        The quantity with its unit.
    strips : tuple of Strip
        Empty where no cell has a value.
    ticks : tuple of (float, str)
        Place and number.
    height : float
        Of the drawing.
    is_log : bool
        Whether the axis is logarithmic.
    without : int
        Cells without a finite value.
    """

    title: str
    strips: tuple[Strip, ...]
    ticks: tuple[tuple[float, str], ...]
    height: float
    is_log: bool
    without: int


def spread(title: str, values: Real, groups: Sequence[str] | None) -> Spread:
    """Return how values are spread over groups.

    Parameters
    ----------
    title : str
        The quantity with its unit.
    values : ndarray, shape (cells,)
        In the order of the table of cells; what is not finite is left out and counted.
    groups : sequence of str, optional
        Group of each cell, "" for none; without it there is one row.
    """
    finite = np.isfinite(values)
    members = [(name, rows[finite[rows]]) for name, rows in group_rows(groups, len(values))]
    members = [(name, rows) for name, rows in members if len(rows)]
    if not members:
        return Spread(title, (), (), 0.0, False, len(values))
    axis = _axis(values[finite])
    as_dots = finite.sum() <= _DOTS_UP_TO
    strips = tuple(
        _strip(name, number, rows, values[rows], axis, as_dots) for number, (name, rows) in enumerate(members)
    )
    height = _TOP + _ROW * len(strips) + _FOOT
    return Spread(title, strips, axis.ticks, height, axis.is_log, int((~finite).sum()))


def group_rows(groups: Sequence[str] | None, count: int) -> list[tuple[str, NDArray[np.int64]]]:
    """Return name and rows of each group in the order they come, the smallest beyond twelve as one.

    Parameters
    ----------
    groups : sequence of str, optional
        Group of each cell, "" for none.
    count : int
        Number of cells.
    """
    if groups is None:
        return [("", np.arange(count))]
    names = np.asarray(list(groups), object)
    named = [(name, np.flatnonzero(names == name)) for name in dict.fromkeys(names.tolist()) if name]
    if len(named) > MOST_GROUPS:
        kept = {name for name, _ in sorted(named, key=lambda one: -len(one[1]))[: MOST_GROUPS - 1]}
        others = [rows for name, rows in named if name not in kept]
        named = [one for one in named if one[0] in kept]
        named.append((f"{len(others)} smaller groups", np.sort(np.concatenate(others))))
    alone = np.flatnonzero(names == "")
    return [*named, *([("no group", alone)] if len(alone) else [])]


@dataclass(frozen=True)
class _Axis:
    low: float  # ends, as logarithms where the axis is
    high: float
    is_log: bool
    ticks: tuple[tuple[float, str], ...] = ()

    def x(self, values: Real) -> Real:
        scaled = np.log10(values) if self.is_log else values
        return _LEFT + (scaled - self.low) / (self.high - self.low) * (_RIGHT - _LEFT)


def _axis(values: Real) -> _Axis:
    low, high = float(values.min()), float(values.max())
    if low == high:
        room = abs(low) / 10 or 1.0
        low, high = low - room, high + room
    is_log = low > 0 and high / low >= _LOG_FROM
    axis = _Axis(math.log10(low), math.log10(high), True) if is_log else _Axis(low, high, False)
    ticks = _decades(low, high) if is_log else MaxNLocator(_TICKS).tick_values(low, high)
    inside = [float(tick) for tick in ticks if low <= tick <= high]
    places = axis.x(np.array(inside)).tolist()
    texts = [f"{tick:.6g}" for tick in inside]
    return _Axis(axis.low, axis.high, is_log, tuple(zip(places, texts, strict=True)))


def _decades(low: float, high: float) -> list[float]:
    """Return 1, 2 and 5 of each power of ten, fewer where that would be a crowd."""
    first, last = math.floor(math.log10(low)), math.ceil(math.log10(high))
    for mantissas, step in (((1, 2, 5), 1), ((1, 3), 1), ((1,), 1)):
        ticks = [m * 10.0**power for power in range(first, last + 1, step) for m in mantissas]
        if sum(low <= tick <= high for tick in ticks) <= _TICKS + 1:
            return ticks
    return [10.0**power for power in range(first, last + 1, math.ceil((last - first) / _TICKS))]


def _strip(
    name: str, number: int, rows: NDArray[np.int64], values: Real, axis: _Axis, as_dots: bool
) -> Strip:
    base = _TOP + _ROW * number + _BASE
    first, median, third = np.quantile(values, [0.25, 0.5, 0.75]).tolist()
    return Strip(
        label=name,
        style=number,
        count=len(rows),
        base=base,
        dots=tuple(_dots(rows, axis.x(values), base)) if as_dots else (),
        bars="" if as_dots else _bars(axis.x(values), base + 8),
        median_x=float(axis.x(np.array([median]))[0]),
        median=rounded(median, 3),
        quartiles=f"{rounded(first, 3)} to {rounded(third, 3)}",
    )


def _dots(rows: NDArray[np.int64], x: Real, base: float) -> Iterator[Dot]:
    """Scatter dots about the line, always alike: steps of the golden ratio keep neighbours apart."""
    order = np.argsort(x, kind="stable")
    for place, index in enumerate(order.tolist()):
        share = (place * 0.6180339887498949) % 1.0 - 0.5
        yield Dot(round(float(x[index]), 1), round(base + 11 * share, 1), int(rows[index]))


def _bars(x: Real, base: float) -> str:
    counts, edges = np.histogram(x, bins=_BINS, range=(_LEFT, _RIGHT))
    width = edges[1] - edges[0]
    tall = counts / counts.max() * _TALLEST
    return "".join(
        f"M{left:.1f} {base:.1f}v{-height:.1f}h{width:.1f}v{height:.1f}z"
        for left, height in zip(edges[:-1].tolist(), tall.tolist(), strict=True)
        if height
    )
