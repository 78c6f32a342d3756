"""Columns as a journal titles them."""

import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.questions.survey import Request, headers
from morphotone.questions.time_axis import TimeRequest
from morphotone.questions.units import REPORTED
from morphotone.showing.markup import latex
from morphotone.showing.titles import meaning, plain, title

ALL = Request(Assumptions(hz=(2.5, 100.0)), time=TimeRequest(True, 2, SynapticCurrent(0.5, 3.0)))


@pytest.mark.parametrize(
    ("column", "words", "in_latex"),
    [
        ("R_in_MOhm", "R_in (MΩ)", r"$R_{\mathrm{in}}$ (M$\Omega$)"),
        ("lambda_um", "λ (µm)", r"$\lambda$ (\textmu{}m)"),
        ("X_tips_mean", "X of the tips, mean", "$X$ of the tips, mean"),
        ("area_um2", "Membrane area (µm²)", r"Membrane area (\textmu{}m$^2$)"),
        ("lambda_basal_least_um", "λ, basal, least (µm)", r"$\lambda$, basal, least (\textmu{}m)"),
        (
            "R_in_MOhm_2.5Hz",
            "|Z_in|, 2.5 Hz (MΩ)",
            r"\textbar{}$Z_{\mathrm{in}}$\textbar{}, 2.5 Hz (M$\Omega$)",
        ),
        ("tau0_ms", "τ_0 (ms)", r"$\tau_{0}$ (ms)"),
        ("G_inf_stems_nS", "G_∞ of the stems (nS)", r"$G_{\infty}$ of the stems (nS)"),
        ("C_m_uF_cm2", "C_m (µF/cm²)", r"$C_{\mathrm{m}}$ (\textmu{}F/cm$^2$)"),
        (
            "peak_soma_from_farthest_mV_per_pA",
            "Peak at the soma, current at the farthest tip (mV/pA)",
            "Peak at the soma, current at the farthest tip (mV/pA)",
        ),
        ("my_own_column", "My own column", "My own column"),
    ],
)
def test_titles(column, words, in_latex):
    assert plain(title(column)) == words
    assert latex(title(column)) == in_latex


@pytest.mark.parametrize("column", headers(ALL)["cells"])
def test_no_title_of_a_survey_shows_a_column_name_or_lacks_its_unit(column):
    words = plain(title(column))
    assert "  " not in words
    assert not any(f"{end}" in words.split() for end in ("um", "um2", "MOhm", "nS", "mV_per_pA", "ms"))
    units = ("um", "um2", "MOhm", "nS", "pF", "ms", "cm", "cm2", "pA", "pC")
    name = column.removesuffix("_100Hz").removesuffix("_2.5Hz")
    assert words.endswith(")") == name.endswith(tuple(f"_{unit}" for unit in units))


def test_titles_of_a_survey_are_distinct():
    columns = headers(ALL)["cells"]
    by_title = {}
    for column in columns:
        by_title.setdefault(title(column), []).append(column)
    assert [columns for columns in by_title.values() if len(columns) > 1] == []


def test_what_is_reported_unless_asked_otherwise_is_ten_columns_of_the_survey():
    assert len(REPORTED) == 10
    assert set(REPORTED) <= set(headers(ALL)["cells"])


def test_meanings_follow_the_quantity_to_its_frequency():
    assert meaning("attenuation_to_soma_farthest_100Hz") == meaning("attenuation_to_soma_farthest") != ""
    assert meaning("R_in_MOhm_100Hz") == "|‹Z_in›|: magnitude of the input impedance at the soma"
    assert meaning("stems") == ""
