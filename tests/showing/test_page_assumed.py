"""What stands on the page about assumptions: all of them, with true ranges and true factors."""

import re
from dataclasses import replace

import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import solve
from morphotone.cable.ranges import RANGES
from morphotone.cable.settings import LAYOUT, MEMBRANE, VETTING
from morphotone.reading.reconstruction import reconstruct
from morphotone.showing.page_assumed import assumed, doubts, limits, with_signs
from tests import trees

OWN = Assumptions(
    membrane=Membrane(R_m_ohm_cm2=9000.0),
    domains={2: Membrane(R_m_ohm_cm2=9000.0, R_i_ohm_cm=70.0), 9: Membrane(C_m_uF_cm2=2.0)},
    shrinkage=(1.0, 1.0, 2.5),
    axon="cut",
    axon_cut_um=60.0,
    hz=(10.0, 100.0),
)


def reconstructed(text):
    return reconstruct(text.encode(), file="cell.swc", cell="cell")


@pytest.mark.parametrize("assumptions", [Assumptions(), OWN])
def test_every_assumption_has_a_row(assumptions):
    rows = assumed(assumptions)
    keys = [(row.where, row.key) for row in rows if not row.where.startswith("membrane.")]
    assert keys == [(setting.table, setting.key) for setting in (*MEMBRANE, *LAYOUT)]
    assert [row.key for row in limits(assumptions)] == [setting.key for setting in VETTING]
    sources = " ".join(text for row in rows for text in row.ranges)
    for name in {*RANGES} - {"soma.R_m_ohm_cm2"}:
        assert with_signs(RANGES[name].source) in sources


def test_values_units_and_what_differs_from_the_default():
    rows = {(row.where, row.key): row for row in assumed(OWN)}
    assert rows["membrane", "R_m_ohm_cm2"].value == "9000"
    assert rows["membrane", "R_m_ohm_cm2"].unit == "Ω cm²"
    assert rows["geometry", "shrinkage"].value == "1, 1, 2.5"
    assert rows["frequencies", "hz"].value == "10, 100"
    assert rows["axon", "cut_um"].value == "60"
    assert rows["axon", "cut_um"].unit == "µm"
    assert rows["orphans", "gap_um"].value == "not set"
    own = {key: row.value for (where, key), row in rows.items() if where == "membrane.axon"}
    assert own == {"R_i_ohm_cm": "70"}
    assert {key for where, key in rows if where == "membrane.type_9"} == {"R_m_ohm_cm2", "C_m_uF_cm2"}
    defaults = {key for key, row in rows.items() if row.is_default}
    assert ("membrane", "R_i_ohm_cm") in defaults
    assert ("membrane", "R_m_ohm_cm2") not in defaults
    assert all(row.is_default for row in assumed(Assumptions()))


def test_the_soma_has_its_own_range():
    row = next(
        row for row in assumed(Assumptions(domains={1: Membrane(R_m_ohm_cm2=500.0)})) if "soma" in row.where
    )
    assert "Clements & Redman 1989" in row.ranges[0]


FIELDS = ("R_m_ohm_cm2", "R_i_ohm_cm", "diameter_factor", "spine_factor")


@pytest.mark.parametrize(("place", "field"), [*enumerate(FIELDS)])
def test_the_factors_are_those_that_the_engine_gives(place, field):
    """λ and X of a cell solved at both ends of the range, over those as assumed."""
    base = Assumptions(membrane=Membrane(R_m_ohm_cm2=12000.0, spine_factor=1.5))
    text = doubts(base, 100.0)[place].span
    shown = re.search(r"λ (\S+) and (\S+) times, X (\S+) and (\S+) times", text)
    assert shown
    rec = reconstructed(trees.cylinder())
    for end, low_high in enumerate((RANGES[field].low, RANGES[field].high)):
        if field == "diameter_factor":
            other = replace(base, diameter_factor=low_high)
        else:
            other = replace(base, membrane=replace(base.membrane, **{field: low_high}))
        X, X_base = (float(solve(rec, one).X[-1, 0]) for one in (other, base))
        assert float(shown[1 + end]) == pytest.approx(X_base / X, rel=0.05)
        assert float(shown[3 + end]) == pytest.approx(X / X_base, rel=0.05)


def test_a_leak_at_the_soma_is_what_the_engine_gives():
    rec = reconstructed(trees.ball_and_stick())
    R_in = float(solve(rec, Assumptions()).R_in_MOhm[0, 0])
    text = doubts(Assumptions(), R_in)[-1].span
    leaky = float(solve(rec, Assumptions(soma_shunt_nS=18.4)).R_in_MOhm[0, 0])
    assert float(re.search(r"make (\S+) MΩ", text)[1]) == pytest.approx(leaky, rel=5e-3)
    assert doubts(Assumptions(), float("nan"))[-1].span == ""
    assert doubts(Assumptions(soma_shunt_nS=5.0), R_in)[-1].span == ""


def test_every_doubt_has_a_law_and_a_source():
    for doubt in doubts(Assumptions(), 100.0):
        assert doubt.law
        assert re.search(r"\d{4}|from memory|law", doubt.source)


@pytest.mark.parametrize(
    ("plain", "signs"),
    [
        ("20 ohm cm2, 3 ohm cm.", "20 Ω cm², 3 Ω cm."),
        ("unit_um in um; 1 um2", "unit_um in µm; 1 µm²"),
        ("R_m_ohm_cm2 sum column", "R_m_ohm_cm2 sum column"),
        ("1 uF/cm2", "1 µF/cm²"),
    ],
)
def test_signs_of_units(plain, signs):
    assert with_signs(plain) == signs
