"""The map of one cell: what is drawn where, that it can be read, and what the files of it are."""

import io
import re
from xml.etree import ElementTree

import matplotlib
import numpy as np
import pytest
from matplotlib.collections import LineCollection
from matplotlib.image import imread

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.errors import ReadingError
from morphotone.questions.portrait import check_drawable
from morphotone.questions.refined import refined
from morphotone.reading.sites import read_sites
from morphotone.showing.colours import PALETTE, scale_of
from morphotone.showing.maps import WIDTHS_MM, colour_bar, map_figure, thumbnail
from morphotone.showing.sheet import FORMATS, MOST_VECTOR_LINES, POINTS_PER_MM, figure_bytes
from tests import trees
from tests.commands.folders import STUDY
from tests.showing.drawn import cut_off, in_mm, lines, overlapping, portrait, texts

MEASURES = ("path_um", "X", "to_soma", "from_soma")
SPAR, TETHER = ((STUDY / f"{name}_01.swc").read_bytes() for name in ("spar", "tether"))
ONLY_AXON = "1 1 0 0 0 5 -1\n2 2 50 0 0 1 1\n3 2 150 0 30 .5 2\n4 2 150 40 30 .5 2\n"
SOMA_ALONE = "1 1 0 0 0 5 -1\n2 1 0 5 0 5 1\n3 1 0 -5 0 5 1\n"
IN_DEPTH = "1 1 0 0 0 5 -1\n2 3 0 0 50 1 1\n3 3 0 0 150 .5 2\n"
ALL_EQUAL = "1 3 0 0 0 1 -1\n2 3 1e-3 0 0 1 1\n"
LONG_NAME = "a name that someone thought would tell everything about the cell, and then some, 2019-11-08 (3)"
CELLS = {
    "ball and stick": trees.ball_and_stick(),
    "no soma": trees.cylinder(),
    "soma alone": SOMA_ALONE,
    "chain": trees.soma_chain(),
    "outline": trees.soma_outline(),
    "all domains": trees.with_axon(),
    "only an axon": ONLY_AXON,
    "seen from its end": IN_DEPTH,
    "attenuations equal": ALL_EQUAL,
    "steep": trees.cylinder(length=40_000.0, diameter=0.5, pieces=40),
    "spar_01": SPAR,
    LONG_NAME: TETHER,
}
QUICK = ("ball and stick", "seen from its end", "attenuations equal", LONG_NAME)


@pytest.fixture(scope="module")
def spar():
    sites = read_sites(STUDY / "sites.csv").sites
    return portrait(SPAR, sites=sites.at(sites.cell == "spar_01"))


@pytest.fixture(scope="module")
def figure(spar):
    return map_figure(spar)


# ---------------------------------------------------------------- what is drawn


def test_every_frustum_is_drawn_where_it_is_as_thick_as_it_is(spar, figure):
    axes = next(axes for axes in figure.axes if axes.get_label() == "cell")
    cable = next(each for each in axes.collections if each.get_gid() == "cable")
    across, up = in_mm(figure, "cell")
    assert across == pytest.approx(up)
    start, end = spar.ends
    order = np.argsort(end[1:, 2], kind="stable") + 1
    drawn = np.array(cable.get_segments())
    np.testing.assert_array_equal(drawn[:, 0], start[order, :2])
    np.testing.assert_array_equal(drawn[:, 1], end[order, :2])
    diameter = (spar.cell.cable.r_start + spar.cell.cable.r_end)[order]
    points = np.maximum(diameter / across * POINTS_PER_MM, 0.25)
    np.testing.assert_allclose(cable.get_linewidths(), points, rtol=1e-9)
    assert (points > 0.25).sum() > 100


def test_colours_are_those_of_the_values(spar, figure):
    axes = next(axes for axes in figure.axes if axes.get_label() == "cell")
    cable = next(each for each in axes.collections if each.get_gid() == "cable")
    order = np.argsort(spar.ends[1][1:, 2], kind="stable") + 1
    shades = scale_of(spar.values, "").rgba(spar.values[order])
    np.testing.assert_allclose(cable.get_colors() * 255, shades)


def test_the_scale_bar_is_as_long_as_it_says(figure):
    for panel, unit in (("cell", "µm"), ("path_um", "µm of path")):
        bar = next(axes for axes in figure.axes if axes.get_label() == f"bar {panel}")
        (line,), (words,) = bar.lines, bar.texts
        width_mm = bar.get_position().width * 175.0
        per_mm = in_mm(figure, "cell" if panel == "cell" else f"tree {panel}")[0]
        long = np.ptp(line.get_xdata()) * width_mm * per_mm
        assert words.get_text() == f"{long:.0f} {unit}"


@pytest.mark.parametrize("measure", ["to_soma", "from_soma"])
def test_the_scale_bar_of_an_attenuation_is_its_logarithm(figure, measure):
    bar = next(axes for axes in figure.axes if axes.get_label() == f"bar {measure}")
    long = np.ptp(bar.lines[0].get_xdata()) * bar.get_position().width * 175.0
    factor = float(re.match(r"attenuation ([\d.]+) ", bar.texts[0].get_text()).group(1))
    assert long * in_mm(figure, f"tree {measure}")[0] == pytest.approx(np.log(factor))


@pytest.mark.parametrize("measure", MEASURES)
def test_trees_and_flats_hold_the_distances_of_the_table(spar, figure, measure):
    drawn = sorted(line[-1].tolist() for line in lines(figure, f"tree {measure}"))
    ends = [run.nodes[-1] for run in spar.runs]
    assert drawn == sorted(spar.transformed(measure)[ends, :2].tolist())
    flat = sorted(line[-1, 0] for line in lines(figure, f"flat {measure}"))
    assert flat == sorted(getattr(spar.distances, measure)[ends].tolist())


@pytest.mark.parametrize("measure", ["path_um", "X"])
def test_courses_hold_every_branch_both_ways(spar, figure, measure):
    along = getattr(spar.distances, measure)
    back = lines(figure, f"course {measure}", "from the soma")
    assert len(back) == len(spar.runs)
    for run, line in zip(spar.runs, back, strict=True):
        np.testing.assert_array_equal(line, np.stack((along, spar.distances.from_soma), axis=1)[run.nodes])
    toward = [line for domain in ("basal", "apical") for line in lines(figure, f"course {measure}", domain)]
    runs = sorted((run for run in spar.runs), key=lambda run: run.domain == "apical")
    for run, line in zip(runs, toward, strict=True):
        np.testing.assert_array_equal(line, np.stack((along, spar.distances.to_soma), axis=1)[run.nodes])


@pytest.mark.parametrize("hz", [0.0, 100.0])
def test_the_endless_cable_falls_by_e_in_the_stems_lambda(hz):
    """At 0 Hz e-fold in λ = sqrt(R_m·d/(4·R_i)); at f, Re sqrt(1 + 2πi·f·R_m·C_m) times as fast."""
    R_m, R_i, C_m, d = 12_000.0, 180.0, 0.8, 3.0
    assumptions = Assumptions(membrane=Membrane(R_m, R_i, C_m), hz=(hz,) if hz else ())
    figure = map_figure(portrait(trees.cylinder(diameter=d, pieces=4), assumptions, hz))
    lambda_um = np.sqrt(R_m * d * 1e-4 / (4.0 * R_i)) * 1e4
    q = np.sqrt(1.0 + 2j * np.pi * hz * R_m * C_m * 1e-6).real
    for measure, per_efold in (("path_um", lambda_um / q), ("X", 1.0 / q)):
        axes = next(axes for axes in figure.axes if axes.get_label() == f"course {measure}")
        line = next(line for line in axes.lines if line.get_gid() == "endless")
        assert np.ptp(line.get_xdata()) / np.ptp(line.get_ydata()) == pytest.approx(per_efold)
    assert f"λ {lambda_um:.0f} µm" in " ".join(words for words, _ in texts(figure))


def test_axes_name_what_they_measure_with_its_unit(figure):
    words = {axes.get_label(): (axes.get_xlabel(), axes.get_ylabel()) for axes in figure.axes}
    assert words["course path_um"] == ("path from the soma (µm)", "attenuation (log scale)")
    assert words["course X"] == ("electrotonic distance X", "attenuation (log scale)")
    assert words["flat path_um"][0] == "path (µm)"
    assert [words[f"flat {one}"][0] for one in ("to_soma", "from_soma")] == [
        "attenuation toward the soma",
        "attenuation from the soma",
    ]


def test_sites_are_numbered_by_rank_at_their_places(spar, figure):
    """README: s05 is first, then s06, s07, s03 and so on."""
    order = [spar.marks.label[row] for row in np.argsort(spar.marks.rank)]
    assert order[:3] == ["s05", "s06", "s07"]
    for panel, places in (
        ("cell", spar.marks.position[:, :2]),
        ("course X", np.stack((spar.marks.distances.X, spar.marks.distances.to_soma), axis=1)),
    ):
        axes = next(axes for axes in figure.axes if axes.get_label() == panel)
        dots = next(line for line in axes.lines if line.get_gid() == "sites")
        np.testing.assert_array_equal(dots.get_xydata(), places)
        numbers = [text.get_text() for text in axes.texts]
        assert numbers == [str(number) for number in range(1, 11)]


def test_what_was_assumed_stands_at_the_foot():
    assumptions = Assumptions.from_toml((STUDY / "assumptions.toml").read_text(encoding="utf-8"))
    figure = map_figure(portrait(SPAR, assumptions, hz=100.0))
    said = " · ".join(words for words, _ in texts(figure))
    for phrase in (
        "at 100 Hz", "R_m 15,000 Ω cm²", "R_i 150 Ω cm", "C_m 0.95 µF/cm²", "basal: spine factor 1.5",
        "apical: spine factor 1.8", "axon kept", "soma: sphere", "cell.swc", "SHA-256 665d85968afa", "sound",
        "morphotone", "research use",
    ):  # fmt: skip
        assert phrase in said


# ---------------------------------------------------------------- that it can be read


@pytest.mark.parametrize("width", WIDTHS_MM)
@pytest.mark.parametrize(
    "name", [name if name in QUICK else pytest.param(name, marks=pytest.mark.slow) for name in CELLS]
)
def test_no_word_is_cut_off_or_lies_on_another(name, width):
    figure = map_figure(portrait(CELLS[name], name=f"{name}.swc"), width)
    assert figure.get_size_inches()[0] * 25.4 == pytest.approx(width)
    assert figure.get_size_inches()[1] * 25.4 <= 240.0
    assert cut_off(figure) == []
    assert overlapping(figure) == []
    sizes = [text.get_fontsize() for axes in figure.axes for text in axes.texts]
    assert min(sizes, default=5.0) >= 5.0


def test_drawings_stay_in_their_panels(figure):
    for axes in figure.axes:
        (left, right), (bottom, top) = sorted(axes.get_xlim()), sorted(axes.get_ylim())
        for each in axes.collections:
            if isinstance(each, LineCollection):
                points = np.concatenate(each.get_segments())
                assert (points >= [left, bottom]).all()
                assert (points <= [right, top]).all()


@pytest.mark.parametrize(
    "swc", [trees.ball_and_stick(), trees.soma_chain(), trees.soma_outline(), SOMA_ALONE]
)
def test_the_soma_stays_in_its_panel(swc):
    """Its outermost ink, from the dots of a thumbnail, keeps off the edge."""
    image = imread(io.BytesIO(figure_bytes(thumbnail(portrait(swc)), "png", 96)))[..., :3]
    inked = (image < 0.95).any(axis=2)
    assert inked.any()
    for edge in (inked[0], inked[-1], inked[:, 0], inked[:, -1]):
        assert not edge.any()


def test_one_domain_alone_is_drawn_whole_and_several_are_told_apart_by_dashes():
    alone = map_figure(portrait(ONLY_AXON))
    several = map_figure(portrait(trees.with_axon()))

    def dashes(figure):
        axes = next(axes for axes in figure.axes if axes.get_label() == "course X")
        return {each.get_gid(): each.get_linestyles()[0][1] for each in axes.collections}

    assert dashes(alone)["axon"] is None
    assert dashes(several)["axon"] is not None
    assert dashes(several)["apical"] is None
    assert PALETTE[2].dashes


@pytest.mark.parametrize(
    ("column", "label", "ticks"),
    [
        (None, "attenuation toward the soma", {"1", "2", "5"}),
        ("X", "electrotonic distance X", {"0", "0.2", "0.4"}),
        ("lambda_um", "space constant λ (µm)", {"400", "600", "1000"}),
        ("order", "branch order", {"0", "2", "4"}),
    ],
)
def test_the_colour_bar_names_its_quantity(column, label, ticks):
    figure = colour_bar(portrait(SPAR, colour=column))
    words = {words for words, _ in texts(figure)}
    assert label in words
    assert ticks <= words
    assert cut_off(figure) == []


def test_a_constant_column_has_one_shade_and_its_number():
    swc = "1 1 0 0 0 5 -1\n" + "".join(f"{i} 3 {30 * i} 0 0 5 {i - 1}\n" for i in range(2, 6))
    drawn = portrait(swc, colour="diameter_um")
    axes = next(axes for axes in map_figure(drawn).axes if axes.get_label() == "cell")
    cable = next(each for each in axes.collections if each.get_gid() == "cable")
    assert len(np.unique(cable.get_colors(), axis=0)) == 1
    assert "10" in {words for words, _ in texts(colour_bar(drawn))}


# ---------------------------------------------------------------- the files


@pytest.mark.parametrize("kind", FORMATS)
def test_the_same_input_gives_the_same_bytes_whatever_the_settings_outside(kind):
    first = figure_bytes(map_figure(portrait(trees.with_axon())), kind)
    with matplotlib.rc_context({"font.size": 30.0, "lines.linewidth": 9.0, "axes.facecolor": "red"}):
        assert figure_bytes(map_figure(portrait(trees.with_axon())), kind) == first


def test_text_in_svg_is_text():
    root = ElementTree.fromstring(figure_bytes(map_figure(portrait(trees.with_axon())), "svg"))
    said = {"".join(element.itertext()).strip() for element in root.iter("{http://www.w3.org/2000/svg}text")}
    assert {"path from the soma (µm)", "electrotonic distance X", "apical", "axon"} <= said


@pytest.mark.parametrize(
    "name", ["a$b$c", "$", "x_{1}^2 $\\frac{1}{2}$", "<b>&amp;", "細胞 7 Ünïcøde", "%s {0} \\n"]
)
def test_a_name_is_written_as_it_is_but_for_signs_the_font_lacks(name):
    figure = map_figure(portrait(trees.ball_and_stick(), name=f"{name}.swc"))
    assert overlapping(figure) == cut_off(figure) == []
    root = ElementTree.fromstring(figure_bytes(figure, "svg"))
    said = {"".join(element.itertext()).strip() for element in root.iter("{http://www.w3.org/2000/svg}text")}
    assert name.replace("細胞", "\ufffd\ufffd") in said


def test_fonts_are_embedded_in_pdf():
    """TrueType programs (FontFile2) of every font used (ISO 32000-1, 9.9, table 126)."""
    pdf = figure_bytes(map_figure(portrait(trees.with_axon())), "pdf")
    assert pdf.count(b"/FontFile2") == pdf.count(b"/Type /FontDescriptor") > 0
    assert b"/Type3" not in pdf
    assert b"/CreationDate" not in pdf


def test_lines_by_the_thousand_become_an_image_and_words_stay_words():
    pieces = MOST_VECTOR_LINES + 10
    svg = figure_bytes(map_figure(portrait(trees.cylinder(pieces=pieces)), 85), "svg")
    assert svg.count(b"<image") >= 3
    assert len(svg) < 600_000
    assert b"path from the soma" in svg


def test_a_thumbnail_is_small_and_shows_the_cell():
    data = figure_bytes(thumbnail(portrait(SPAR)), "png", 96)
    image = imread(io.BytesIO(data))[..., :3]
    assert image.shape == (240, 320, 3)
    assert len(data) < 15_000
    inked = (image < 0.9).any(axis=2)
    rows, columns = np.flatnonzero(inked.any(axis=1)), np.flatnonzero(inked.any(axis=0))
    assert np.ptp(rows) > 200  # a tall cell, from top to bottom
    assert 0.005 < inked.mean() < 0.2
    assert columns.min() > 10


@pytest.mark.parametrize("plane", ["xy", "xz", "yz"])
def test_a_plane_shows_its_coordinates(plane):
    drawn = portrait(trees.with_axon())
    figure = map_figure(drawn, plane=plane)
    chosen = ["xyz".index(letter) for letter in plane]
    ends = np.array(lines(figure, "cell", "cable"))[:, 1]
    assert {tuple(end) for end in ends} == {tuple(end) for end in refined(drawn).ends[1][1:, chosen]}
    assert f"to scale, {plane[0]} across, {plane[1]} up" in {words for words, _ in texts(figure)}


@pytest.mark.slow
def test_a_hundred_thousand_samples_are_drawn():
    figure = map_figure(portrait(trees.deep_chain()))
    assert len(figure_bytes(figure, "png")) < 1_000_000
    assert sum(len(line) - 1 for line in lines(figure, "tree X")) == 99_999


def test_a_cell_whose_attenuation_is_no_number_is_refused_in_a_sentence():
    absurd = portrait(trees.ball_and_stick())
    endless = absurd.distances._replace(to_soma=np.full(len(absurd.values), np.inf))
    absurd.__dict__["distances"] = endless  # in the place of what is worked out when first asked for
    with pytest.raises(ReadingError, match=r"cell\.swc: read sizes .*; check the file's unit") as refused:
        check_drawable(absurd)
    assert refused.value.reason == "not_drawable"
