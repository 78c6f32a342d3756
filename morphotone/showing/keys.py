"""What explains a drawing: colour bar, key to the lines, numbers at sites, words for columns."""

import re

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from numpy.typing import NDArray

from morphotone.questions.portrait import Portrait
from morphotone.showing.colours import CONTINUOUS, INK, Scale
from morphotone.showing.panels import BACK, ENDLESS, LINE, OTHER, styles_of
from morphotone.showing.sheet import SMALL, Box, axes_at, even_ticks, factor_ticks, number_text, text_width_mm
from morphotone.showing.titles import without_unit

Real = NDArray[np.float64]

NUMBERED, _NUMBERED_SMALL = 12, 8  # sites with a number, in boxes from 50 mm on and below; others have a dot
_FEW = 40  # sites; the dots of more are smaller
_DISC = 1.45  # mm, radius of the disc that holds a number

_SPECIMEN, _KEY_ROW = 7.0, 2.8  # mm: a line shown and the gap behind it, from row to row

_WORDS = {
    "sample": "sample number",
    "diameter_um": "diameter (µm)",
    "branch": "branch number",
    "order": "branch order",
    "path_um": "path from the soma (µm)",
    "straight_um": "straight distance from the soma (µm)",
    "lambda_um": "space constant λ (µm)",
    "X": "electrotonic distance X",
    "R_in_MOhm": "input resistance (MΩ)",
    "R_transfer_MOhm": "transfer resistance to the soma (MΩ)",
    "attenuation_to_soma": "attenuation toward the soma",
    "attenuation_from_soma": "attenuation from the soma",
    "log_attenuation_to_soma": "attenuation toward the soma",
    "log_attenuation_from_soma": "attenuation from the soma",
    "charge_to_soma": "share of the charge that reaches the soma",
}
_AT_HZ = re.compile(r"_([\d.e+-]+)Hz\Z")


def is_logarithmic(column: str) -> bool:
    """Tell whether a column holds natural logarithms of attenuations, which a scale shows as attenuations."""
    return column.startswith("log_attenuation")


def column_words(column: str) -> str:
    """Return a column of the table by sample in words, its unit and frequency with it."""
    at = _AT_HZ.search(column)
    name = column[: at.start()] if at else column
    words = _WORDS.get(name)
    if words is None:
        base, unit = without_unit(name)
        words = base.replace("_", " ") + (f" ({unit})" if unit else "")
    # At a frequency there is no resistance, but the magnitude of an impedance.
    return f"{words.replace('resistance', 'impedance')} at {at.group(1)} Hz" if at else words


def draw_colour_bar(figure: Figure, box: Box, scale: Scale, logarithmic: bool) -> Axes:
    """Draw the shades of a scale across a box 9 mm high: words, shades, ticks, from above."""
    axes = axes_at(figure, box.inside(top=3.4, bottom=3.6), "colour bar")
    axes.set_title(scale.label, fontsize=SMALL, loc="left", pad=2.0)
    shades = np.linspace(0.0, 1.0, CONTINUOUS.N)[None, :]
    least, greatest = scale.least, scale.greatest
    axes.set_yticks([])
    axes.spines[:].set_linewidth(0.4)
    if not least < greatest:  # one value, or none
        axes.imshow(np.full((1, 1), 0.5), cmap=CONTINUOUS, vmin=0, vmax=1, aspect="auto", extent=(0, 1, 0, 1))
        value = np.exp(least) if logarithmic else least
        axes.set_xticks([0.5], [number_text(float(value)) if np.isfinite(value) else "no value"])
        return axes
    axes.imshow(shades, cmap=CONTINUOUS, aspect="auto", extent=(0.0, 1.0, 0.0, 1.0))
    most = max(2, int(box.width / 8.0))
    places, labels = (
        factor_ticks(least, greatest, most) if logarithmic else even_ticks(least, greatest, box.width)
    )
    axes.set_xticks(scale.place(places), labels)
    return axes


def draw_key(figure: Figure, box: Box, portrait: Portrait) -> Axes:
    """Explain the lines of the courses and the trees, in rows across a box."""
    items = [
        (_in_words(name, portrait), {"lw": 2 * LINE, **style.line})
        for name, style in styles_of(portrait).items()
    ]
    items.append(("from the soma (in colour: toward it)", BACK))
    if np.isfinite(portrait.endless.lambda_um):
        items.append((f"endless cable, λ {number_text(round(portrait.endless.lambda_um))} µm", ENDLESS))
    axes = axes_at(figure, box, "key")
    axes.set_axis_off()
    axes.set_xlim(0.0, box.width)
    axes.set_ylim(box.height, 0.0)
    left, row = 0.0, 0
    for words, line in items:
        width = _SPECIMEN + text_width_mm(words, SMALL)
        if left and left + width > box.width:
            left, row = 0.0, row + 1
        middle = (row + 0.5) * _KEY_ROW
        axes.plot([left, left + _SPECIMEN - 1.0], [middle, middle], clip_on=False, **line)
        axes.text(left + _SPECIMEN, middle, words, fontsize=SMALL, va="center_baseline")
        left += width + 3.0
    return axes


def _in_words(name: str, portrait: Portrait) -> str:
    """Return a domain as a reader knows it, the type codes without a name as numbers."""
    if name != OTHER:
        return name
    codes = sorted({run.domain for run in portrait.runs if run.domain.lstrip("-").isdigit()}, key=int)
    return f"type {', '.join(codes[:4])}{', …' if len(codes) > 4 else ''}"


def mark_sites(axes: Axes, box: Box, places: Real, ranks: NDArray[np.int64]) -> None:
    """Mark sites in axes that fill a box: a dot each, and beside the first in rank their numbers.

    Parameters
    ----------
    axes : Axes
        With its limits set.
    box : Box
        Where it is on the page.
    places : ndarray, shape (sites, 2)
        In the axes' data.
    ranks : ndarray of int64, shape (sites,)
        1 first.
    """
    if not len(places):
        return
    axes.plot(
        *places.T,
        ls="none",
        marker="o",
        ms=2.2 if len(places) <= _FEW else 1.4,
        mfc="white",
        mec=INK,
        mew=0.5,
        gid="sites",
        zorder=5,
        clip_on=False,
    )
    (left, right), (bottom, top) = axes.get_xlim(), axes.get_ylim()
    per_mm = np.array([(right - left) / box.width, (top - bottom) / box.height])
    on_page = (places - [left, bottom]) / per_mm
    order = np.argsort(ranks, kind="stable")
    shown = order[: NUMBERED if box.width >= 50.0 else _NUMBERED_SMALL]
    for site, disc in zip(shown.tolist(), _free_places(on_page, shown, box), strict=True):
        spot = disc * per_mm + [left, bottom]
        axes.plot(*zip(places[site], spot, strict=True), color=INK, lw=0.3, zorder=4, clip_on=False)
        disc_of = {"boxstyle": "circle,pad=0.15", "fc": "white", "ec": INK, "lw": 0.4}
        axes.annotate(
            str(ranks[site]),
            (spot[0], spot[1]),
            fontsize=SMALL,
            ha="center",
            va="center",
            zorder=6,
            bbox=disc_of,
            annotation_clip=False,
        )


def _free_places(on_page: Real, shown: NDArray[np.int64], box: Box) -> list[Real]:
    """Return for each numbered site, in mm, where its disc meets the fewest others and sites, near by."""
    turns = np.linspace(0.0, 2.0 * np.pi, 12, endpoint=False) + np.pi / 4.0
    ring = np.stack((np.cos(turns), np.sin(turns)), axis=1)
    offsets = np.concatenate([ring * (factor * _DISC) for factor in (1.9, 2.9, 4.0, 5.5, 7.5)])
    taken: list[Real] = []
    for site in shown.tolist():
        options = on_page[site] + offsets
        outside = (options < _DISC).any(axis=1) | (options > [box.width - _DISC, box.height - _DISC]).any(
            axis=1
        )
        overlap = np.zeros(len(options))
        for other, clearance in [
            *((disc, 2.2 * _DISC) for disc in taken),
            *((dot, 1.4 * _DISC) for dot in on_page),
        ]:
            overlap += np.maximum(clearance - np.linalg.norm(options - other, axis=1), 0.0)
        cost = overlap + 100.0 * outside + 0.05 * np.linalg.norm(offsets, axis=1)
        taken.append(options[np.argmin(cost)])
    return taken
