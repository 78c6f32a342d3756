"""The paper of a figure: places in mm, type that stays type, the same bytes each time, round numbers.

A sheet is a matplotlib Figure without pyplot and without the settings of whoever runs it: what a figure looks
like depends on its data alone.
"""

import io
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from importlib.metadata import version
from typing import Any, Literal, NamedTuple, get_args

import matplotlib
import numpy as np
from matplotlib import style
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.font_manager import FontProperties, findfont, get_font
from matplotlib.textpath import TextToPath
from numpy.typing import NDArray

from morphotone.showing.colours import INK

Real = NDArray[np.float64]
Format = Literal["png", "svg", "pdf"]

FORMATS: tuple[Format, ...] = get_args(Format)
MM_PER_INCH, POINTS_PER_INCH = 25.4, 72.0
POINTS_PER_MM = POINTS_PER_INCH / MM_PER_INCH
DPI = 300  # of PNG, and of what is drawn as an image inside PDF and SVG
TITLE, TEXT, SMALL = 8.0, 6.5, 5.5  # points; journals ask for 5 to 8 (common practice)
# More lines than this make a vector file large and slow to open: they become an image, the words stay words.
MOST_VECTOR_LINES = 4000

_EQUAL = 5e-5  # a span of logarithms below which six digits are too few for three ticks
_FONT = "DejaVu Sans"  # comes with matplotlib, so that every machine has it
_SETTINGS = {
    "font.family": [_FONT],
    "font.size": TEXT,
    "text.color": INK,
    "text.parse_math": False,  # a file may have $ in its name
    "axes.labelcolor": INK,
    "axes.edgecolor": INK,
    "axes.linewidth": 0.5,
    "axes.labelsize": TEXT,
    "axes.labelpad": 2.0,
    "axes.unicode_minus": True,
    "xtick.labelsize": SMALL,
    "ytick.labelsize": SMALL,
    "xtick.color": INK,
    "ytick.color": INK,
    "xtick.major.size": 2.0,
    "ytick.major.size": 2.0,
    "xtick.major.width": 0.5,
    "ytick.major.width": 0.5,
    "xtick.major.pad": 1.5,
    "ytick.major.pad": 1.5,
    "pdf.fonttype": 42,  # whole TrueType fonts, which can be searched and edited
    "svg.fonttype": "none",  # text as text
    "svg.hashsalt": "morphotone",
    "agg.path.chunksize": 0,
}


class Box(NamedTuple):
    """A rectangle on the page, mm from its left and upper edge."""

    left: float
    top: float
    width: float
    height: float

    @property
    def right(self) -> float:
        """Its right edge."""
        return self.left + self.width

    @property
    def bottom(self) -> float:
        """Its lower edge."""
        return self.top + self.height

    def inside(self, left: float = 0.0, top: float = 0.0, right: float = 0.0, bottom: float = 0.0) -> "Box":
        """Return what is left of it within margins."""
        return Box(self.left + left, self.top + top, self.width - left - right, self.height - top - bottom)

    def columns(self, count: int, gap: float) -> "list[Box]":
        """Return it cut into equal columns."""
        width = (self.width - (count - 1) * gap) / count
        return [Box(self.left + i * (width + gap), self.top, width, self.height) for i in range(count)]

    def rows(self, count: int, gap: float) -> "list[Box]":
        """Return it cut into equal rows, the uppermost first."""
        height = (self.height - (count - 1) * gap) / count
        return [Box(self.left, self.top + i * (height + gap), self.width, height) for i in range(count)]


@contextmanager
def house_style() -> Iterator[None]:
    """Draw with the settings of this house, whatever matplotlib's are outside."""
    with style.context(_SETTINGS, after_reset=True):
        yield


def blank_sheet(width_mm: float, height_mm: float, dpi: float = DPI) -> Figure:
    """Return an empty page."""
    figure = Figure(figsize=(width_mm / MM_PER_INCH, height_mm / MM_PER_INCH), dpi=dpi)
    FigureCanvasAgg(figure)
    return figure


def axes_at(figure: Figure, box: Box, name: str) -> Axes:
    """Return new axes that fill a box, under a name to find them by (`Axes.get_label`)."""
    return figure.add_axes(_share(figure, box), label=name)


def write_at(figure: Figure, left: float, top: float, text: str, **words: Any) -> None:
    """Put text on the page, its upper left corner at a place in mm unless told otherwise."""
    width, height = figure.get_size_inches() * MM_PER_INCH
    settings: dict[str, Any] = {"ha": "left", "va": "top", "fontsize": TEXT, **words}
    figure.text(left / width, 1.0 - top / height, text, **settings)


def _share(figure: Figure, box: Box) -> tuple[float, float, float, float]:
    width, height = figure.get_size_inches() * MM_PER_INCH
    return box.left / width, 1.0 - box.bottom / height, box.width / width, box.height / height


def figure_bytes(figure: Figure, kind: Format, dpi: float = DPI) -> bytes:
    """Return a figure as the content of a file; the same figure gives the same bytes.

    Parameters
    ----------
    figure : Figure
        As the functions of this floor return them.
    kind : {"png", "svg", "pdf"}
        Text stays text in SVG, fonts are embedded in PDF; no date is written into any.
    dpi : float
        Dots per inch of a PNG, and of images inside the others.
    """
    made_by = f"morphotone {version('morphotone')}"
    metadata = {
        "png": {"Software": made_by},
        "svg": {"Creator": made_by, "Date": None},
        "pdf": {"Creator": made_by, "Producer": f"matplotlib {matplotlib.__version__}", "CreationDate": None},
    }
    stream = io.BytesIO()
    with house_style():
        figure.savefig(stream, format=kind, dpi=dpi, metadata=metadata[kind])
    return stream.getvalue()


def round_length(greatest: float) -> float:
    """Return the largest of 1, 2, 5 times a power of ten that is no more than this positive length."""
    power = 10.0 ** np.floor(np.log10(greatest))
    return float(max(step for step in (0.5, 1.0, 2.0, 5.0) if step * power <= greatest * (1 + 1e-9)) * power)


def round_factor(greatest: float) -> float:
    """Return a round factor, at most e^greatest and above 1, whose logarithm a scale bar can be long."""
    if greatest >= np.log(2.0):
        decades = np.floor(greatest / np.log(10.0))
        steps = [10.0**decades * step for step in (1.0, 2.0, 5.0) if decades or step > 1.0]
        return float(max(step for step in steps if np.log(step) <= greatest * (1 + 1e-9)))
    return 1.0 + round_length(float(np.expm1(greatest)))


def even_ticks(least: float, greatest: float, length_mm: float) -> tuple[Real, list[str]]:
    """Return where on an axis across the page to put ticks at round numbers, and the numbers to write there.

    Parameters
    ----------
    least, greatest : float
        Ends of the axis, the second above the first.
    length_mm : float
        Its length, which decides how many numbers find room.
    """
    step = round_length((greatest - least) / 2.0)
    ticks = (
        np.arange(np.ceil(least / step - 1e-9), np.floor(greatest / step + 1e-9) + 1) * step + 0.0
    )  # no -0
    labels = [number_text(float(f"{tick:.6g}")) for tick in ticks]
    room = max(text_width_mm(label, SMALL) for label in labels) + 3.0
    every = max(1, int(np.ceil(room * len(ticks) / length_mm)))
    return ticks[::every], labels[::every]


def factor_ticks(least: float, greatest: float, most: int = 6) -> tuple[Real, list[str]]:
    """Return where on an axis of log attenuation to put ticks, and the attenuations to write there.

    Parameters
    ----------
    least, greatest : float
        Ends of the axis, natural logarithms.
    most : int
        How many ticks at most.

    Returns
    -------
    places : ndarray
        Natural logarithms.
    labels : list of str
        The factors: 1, 2, 5, 10 and so on; steps of one length where the axis spans less than a factor 3;
        the least alone where all are equal to the digits a label has.
    """
    if greatest - least < _EQUAL:
        factors = [float(np.exp(least))]
    elif greatest - least < np.log(3.0):
        factors = _even_factors(float(np.exp(least)), float(np.exp(greatest)), most)
    else:
        factors = _round_factors(least, greatest, most)
    return np.log(factors), [_factor_text(factor) for factor in factors]


def _factor_text(factor: float) -> str:
    """Return an attenuation for an axis, where 10⁴ takes less room than 10,000."""
    return number_text(factor) if factor < 1e4 else _power_text(factor)


def _even_factors(low: float, high: float, most: int) -> list[float]:
    """Return factors in steps of one round length, counted from 1, where there is no attenuation."""
    step = round_length((high - low) / 2.0)
    for wider in (1.0, 2.0, 2.5, 5.0, 10.0):
        first = np.ceil((low - 1.0) / (step * wider) - 1e-9)
        last = np.floor((high - 1.0) / (step * wider) + 1e-9)
        if last - first < most:
            break
    decimals = int(max(0, 2 - np.floor(np.log10(step))))
    return [round(float(1.0 + i * step * wider), decimals) for i in np.arange(first, last + 1)]


def _round_factors(least: float, greatest: float, most: int) -> list[float]:
    powers = range(int(np.floor(least / np.log(10.0))) - 1, int(np.ceil(greatest / np.log(10.0))) + 1)
    decades = (1, 2, 5, 10, 20, 50, 100, 200)
    for steps, every in [((1.0, 2.0, 5.0), 1), *(((1.0,), every) for every in decades)]:
        factors = [step * 10.0**power for power in powers if power % every == 0 for step in steps]
        factors = [each for each in factors if least - 1e-9 <= np.log(each) <= greatest + 1e-9]
        if len(factors) <= most:
            return factors
    return factors


def number_text(value: float) -> str:
    """Return a number as a scale shows it: thousands apart, or a power of ten where it is very large."""
    size = abs(value)
    if size and not 1e-4 <= size < 1e6:
        return _power_text(value)
    text = f"{value:.6g}"
    return f"{value:,.0f}" if "." not in text and size >= 1e4 else text.replace("-", "−")


def _power_text(value: float) -> str:
    power = int(np.floor(np.log10(abs(value)) + 1e-9))
    lead = f"{value / 10.0**power:.3g}".replace("-", "−")
    raised = str(power).translate(str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹"))
    return f"10{raised}" if lead == "1" else f"{lead}·10{raised}"


def in_our_font(text: str) -> str:
    """Return a text, what the house's font has no sign for replaced by U+FFFD."""
    font = get_font(findfont(FontProperties(family=_FONT)))
    return "".join(c if font.get_char_index(ord(c)) else "\N{REPLACEMENT CHARACTER}" for c in text)


def text_width_mm(text: str, points: float, bold: bool = False) -> float:
    """Return how wide a line of text is in the house's font."""
    font = FontProperties(family=_FONT, size=points, weight="bold" if bold else "normal")
    width, _, _ = TextToPath().get_text_width_height_descent(text, font, ismath=False)
    return float(width) / POINTS_PER_MM


def wrapped(parts: Sequence[str], width_mm: float, points: float) -> list[str]:
    """Return phrases put together to lines that fit a width; none is cut in two."""
    lines = [""]
    for part in parts:
        joined = f"{lines[-1]} · {part}" if lines[-1] else part
        if not lines[-1] or text_width_mm(joined, points) <= width_mm:
            lines[-1] = joined
        else:
            lines.append(part)
    return lines
