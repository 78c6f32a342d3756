"""Colours that tell values apart in grey print and to colour-blind eyes."""

import numpy as np
import pytest
from matplotlib.colors import to_rgb

from morphotone.showing.colours import (
    CONTINUOUS,
    NO_VALUE,
    PALETTE,
    Scale,
    domain_style,
    scale_of,
)


def lightness(colour):
    """L* of CIELAB (CIE 15:2004, eq. 8.3) from sRGB (IEC 61966-2-1)."""
    rgb = np.array(to_rgb(colour))
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    Y = linear @ [0.2126, 0.7152, 0.0722]
    return 116 * np.cbrt(Y) - 16 if Y > (6 / 29) ** 3 else Y * (29 / 3) ** 3


def test_the_shades_darken_evenly():
    L = np.array([lightness(colour) for colour in CONTINUOUS(np.linspace(0, 1, 33))])
    steps = -np.diff(L)
    assert steps.min() > 0.5 * steps.mean()
    assert L[0] < 78
    assert L[-1] < 20


# Okabe & Ito 2008, Color Universal Design; the same eight in Wong 2011, Nature Methods 8:441 (from memory).
OKABE_ITO = {"000000", "E69F00", "56B4E9", "009E73", "F0E442", "0072B2", "D55E00", "CC79A7"}


def test_the_palette_is_okabe_and_itos():
    assert {style.colour.removeprefix("#") for style in PALETTE} == OKABE_ITO


def test_categories_differ_in_line_as_well_as_colour():
    assert len({style.dashes for style in PALETTE}) == len(PALETTE)


def test_domains_are_told_apart_without_colour():
    styles = [domain_style(name) for name in ("soma", "axon", "basal", "apical", "type_7")]
    assert len({style.colour for style in styles}) == len(styles)
    solid = [lightness(style.colour) for style in styles if not style.dashes]
    assert min(np.diff(sorted(solid))) > 20
    assert domain_style("type_7") == domain_style("undefined")


def test_line_keywords_are_matplotlibs():
    assert domain_style("basal").line == {"color": "#E69F00", "linestyle": "-"}
    assert domain_style("axon").line["linestyle"] == (0, domain_style("axon").dashes)


def test_a_scale_runs_from_least_to_greatest():
    values = np.array([2.0, np.nan, 6.0, 3.0, np.inf])
    scale = scale_of(values, "X")
    assert scale == Scale("X", 2.0, 6.0)
    np.testing.assert_array_equal(scale.place(values), [0.0, np.nan, 1.0, 0.25, np.nan])
    np.testing.assert_array_equal(scale.place(np.array([0.0, 10.0])), [0.0, 1.0])
    colours = scale.rgba(values)
    assert colours.shape == (5, 4)
    assert colours.dtype == np.uint8
    np.testing.assert_array_equal(colours[0], CONTINUOUS(0.0, bytes=True))
    np.testing.assert_array_equal(colours[2], CONTINUOUS(1.0, bytes=True))
    np.testing.assert_array_equal(colours[[1, 4], :3], np.round(255 * np.array([to_rgb(NO_VALUE)] * 2)))


@pytest.mark.parametrize("values", [[5.0, 5.0], [5.0, np.nan]])
def test_one_value_has_the_middle_shade(values):
    scale = scale_of(np.array(values), "X")
    assert scale.place(np.array([5.0])) == 0.5


def test_no_value_is_all_grey():
    scale = scale_of(np.array([np.nan, np.nan]), "X")
    assert np.isnan(scale.place(np.array([np.nan, np.nan]))).all()
    assert len(np.unique(scale.rgba(np.array([np.nan, np.nan])), axis=0)) == 1


def test_the_widest_range_does_not_overflow():
    np.testing.assert_array_equal(Scale("X", -1.7e308, 1.7e308).place(np.array([0.0])), [0.5])
