"""The map of one cell: its panels on one page, a thumbnail, and a colour bar to stand beside a mesh."""

from importlib.metadata import version
from typing import NamedTuple

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from morphotone.cable.assumptions import Membrane
from morphotone.questions.portrait import Portrait
from morphotone.questions.refined import refined
from morphotone.reading.reconstruction import domain_name
from morphotone.showing.colours import Scale, scale_of
from morphotone.showing.keys import (
    NUMBERED,
    column_words,
    draw_colour_bar,
    draw_key,
    is_logarithmic,
    mark_sites,
)
from morphotone.showing.panels import (
    PLANES,
    THINNEST,
    Plane,
    draw_cell,
    draw_course,
    draw_flat,
    draw_length_bar,
    draw_tree,
)
from morphotone.showing.sheet import (
    MM_PER_INCH,
    SMALL,
    TITLE,
    Box,
    axes_at,
    blank_sheet,
    house_style,
    in_our_font,
    number_text,
    round_length,
    text_width_mm,
    wrapped,
    write_at,
)

#: One and two columns of a journal's page, mm (common practice: 80 to 90 and 170 to 180).
WIDTHS_MM = (85, 175)
_EDGE = 3.0  # mm of paper around everything
_HEAD = 9.5
_LINE_MM = 2.6  # from one line of small type to the next
_TITLE_MM = 4.5  # a panel's letter and title above it
_BELOW_CELL = 11.0  # its scale bar and the colour bar
_LEFT, _BELOW = 10.5, 7.5  # what a course needs for its scales
_LEFT_SHARED = 9.0
_GAP = 4.0
_TOP = _EDGE + _HEAD + _TITLE_MM
_MEASURES = ("path_um", "X", "to_soma", "from_soma")


class Layout(NamedTuple):
    """Where the panels stand on the page, mm; of the courses the frame, scales outside it."""

    cell: Box
    below_cell: Box
    key: Box
    courses: list[Box]
    trees: list[Box]
    flats: list[Box]
    bottom: float


def map_figure(portrait: Portrait, width_mm: float = 175, plane: Plane = "xy") -> Figure:
    """Return the map of one cell as a page.

    Parameters
    ----------
    portrait : Portrait
        The cell.
    width_mm : float
        175 for two columns of a journal; below 130 the panels stand as in one column, and the trees laid out
        flat are left out.
    plane : {"xy", "xz", "yz"}
        Which coordinates go across and up.
    """
    scale = scale_of(portrait.values, column_words(portrait.column))
    inner = width_mm - 2 * _EDGE
    foot = wrapped(_foot(portrait, inner), inner, SMALL)
    layout = _layout(width_mm, _aspect(portrait, plane))
    fine = refined(portrait)
    with house_style():
        figure = blank_sheet(width_mm, layout.bottom + len(foot) * _LINE_MM + _EDGE)
        _draw_head(figure, portrait, width_mm)
        _draw_panels(figure, layout, fine, scale, plane)
        for number, line in enumerate(foot):
            write_at(figure, _EDGE, layout.bottom + number * _LINE_MM, line, fontsize=SMALL)
    return figure


def _aspect(portrait: Portrait, plane: Plane) -> float:
    """Return height over width of the cell."""
    points = np.concatenate(portrait.ends)[:, list(PLANES[plane][:2])]
    width, height = np.ptp(points, axis=0)
    return float(height / width) if width > 0 else 1.0


def _layout(width_mm: float, aspect: float) -> Layout:
    if width_mm < 130:
        return _one_column(width_mm - 2 * _EDGE, aspect)
    return _two_columns(width_mm - 2 * _EDGE, aspect)


def _one_column(inner: float, aspect: float) -> Layout:
    cell = Box(_EDGE, _TOP, inner, float(np.clip(inner * aspect, 40.0, 70.0)))
    below = Box(_EDGE, cell.bottom, inner, _BELOW_CELL)
    key = Box(_EDGE, below.bottom + 2.0, inner, 8.0)
    courses = Box(_EDGE, key.bottom + _TITLE_MM, inner, 30.0)
    middle = (inner - _LEFT - _LEFT_SHARED) / 2.0  # the second has the first one's words at its scale
    frames = [
        Box(_EDGE + _LEFT, courses.top, middle, courses.height),
        Box(courses.right - middle, courses.top, middle, courses.height),
    ]
    trees = Box(_EDGE, courses.bottom + _BELOW + 1.5 * _TITLE_MM, inner, 62.0)
    boxes = [box for row in trees.rows(2, 2.0) for box in row.columns(2, _GAP)]
    return Layout(cell, below, key, frames, boxes, [], trees.bottom + 2.0)


def _two_columns(inner: float, aspect: float) -> Layout:
    if aspect < 0.6:
        cell = Box(_EDGE, _TOP, inner, float(np.clip(inner * aspect, 35.0, 55.0)))
        below = Box(_EDGE, cell.bottom, inner, _BELOW_CELL)
        key = Box(_EDGE, below.bottom + 2.0, inner, 4.0)
        courses = Box(_EDGE, key.bottom + _TITLE_MM, inner, 38.0)
        frames = [box.inside(left=_LEFT) for box in courses.columns(2, _GAP)]
        bottom = courses.bottom + _BELOW
    else:
        height = float(np.clip(0.5 * inner * aspect, 80.0, 100.0))
        left, right = Box(_EDGE, _TOP, inner, height + _BELOW_CELL).columns(2, _GAP)
        cell, below = left.inside(bottom=_BELOW_CELL), left.inside(top=height)
        key = Box(right.left, _TOP - _TITLE_MM, right.width, 6.0)
        courses = right.inside(top=6.0, bottom=_BELOW, left=_LEFT)
        frames = courses.rows(2, _BELOW + _TITLE_MM)
        bottom = left.bottom
    trees = Box(_EDGE, bottom + 1.5 * _TITLE_MM, inner, 38.0)
    flats = Box(_EDGE, trees.bottom + 1.2 * _TITLE_MM, inner, 35.0)
    return Layout(
        cell, below, key, frames, trees.columns(4, _GAP), flats.columns(4, _GAP), flats.bottom + _BELOW + 1.0
    )


def _draw_panels(figure: Figure, layout: Layout, portrait: Portrait, scale: Scale, plane: Plane) -> None:
    across, up, _ = PLANES[plane]
    marks = portrait.marks
    _title(figure, layout.cell, "a", f"to scale, {'xyz'[across]} across, {'xyz'[up]} up")
    axes = draw_cell(figure, layout.cell, portrait, scale, plane)
    _draw_below_cell(figure, layout.below_cell, axes, portrait, scale)
    if marks is not None:
        mark_sites(axes, layout.cell, marks.position[:, [across, up]], marks.rank)
    draw_key(figure, layout.key, portrait)
    beside = layout.courses[1].left - layout.courses[0].right
    for box, measure in zip(layout.courses, _MEASURES[:2], strict=True):
        axes = draw_course(figure, box, portrait, measure)
        if box is layout.courses[1] and 0.0 < beside < _LEFT:
            axes.set_ylabel("")
        if marks is not None:
            places = np.stack((getattr(marks.distances, measure), marks.distances.to_soma), axis=1)
            mark_sites(axes, box, places, marks.rank)
    for box, measure in zip(layout.trees, _MEASURES, strict=True):
        draw_tree(figure, box, portrait, measure, plane)
    for box, measure in zip(layout.flats, _MEASURES, strict=False):
        draw_flat(figure, box, portrait, measure)
    named = zip(layout.courses, "bc", ("against path", "against X"), strict=True)
    courses = zip(named, (_LEFT, min(_LEFT, beside) if beside > 0.0 else _LEFT), strict=True)
    titles = [
        *((box.inside(left=-margin), letter, words) for (box, letter, words), margin in courses),
        (layout.trees[0], "d", "directions kept, lengths replaced (morphoelectrotonic transform)"),
        *((box, "e", "laid out flat, one row for each tip") for box in layout.flats[:1]),
    ]
    for box, letter, words in titles:
        _title(figure, box, letter, words)


def _title(figure: Figure, box: Box, letter: str, words: str) -> None:
    """Write a panel's letter and title above its box."""
    write_at(figure, box.left, box.top - 1.0, letter, fontsize=TITLE, fontweight="bold", va="baseline")
    write_at(figure, box.left + 3.0, box.top - 1.0, words, va="baseline")


def _draw_below_cell(figure: Figure, box: Box, axes: Axes, portrait: Portrait, scale: Scale) -> None:
    """Draw the scale bar at the left and the colour bar at the right."""
    left, right = axes.get_xlim()
    per_mm = (right - left) / box.width
    bar = Box(box.left, box.top + 3.0, 0.4 * box.width, box.height - 3.0)
    length = round_length(0.3 * box.width * per_mm)
    strip = axes_at(figure, bar, "bar cell")
    strip.set_axis_off()
    draw_length_bar(strip, per_mm, bar, f"{number_text(length)} µm", length)
    place = Box(box.left + 0.45 * box.width, box.top + 1.0, 0.53 * box.width, 9.0)
    draw_colour_bar(figure, place, scale, is_logarithmic(portrait.column))


def _draw_head(figure: Figure, portrait: Portrait, width_mm: float) -> None:
    """Write the cell's name and its first numbers."""
    cell = portrait.cell
    case = int(np.flatnonzero(cell.electrotonus.hz == portrait.hz)[0])
    tips = len(cell.branches.tips)
    to_soma, from_soma = (values[cell.farthest_tip] for values in portrait.distances[2:])
    facts = [
        f"{'|Z_in|' if portrait.hz else 'R_in'} {_three(abs(cell.electrotonus.Z_in[0, case]))} MΩ",
        f"{_three(cell.cable.length.sum())} µm of cable",
        f"{tips} tip" if tips == 1 else f"{tips} tips",
    ]
    if tips:
        facts.append(
            f"farthest tip: attenuation {_three(np.exp(to_soma))} toward, "
            f"{_three(np.exp(from_soma))} from the soma"
        )
    write_at(
        figure,
        _EDGE,
        _EDGE,
        _shortened(cell.rec.cell, width_mm - 2 * _EDGE, TITLE, bold=True),
        fontsize=TITLE,
        fontweight="bold",
    )
    for number, line in enumerate(wrapped(facts, width_mm - 2 * _EDGE, SMALL)[:2]):
        write_at(figure, _EDGE, _EDGE + 4.2 + number * _LINE_MM, line, fontsize=SMALL)


def _shortened(name: str, width_mm: float, points: float, bold: bool = False) -> str:
    """Return a name that can be written across the page, its middle left out if need be."""
    name = in_our_font(name)
    kept, shown = len(name) // 2, name
    while kept > 1 and text_width_mm(shown, points, bold) > width_mm:
        kept -= 1
        shown = f"{name[:kept]}…{name[-kept:]}"
    return shown


def _three(value: float) -> str:
    return number_text(float(f"{value:.3g}"))


def _foot(portrait: Portrait, width_mm: float) -> list[str]:
    """Return what was assumed and where the cell comes from, in phrases that fit a width."""
    rec, assumed = portrait.cell.rec, portrait.cell.assumptions
    rule = portrait.cell.cable.traced.soma.rule
    membrane = assumed.membrane
    shunt = f"soma shunt {number_text(assumed.soma_shunt_nS)} nS" if assumed.soma_shunt_nS else ""
    phrases = [
        f"at {number_text(portrait.hz)} Hz",
        f"R_m {number_text(membrane.R_m_ohm_cm2)} Ω cm²",
        f"R_i {number_text(membrane.R_i_ohm_cm)} Ω cm",
        f"C_m {number_text(membrane.C_m_uF_cm2)} µF/cm²",
        f"spine factor {number_text(membrane.spine_factor)}",
        *(_own_constants(domain_name(code), assumed.of(code), membrane) for code in assumed.domains),
        shunt,
        f"axon {assumed.axon}",
        f"soma: {rule}" if rule != "none" else "no soma: the root sample stands for it",
        "passive membrane, sealed ends",
        _sites_in_words(portrait),
        f"lines at least {THINNEST:g} points wide",
        _shortened(rec.file.rsplit("/", 1)[-1], width_mm, SMALL),
        f"SHA-256 {rec.sha256[:12]}…, {portrait.cell.vetting.grade}",
        f"morphotone {version('morphotone')}, for research use",
    ]
    return [phrase for phrase in phrases if phrase]


def _sites_in_words(portrait: Portrait) -> str:
    """Return what the numbers beside sites mean."""
    count = 0 if portrait.marks is None else len(portrait.marks.rank)
    if not count:
        return ""
    which = "sites" if count <= NUMBERED else f"{count} sites, the first {NUMBERED}"
    return f"{which} numbered by rank, 1 the most attenuated"


def _own_constants(domain: str, own: Membrane, general: Membrane) -> str:
    """Return in what a domain differs from the others, such as "basal: spine factor 1.5"."""
    written = {
        "R_m_ohm_cm2": "R_m {} Ω cm²",
        "R_i_ohm_cm": "R_i {} Ω cm",
        "C_m_uF_cm2": "C_m {} µF/cm²",
        "spine_factor": "spine factor {}",
    }
    pairs = {name: (getattr(own, name), getattr(general, name)) for name in written}
    changed = [
        written[name].format(number_text(ours)) for name, (ours, all_) in pairs.items() if ours != all_
    ]
    return f"{domain}: {', '.join(changed)}" if changed else ""


def thumbnail(portrait: Portrait, plane: Plane = "xy") -> Figure:
    """Return the cell alone, small: 320 dots wide and 240 high when saved at 96 dots per inch."""
    width, height = 320 / 96 * MM_PER_INCH, 240 / 96 * MM_PER_INCH
    with house_style():
        figure = blank_sheet(width, height, dpi=96)
        draw_cell(
            figure, Box(0.0, 0.0, width, height), refined(portrait), scale_of(portrait.values, ""), plane
        )
    return figure


def colour_bar(portrait: Portrait) -> Figure:
    """Return the scale of the cell's colours alone, to stand beside a mesh."""
    scale = scale_of(portrait.values, column_words(portrait.column))
    with house_style():
        figure = blank_sheet(66.0, 12.0)
        draw_colour_bar(figure, Box(4.0, 1.5, 58.0, 9.0), scale, is_logarithmic(portrait.column))
    return figure
