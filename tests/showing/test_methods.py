"""The methods in words: each assumption and each loss is told, and nothing that was not."""

import pandas as pd
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.questions.comparisons import comparisons
from morphotone.questions.groups import grouped
from morphotone.questions.summaries import Bootstrap, summary
from morphotone.questions.units import units
from morphotone.reading.groups import parse_groups
from morphotone.showing.methods import Source, electrotonus, listed, named, reconstructions, software
from morphotone.showing.references import cited
from morphotone.showing.statistics import statistics
from morphotone.showing.titles import plain
from morphotone.showing.typeset import paragraphs_latex, paragraphs_markdown

CELLS = pd.DataFrame(
    {
        "file": ["a.swc", "b.swc", "c.swc", "d.swc", "e.swc"],
        "grade": ["sound", "doubtful", "sound", "sound", "sound"],
        "soma_rule": ["sphere", "chain", "sphere", "none", "outline"],
        "length_axon_um": [0.0, 100.0, 0.0, 0.0, 0.0],
        "orphans_left_out": [0, 2, 0, 0, 9],
        "orphans_joined": 0,
        "orphans_um": [0.0, 1234.5, 0.0, 0.0, 9e9],
        "R_in_MOhm": [100.0, 110.0, 150.0, 170.0, 9e9],
    }
)
FINDINGS = pd.DataFrame(
    [
        ("b.swc", "doubtful", "radius_mended", "doubtful"),
        ("e.swc", "sound", "radius_mended", "doubtful"),
        ("x.swc", "unfit", "unit_implausible", "unfit"),
        ("x.swc", "unfit", "flat", "doubtful"),
    ],
    columns=["file", "grade", "code", "severity"],
)
AWAY = pd.DataFrame({"file": ["x.swc", "y.swc", "z.swc"], "reason": ["unfit", "loop", "of_a_new_kind"]})
RECORD = {
    "morphotone": "0.9",
    "python": "3.12.1",
    "packages": {"numpy": "2.1", "scipy": "1.15"},
    "delays": False,
    "time_constants": 0,
    "transient_ms": None,
}
LINES = ["a,small,Ada", "b,small,Ada", "c,great,Bob", "d,great,Bob"]


def source(
    assumptions=None, *, lines=LINES, cells=CELLS, findings=FINDINGS, away=AWAY, mean_over=None, **record
):
    table = parse_groups("\n".join(["cell,class,animal", *lines]).encode(), "g.csv")
    found = units(cells, grouped(cells, table), ["class"], ["R_in_MOhm"], mean_over=mean_over)
    return Source({**RECORD, **record}, assumptions or Assumptions(), cells, findings, away, found)


def told(*args, family="table", how=None, **options):
    """Return the statistics of a source in plain words."""
    found = source(*args, **options).units
    numbers = summary(found.table, found.by, found.columns)
    tests = comparisons(found.table, found.by, found.columns, family=family)
    return plain(statistics(found, numbers, tests, how or Bootstrap(), family))


def test_files_are_accounted_for():
    text = reconstructions(source())
    assert text.startswith(
        "Of 8 reconstructions in the SWC format ⟨Cannon1998⟩, 5 were analysed and 3 turned away: 1 with "
        "samples in a loop, 1 (of a new kind) and 1 as unfit for cable analysis (sizes no neuron has). The "
        "4 cells with a group were used; 1 other analysed cell had none. Of the 4 cells used, vetting for "
        "faults that bear on cable analysis graded 3 sound and 1 doubtful."
    )


def test_what_was_done_to_the_used_cells_is_told_and_nothing_of_the_others():
    text = reconstructions(source())
    assert "In 1 cell radii of zero or below were replaced by a neighbouring sample's." in text
    assert "its membrane as that of a sphere (2) and of the frusta along a chain of samples (1)." in text
    assert "In 1 cell without a soma the root was the point of reference." in text
    assert "The axon was analysed as traced (in 1 cell)." in text
    assert "were left out (in 1 cell, 1,234 µm of cable)." in text
    assert "outline" not in text


def test_of_a_clean_study_little_is_told():
    sphere = CELLS.iloc[[0, 2]].assign(orphans_left_out=0)
    text = reconstructions(source(lines=["a,x,", "c,y,"], cells=sphere, findings=FINDINGS[:0], away=AWAY[:0]))
    assert text == (
        "Of 2 reconstructions in the SWC format ⟨Cannon1998⟩, 2 were analysed. Of the 2 cells used, vetting "
        "for faults that bear on cable analysis graded all sound. Coordinates and radii were taken as "
        "micrometres, without correction for shrinkage. The soma was taken as isopotential, its membrane as "
        "that of a sphere (2)."
    )


@pytest.mark.parametrize(
    ("changes", "sentence"),
    [
        (
            {"unit_um": 0.001},
            "One unit of the files was taken as 0.001 µm, without correction",
        ),
        (
            {"shrinkage": (1.1, 1.1, 1.5)},
            "against shrinkage, x, y and z were multiplied by 1.1, 1.1 and 1.5",
        ),
        ({"diameter_factor": 1.2}, "Diameters were multiplied by 1.2."),
        ({"diameter_offset_um": -0.1}, "Diameters were decreased by 0.1 µm."),
        (
            {"diameter_factor": 1.2, "diameter_offset_um": 0.1},
            "Diameters were multiplied by 1.2 and increased by 0.1 µm.",
        ),
        ({"axon": "left out"}, "The axon was left out."),
        ({"axon": "cut", "axon_cut_um": 60.0}, "The axon was cut 60 µm from where it starts."),
    ],
)
def test_geometry_and_axon(changes, sentence):
    assert sentence in reconstructions(source(Assumptions(**changes)))


def test_joined_orphans():
    text = reconstructions(
        source(
            Assumptions(orphans="joined", orphan_gap_um=2.0),
            cells=CELLS.assign(orphans_joined=[0, 0, 3, 0, 0]),
        )
    )
    assert "joined across gaps up to 2 µm (in 1 cell)." in text


def test_the_membrane_is_told():
    text = plain(electrotonus(source()))
    assert "The membrane was given R_m = 20,000 Ω cm², R_i = 150 Ω cm and C_m = 1 µF/cm²." in text
    assert "spines" not in text
    assert "for steady current followed from" in text
    assert text.endswith("All results hold under the passive model and these assumptions.")


def test_domains_spines_and_a_shunt_are_told():
    general = Membrane(R_m_ohm_cm2=15000, spine_factor=1.2)
    own = {2: Membrane(R_m_ohm_cm2=15000), 3: Membrane(R_m_ohm_cm2=9000, spine_factor=1.9), 7: Membrane()}
    chosen = Assumptions(membrane=general, domains=own, soma_shunt_nS=2.5, hz=(10.0, 1000.0))
    text = plain(electrotonus(source(chosen)))
    assert "C_m = 1 µF/cm² unless stated otherwise." in text
    spines = "1.2 in general, 1 for the axon, 1.9 for basal dendrites and 1 for cable of type 7."
    assert f"R_m/F and C_m·F ⟨Holmes1989 RappYaromSegev1992⟩: {spines}" in text
    assert "Basal dendrites had R_m = 9,000 Ω cm², R_i" in text
    assert "Cable of type 7 had R_m = 20,000 Ω cm²" in text
    assert "The axon had" not in text
    assert "The soma had a leak of 2.5 nS besides." in text
    assert "for steady current and at 10 Hz and 1,000 Hz followed" in text


def test_daughters_of_their_own_radius_are_told():
    assert "daughter" not in electrotonus(source())
    text = electrotonus(source(Assumptions(branch_start="own radius")))
    assert "a cylinder, as did the first piece of a daughter at a branch point." in text


def test_the_time_axis_is_told_where_it_was_asked_for():
    text = electrotonus(source(delays=True, time_constants=2, transient_ms=[0.3, 2.0]))
    for key in ("AgmonSnirSegev1993", "Rall1969", "WeidemanTrefethen2007"):
        assert f"⟨{key}⟩" in text
        assert key not in electrotonus(source())
    assert "(rise 0.3, decay 2 ms)" in text


def test_versions_are_those_of_the_record():
    text = software(source())
    assert "Morphotone 0.9 ⟨Morphotone⟩ on Python 3.12.1, with NumPy 2.1" in text


def test_statistics_of_two_groups():
    text = told()
    assert "Groups were formed by class: small (n = 2) and great (n = 2)." in text
    assert "The 4 cells came from 2 animals and were taken as independent" in text
    assert (
        "The two groups were compared with the two-sided Mann–Whitney test ⟨MannWhitney1947⟩ (exact p)."
        in text
    )
    assert "Holm's method ⟨Holm1979⟩ over one test." in text
    assert "Effect sizes are Cliff's δ" in text
    assert "Kruskal" not in text


def test_statistics_of_three_groups_and_animals_in_several():
    text = told(lines=["a,x,Ada", "b,x,Bob", "c,y,Ada", "d,y,Cy", "e,z,Di"], cells=CELLS)
    assert "x (n = 2), y (n = 2) and z (n = 1)" in text
    assert "although 1 of 4 animals had cells in more than one group" in text
    cells = pd.concat([CELLS, CELLS.iloc[[4]].assign(file="f.swc", R_in_MOhm=7.0)], ignore_index=True)
    text = told(
        lines=[f"{cell},{group}," for cell, group in zip("abcdef", "xxyyzz", strict=True)], cells=cells
    )
    assert (
        "Kruskal–Wallis test ⟨KruskalWallis1952⟩ (exact p) and in pairs with the two-sided Mann–Whitney"
        in text
    )
    assert "over the Kruskal–Wallis test, and over all 3 tests of pairs" in text
    assert "ε² = H/(n − 1)" in text
    assert "animals" not in text


def test_means_of_animals_and_families_of_a_quantity_are_told():
    text = told(lines=["a,x,Ada", "b,x,Bob", "c,y,Cy", "d,y,Di"], mean_over="animal", family="quantity")
    assert "the unit being animals (the mean over the cells that each had in a group): x (n = 2)" in text
    assert "within each quantity" in text
    assert "independent" not in text


def test_one_group_is_told_without_tests_and_many_are_not_named():
    text = told(lines=["a,x,", "b,x,"])
    assert "One group was formed by class: x (n = 2)." in text
    assert "compared" not in text
    cells = pd.concat([CELLS.assign(file=[f"{name}{i}.swc" for name in "abcde"]) for i in range(2)])
    lines = [f"{name}{i},{name}{i}," for name in "abcde" for i in range(2)]
    text = told(lines=lines, cells=cells.reset_index(drop=True))
    assert "Groups were formed by class." in text
    assert "bootstrap" not in text  # of one value each there are no intervals


def test_very_many_groups_are_told_without_pairs():
    cells = pd.concat([CELLS.assign(file=[f"{name}{i}.swc" for name in "abcde"]) for i in range(60)])
    cells = cells.assign(R_in_MOhm=range(300)).reset_index(drop=True)
    text = told(lines=[f"{name}{i},{i}," for name in "abcde" for i in range(60)], cells=cells)
    assert "compared with the Kruskal–Wallis test ⟨KruskalWallis1952⟩ (p by the χ² approximation)." in text
    assert text.endswith("of a noncentral χ² distribution ⟨Andrews1954 Steiger2004⟩.")
    assert "Mann" not in text


def test_every_citation_is_known_and_comes_out_in_both_forms():
    chosen = Assumptions(membrane=Membrane(spine_factor=1.5))
    texts = {"Cells & more": reconstructions(source()), "Cable": electrotonus(source(chosen))}
    assert "Rall1959" in cited(texts.values())
    in_markdown = paragraphs_markdown(texts, ["a *remark*"])
    in_latex = paragraphs_latex(texts, ["a *remark*"])
    assert in_markdown.startswith("**Cells \\& more.** Of 8")
    assert "[@Holmes1989; @RappYaromSegev1992]" in in_markdown
    assert "- a \\*remark\\*\n" in in_markdown
    assert "~\\cite{Holmes1989,RappYaromSegev1992}" in in_latex
    assert "\\paragraph{Cells \\& more.} Of 8" in in_latex
    assert "% - a *remark*\n" in in_latex
    for text in (in_markdown, in_latex):
        assert not set("⟨⟩‹›") & set(text)


def test_words_are_listed_and_names_kept_apart():
    assert listed(["a"]) == "a"
    assert listed(["a", "b"]) == "a and b"
    assert listed(["a", "b", "c"]) == "a, b and c"
    assert named("x\n⟨Rall1959⟩ ‹X›") == "x Rall1959 X"
