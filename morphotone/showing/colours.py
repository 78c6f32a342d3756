"""The colours of every figure, mesh and page, in one place.

Continuous quantities: cividis (Nuñez, Anderton & Renslow 2018, PLoS ONE 13:e0199239), perceptually uniform
and the same to colour-blind eyes, from its pale end for the least value to its dark end for the greatest: the
tips of a cell, thin and remote, are then the darkest lines on white paper. Categories: the palette of Okabe &
Ito (2008, Color Universal Design) in an order of our own, with a line style each, since pages are printed in
grey.
"""

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from matplotlib import colormaps
from matplotlib.colors import ListedColormap
from numpy.typing import NDArray

Real = NDArray[np.float64]

# The last shades of cividis are too pale for a thin line on white paper (L* 91 at their end, 76 here).
_PALE, _DARK, _SHADES = 0.82, 0.0, 256
NO_VALUE = "#B4B4B4"
CONTINUOUS = ListedColormap(
    colormaps["cividis"](np.linspace(_PALE, _DARK, _SHADES)), "cividis_on_white"
).with_extremes(bad=NO_VALUE)
INK, FAINT = "#1A1A1A", "#8C8C8C"  # text and axes; reference lines, scale bars' grids


class Style(NamedTuple):
    """How a category is drawn.

    Attributes
    ----------
    colour : str
        ``#RRGGBB``.
    dashes : tuple of float
        Lengths of dash and gap in line widths, as for SVG's stroke-dasharray; empty for a whole line.
    """

    colour: str
    dashes: tuple[float, ...]

    @property
    def line(self) -> dict[str, Any]:
        """The same as keywords of a matplotlib line or collection of lines."""
        return {"color": self.colour, "linestyle": (0, self.dashes) if self.dashes else "-"}


# Neighbours differ in lightness too (L* of CIELAB 46, 71, 58, 54, 61, 70, 0, 89); yellow comes last because
# it is faint on white.
PALETTE = (
    Style("#0072B2", ()),  # blue
    Style("#E69F00", (5.0, 1.5)),  # orange
    Style("#009E73", (2.2, 1.0)),  # bluish green
    Style("#D55E00", (5.0, 1.5, 1.2, 1.5)),  # vermilion
    Style("#CC79A7", (6.0, 1.0)),  # reddish purple
    Style("#56B4E9", (3.0, 1.2)),  # sky blue
    Style("#000000", (5.0, 1.2, 1.2, 1.2, 1.2, 1.2)),  # black
    Style("#F0E442", (2.0, 3.0)),  # yellow
)

_DOMAINS = {
    "soma": Style("#000000", ()),
    "apical": PALETTE[0],
    "basal": Style(PALETTE[1].colour, ()),
    "axon": PALETTE[2],
}
_OTHER = PALETTE[4]


def domain_style(domain: str) -> Style:
    """Return the style of a domain by its name as in the tables; every other code has one in common."""
    return _DOMAINS.get(domain, _OTHER)


@dataclass(frozen=True)
class Scale:
    """What values the shades stand for.

    Attributes
    ----------
    label : str
        The quantity with its unit.
    least, greatest : float
        Values of the first and the last shade; equal where there is but one value, which has the middle
        shade; both NaN where there is none.
    """

    label: str
    least: float
    greatest: float

    def place(self, values: Real) -> Real:
        """Return where between least (0) and greatest (1) values stand, NaN where they are none."""
        values = np.asarray(values, np.float64)
        finite = np.isfinite(values)
        if not self.least < self.greatest:
            return np.where(finite, 0.5, np.nan)
        # Halves first, so that a range wider than the greatest number does not overflow.
        share = (values / 2 - self.least / 2) / (self.greatest / 2 - self.least / 2)
        return np.where(finite, np.clip(share, 0.0, 1.0), np.nan)

    def rgba(self, values: Real) -> NDArray[np.uint8]:
        """Return the shade of every value, shape (…, 4), 0 to 255; grey where there is no value."""
        colours: NDArray[np.uint8] = CONTINUOUS(np.ma.masked_invalid(self.place(values)), bytes=True)
        return colours


def scale_of(values: Real, label: str) -> Scale:
    """Return the scale from the least to the greatest finite value."""
    finite = np.asarray(values, np.float64)
    finite = finite[np.isfinite(finite)]
    if not len(finite):
        return Scale(label, np.nan, np.nan)
    return Scale(label, float(finite.min()), float(finite.max()))
