"""The panels of a map: each draws one thing of a portrait into a box on the page."""

from collections.abc import Iterator, Sequence
from typing import Any, Literal

import numpy as np
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.figure import Figure
from matplotlib.patches import Circle, Polygon
from numpy.typing import NDArray

from morphotone.questions.portrait import Portrait
from morphotone.showing.colours import FAINT, INK, Scale, Style, domain_style
from morphotone.showing.sheet import (
    MOST_VECTOR_LINES,
    POINTS_PER_MM,
    SMALL,
    Box,
    axes_at,
    even_ticks,
    factor_ticks,
    number_text,
    round_factor,
    round_length,
)

Real = NDArray[np.float64]
Plane = Literal["xy", "xz", "yz"]

PLANES: dict[Plane, tuple[int, int, int]] = {"xy": (0, 1, 2), "xz": (0, 2, 1), "yz": (1, 2, 0)}
OTHER = "other"
THINNEST = 0.25  # points: a thinner line is lost in print
LINE = 0.6  # points, of lines whose width means nothing
MEASURES = {
    "path_um": "path (µm)",
    "X": "electrotonic distance X",
    "to_soma": "attenuation toward the soma",
    "from_soma": "attenuation from the soma",
}
BACK: dict[str, Any] = {"color": FAINT, "lw": 0.3}
ENDLESS: dict[str, Any] = {"color": INK, "lw": 0.8, "linestyle": (0, (4.0, 2.0))}
_MARGIN = 0.03  # of the drawn extent, left free on each side
_SHORTEST_BAR = 1e-5  # µm, X, or log attenuation, which six digits do not tell from none
_BAR_STRIP = 5.0  # mm below a tree for its scale bar


class Extent:
    """A rectangle of data with equal scales on both axes, fitted into a box.

    Parameters
    ----------
    points : ndarray, shape (n, 2)
        What has to be inside.
    reach : ndarray, shape (n,) or float
        How far the drawing reaches around each point, in the same unit.
    box : Box
        Where it is drawn.
    """

    def __init__(self, points: Real, reach: Real | float, box: Box) -> None:
        reach = np.broadcast_to(reach, len(points))[:, None]
        low, high = (points - reach).min(axis=0), (points + reach).max(axis=0)
        self.size = high - low
        per_mm = max(self.size[0] / box.width, self.size[1] / box.height) * (1.0 + 2.0 * _MARGIN)
        self.per_mm = per_mm if per_mm > 0 else 1.0 / box.width
        middle, half = (low + high) / 2.0, np.array([box.width, box.height]) * self.per_mm / 2.0
        (self.left, self.bottom), (self.right, self.top) = middle - half, middle + half

    def apply(self, axes: Axes) -> None:
        """Give axes these limits, and no frame."""
        axes.set_xlim(self.left, self.right)
        axes.set_ylim(self.bottom, self.top)
        axes.set_axis_off()


def draw_cell(figure: Figure, box: Box, portrait: Portrait, scale: Scale, plane: Plane = "xy") -> Axes:
    """Draw the cell to scale, every frustum as thick as it is and coloured by its value."""
    across, up, depth = PLANES[plane]
    start, end = (ends[1:, [across, up]] for ends in portrait.ends)
    cable = portrait.cell.cable
    soma, reach = _soma_places(portrait)
    radius = (cable.r_start[1:] + cable.r_end[1:]) / 2.0
    points = np.concatenate((start, end, soma[:, [across, up]]))
    extent = Extent(points, np.concatenate((radius, radius, reach)), box)
    axes = axes_at(figure, box, "cell")
    back_to_front = np.argsort(portrait.ends[1][1:, depth], kind="stable")
    lines = LineCollection(
        list(np.stack((start, end), axis=1)[back_to_front]),
        linewidths=np.maximum(2.0 * radius / extent.per_mm * POINTS_PER_MM, THINNEST)[back_to_front],
        colors=scale.rgba(portrait.values[1:])[back_to_front] / 255.0,
        capstyle="round",
        rasterized=len(start) > MOST_VECTOR_LINES,
        gid="cable",
    )
    axes.add_collection(lines, autolim=False)
    _draw_soma(axes, portrait, (across, up), scale, extent)
    extent.apply(axes)
    return axes


def _soma_places(portrait: Portrait) -> tuple[Real, Real]:
    """Return places of the soma in space, shape (n, 3), and how far it reaches around each, µm."""
    traced = portrait.cell.cable.traced
    soma = traced.soma
    if soma.rule in ("outline", "chain"):
        radius = traced.radius[soma.members] if soma.rule == "chain" else np.zeros(len(soma.members))
        return traced.position[soma.members], radius
    place = soma.centre if len(soma.members) else traced.position[traced.root]
    return place[None, :], np.array([soma.radius])


def _draw_soma(axes: Axes, portrait: Portrait, plane: tuple[int, int], scale: Scale, extent: Extent) -> None:
    """Draw the soma as the disc of its sphere, as its outline, or a chain as thick as its samples."""
    traced = portrait.cell.cable.traced
    soma = traced.soma
    colour = scale.rgba(portrait.values[:1])[0] / 255.0
    members = soma.members
    if not len(members):
        return
    if soma.rule == "outline":
        around = traced.position[members][:, plane]
        axes.add_patch(Polygon(around, closed=True, fc=colour, ec=INK, lw=0.4, gid="soma"))
        return
    if soma.rule != "chain":
        axes.add_patch(
            Circle(tuple(soma.centre[list(plane)]), soma.radius, fc=colour, ec=INK, lw=0.4, gid="soma")
        )
        return
    position, radius = traced.position[:, plane], traced.radius
    child = members[np.isin(traced.parent[members], members)]
    widths = (radius[child] + radius[traced.parent[child]]) / extent.per_mm * POINTS_PER_MM
    pieces = list(np.stack((position[traced.parent[child]], position[child]), axis=1))
    for wider, shade, name in ((0.8, INK, "soma edge"), (0.0, colour, "soma")):
        axes.add_collection(
            LineCollection(
                pieces,
                linewidths=np.maximum(widths, THINNEST) + wider,
                colors=[shade],
                capstyle="round",
                gid=name,
            ),
            autolim=False,
        )


def draw_length_bar(axes: Axes, extent_per_mm: float, box: Box, words: str, length: float) -> None:
    """Draw a scale bar with its words at the lower left of a box, in axes that fill the box."""
    share = length / extent_per_mm / box.width
    bottom = 3.2 / box.height
    axes.plot(
        [0.0, share], [bottom, bottom], color=INK, lw=1.2, transform=axes.transAxes, solid_capstyle="butt"
    )
    axes.text(
        0.0, bottom - 0.8 / box.height, words, transform=axes.transAxes, ha="left", va="top", fontsize=SMALL
    )


def draw_tree(figure: Figure, box: Box, portrait: Portrait, measure: str, plane: Plane = "xy") -> Axes:
    """Draw the morphoelectrotonic transform in one measure, its scale bar below."""
    axes_box = box.inside(bottom=_BAR_STRIP)
    across, up, _ = PLANES[plane]
    place = portrait.transformed(measure)[:, [across, up]]
    extent = Extent(place, 0.0, axes_box)
    axes = axes_at(figure, axes_box, f"tree {measure}")
    _add_runs(axes, portrait, [place[run.nodes] for run in portrait.runs])
    axes.plot(*place[0], marker="o", ms=2.5, mfc=INK, mec="none")
    extent.apply(axes)
    strip = axes_at(figure, Box(box.left, box.bottom - _BAR_STRIP, box.width, _BAR_STRIP), f"bar {measure}")
    strip.set_axis_off()
    greatest = 0.5 * box.width * extent.per_mm
    if extent.size.max() > 0 and greatest > _SHORTEST_BAR:
        length, words = _tree_bar(measure, greatest)
        draw_length_bar(strip, extent.per_mm, Box(0, 0, box.width, _BAR_STRIP), words, length)
    return axes


def _tree_bar(measure: str, greatest: float) -> tuple[float, str]:
    """Return the length of a tree's scale bar, at most the greatest given, and what to write below it."""
    if measure == "path_um":
        return round_length(greatest), f"{number_text(round_length(greatest))} µm of path"
    if measure == "X":
        return round_length(greatest), f"X = {number_text(round_length(greatest))}"
    factor = round_factor(greatest)
    direction = "toward" if measure == "to_soma" else "from"
    return float(np.log(factor)), f"attenuation {number_text(factor)} {direction} the soma"


def draw_flat(figure: Figure, box: Box, portrait: Portrait, measure: str) -> Axes:
    """Draw the tree laid out flat: distance from the soma in one measure across, tips side by side."""
    axes = axes_at(figure, box, f"flat {measure}")
    distance = getattr(portrait.distances, measure)
    _add_runs(axes, portrait, list(_elbows(portrait, distance)))
    greatest = float(distance.max()) or 1.0
    axes.set_xlim(-0.02 * greatest, 1.02 * greatest)
    low, high = float(portrait.level.min()), float(portrait.level.max())
    axes.set_ylim(low - 1.0, high + 1.0)
    axes.set_yticks([])
    axes.plot(0.0, portrait.level[0], marker="o", ms=2.5, mfc=INK, mec="none", clip_on=False)
    axes.spines[["left", "right", "top"]].set_visible(False)
    axes.set_xlabel(MEASURES[measure])
    _set_scale(axes, "x", measure, greatest, box.width)
    return axes


def _elbows(portrait: Portrait, distance: Real) -> Iterator[Real]:
    """Yield each run as a line that first turns from its parent's height to its own."""
    for run in portrait.runs:
        level = np.full(len(run.nodes), portrait.level[run.nodes[-1]])
        line = np.stack((distance[run.nodes], level), axis=1)
        if run.leads:
            line = np.concatenate(([[line[0, 0], portrait.level[run.nodes[0]]]], line))
        yield line


def draw_course(figure: Figure, box: Box, portrait: Portrait, measure: str) -> Axes:
    """Draw attenuation against a distance, every branch as a line, over that of the endless cable."""
    axes = axes_at(figure, box, f"course {measure}")
    distances = portrait.distances
    across = getattr(distances, measure)
    back = LineCollection(
        [np.stack((across[run.nodes], distances.from_soma[run.nodes]), axis=1) for run in portrait.runs],
        colors=[BACK["color"]],
        linewidths=[BACK["lw"]],
        rasterized=len(across) > MOST_VECTOR_LINES,
        gid="from the soma",
    )
    axes.add_collection(back, autolim=False)
    lines = [np.stack((across[run.nodes], distances.to_soma[run.nodes]), axis=1) for run in portrait.runs]
    _add_runs(axes, portrait, lines)
    farthest, greatest = float(across.max()) or 1.0, float(distances.to_soma.max()) or float(np.log(2.0))
    per_unit = portrait.endless.q / (portrait.endless.lambda_um if measure == "path_um" else 1.0)
    axes.plot([0.0, farthest], [0.0, farthest * per_unit], gid="endless", **ENDLESS)
    axes.set_xlim(0.0, 1.02 * farthest)
    axes.set_ylim(0.0, 1.05 * greatest)
    axes.spines[["right", "top"]].set_visible(False)
    axes.set_xlabel("path from the soma (µm)" if measure == "path_um" else MEASURES[measure])
    axes.set_ylabel("attenuation (log scale)")
    _set_scale(axes, "x", measure, farthest, box.width)
    _set_scale(axes, "y", "to_soma", greatest, box.height)
    return axes


def _set_scale(axes: Axes, which: Literal["x", "y"], measure: str, greatest: float, length_mm: float) -> None:
    """Set ticks from 0 to the greatest: round numbers, or attenuations on their logarithms."""
    if measure in ("path_um", "X"):
        ticks, labels = even_ticks(0.0, greatest, length_mm)
    else:
        ticks, labels = factor_ticks(0.0, greatest, max(2, int(length_mm / (8.0 if which == "x" else 5.0))))
    (axes.set_xticks if which == "x" else axes.set_yticks)(ticks, labels)


def _add_runs(axes: Axes, portrait: Portrait, lines: Sequence[Real]) -> None:
    """Add lines of the cell's runs, one collection for all in one style."""
    dense = sum(len(line) for line in lines) > MOST_VECTOR_LINES
    for name, style in styles_of(portrait).items():
        some = [line for run, line in zip(portrait.runs, lines, strict=True) if _group(run.domain) == name]
        collection = LineCollection(
            some,
            colors=[style.colour],
            linewidths=LINE,
            linestyles=[style.line["linestyle"]],
            capstyle="butt",
            rasterized=dense,
            gid=name,
        )
        axes.add_collection(collection, autolim=False)


def styles_of(portrait: Portrait) -> dict[str, Style]:
    """Return how the cell's domains are drawn, that with the most lines first; one alone needs no dashes."""
    names = [_group(run.domain) for run in portrait.runs]
    ordered = sorted(set(names), key=lambda name: (-names.count(name), name))
    styles = {name: domain_style(name) for name in ordered}
    return styles if len(styles) > 1 else {name: Style(one.colour, ()) for name, one in styles.items()}


def _group(domain: str) -> str:
    """Return the domain, or "other" for all type codes without a name, which share a style."""
    return OTHER if domain.lstrip("-").isdigit() else domain
