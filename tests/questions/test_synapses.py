"""The table of sites: against closed forms by hand and the table by sample."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.errors import AssumptionError
from morphotone.questions.site_answers import FileOfCell, SiteRequest, headers, site_answers
from morphotone.questions.survey import Request, answers
from morphotone.questions.time_axis import TimeRequest
from morphotone.reading.sites import parse_sites
from tests import trees

HZ = (10.0, 100.0)
STICK_UM, D_UM, SOMA_UM = 600.0, 2.0, 10.0


def answer_of(swc, rows, header="cell,site,sample,fraction", **asked):
    file = parse_sites("\n".join([header, *rows]).encode(), "sites.csv")
    request = SiteRequest(Assumptions(hz=HZ), **asked)
    (answer,) = site_answers([FileOfCell("c.swc", swc.encode(), file.sites)], request)
    return answer


def table_of(swc, rows, header="cell,site,sample,fraction", **asked):
    return answer_of(swc, rows, header, **asked).tables["ranking"]


def test_two_sites_on_a_ball_and_stick_by_hand():
    """Rall 1959: a sealed stick of L on a sphere; G_stick = G_inf·tanh L, V falls as cosh(L − X)/cosh L."""
    table = table_of(trees.ball_and_stick(SOMA_UM, STICK_UM, D_UM), ["c,near,3,0.25", "c,tip,5,"])
    R_m, R_i = 20_000.0, 150.0
    lam = np.sqrt(R_m / R_i * D_UM / 4 * 1e4)
    L = STICK_UM / lam
    path = table["path_um"]
    np.testing.assert_allclose(path[1], STICK_UM, rtol=1e-12)
    X = path / lam
    G_inf = np.pi / 2 * (D_UM * 1e-4) ** 1.5 / np.sqrt(R_m * R_i) * 1e6  # uS
    G_soma = 4 * np.pi * (SOMA_UM * 1e-4) ** 2 / R_m * 1e6
    rho = G_soma / G_inf
    away = np.cosh(L - X)
    toward_soma = np.cosh(X) + rho * np.sinh(X)  # V_site/V_soma for current at the site
    R_soma = 1 / (G_soma + G_inf * np.tanh(L))
    np.testing.assert_allclose(table["X"], X, rtol=1e-12)
    np.testing.assert_allclose(table["L_to_tip"], L - X, rtol=1e-12, atol=1e-15)
    np.testing.assert_allclose(table["lambda_um"], lam, rtol=1e-12)
    np.testing.assert_allclose(table["attenuation_to_soma"], toward_soma, rtol=1e-12)
    np.testing.assert_allclose(table["attenuation_from_soma"], np.cosh(L) / away, rtol=1e-12)
    np.testing.assert_allclose(table["charge_to_soma"], away / np.cosh(L), rtol=1e-12)
    np.testing.assert_allclose(table["R_transfer_MOhm"], R_soma * away / np.cosh(L), rtol=1e-12)
    np.testing.assert_allclose(table["R_in_MOhm"], R_soma * away / np.cosh(L) * toward_soma, rtol=1e-12)
    assert table["domain"] == ["basal", "basal"]
    np.testing.assert_allclose(table["diameter_um"], D_UM, rtol=1e-12)
    np.testing.assert_allclose(table["straight_um"], path + SOMA_UM, rtol=1e-12)


def test_a_site_at_a_sample_has_the_numbers_of_the_table_by_sample():
    swc = trees.irregular(60, 3, soma=True)
    request = Request(Assumptions(hz=HZ), samples=True, keep_unfit=True, time=TimeRequest(delays=True))
    (answer,) = answers([("c.swc", swc.encode())], request)
    by_sample = answer.by_sample
    rows = [f"c,s{number},{number}," for number in by_sample["sample"]]
    table = table_of(swc, rows, keep_unfit=True)
    shared = set(by_sample) & set(table) - {"domain"}
    assert len(shared) == 7 + 4 * 3 + 1 + 4
    in_soma = by_sample["branch"] == 0
    for name in shared - {"diameter_um"}:
        np.testing.assert_allclose(
            np.asarray(table[name], float), np.asarray(by_sample[name], float), rtol=1e-12, atol=1e-12
        )
    assert np.isnan(table["diameter_um"][in_soma]).all()  # the soma is a lump
    np.testing.assert_allclose(table["diameter_um"][~in_soma], by_sample["diameter_um"][~in_soma])
    assert list(table["domain"]) == list(by_sample["domain"])


def test_places_given_in_three_ways_are_one():
    header = "cell,site,sample,fraction,x_um,y_um,z_um,branch,along_um"
    # the stick starts at the soma's surface, 10 um from the centre; sample 4 ends its second third
    rows = ["c,a,4,0.5,,,,,", "c,b,,,310,1,0,,", "c,d,,,,,,1,300"]
    table = table_of(trees.ball_and_stick(), rows, header)
    for name in ("path_um", "X", "R_in_MOhm", "attenuation_to_soma", "delay_total_ms"):
        np.testing.assert_allclose(table[name], table[name][0], rtol=1e-9, err_msg=name)
    np.testing.assert_allclose(table["path_um"], 300.0, rtol=1e-9)


def test_a_site_in_the_soma_and_one_without_soma():
    table = table_of(trees.ball_and_stick(), ["c,s,1,"])
    assert table["path_um"][0] == table["X"][0] == table["branch"][0] == table["order"][0] == 0
    assert table["attenuation_to_soma"][0] == table["charge_to_soma"][0] == 1.0
    assert np.isnan(table["diameter_um"][0])
    assert table["L_to_tip"][0] == pytest.approx(table_of(trees.ball_and_stick(), ["c,s,5,"])["X"][0])
    root = table_of(trees.cylinder(diameter=4.0), ["c,s,1,"])
    assert root["diameter_um"][0] == 4.0
    assert np.isfinite(root["lambda_um"][0])


def test_l_to_the_farthest_tip_beyond():
    """On a fork the farther of the two tips counts, from the stem as from either branch its own."""
    swc = "1 1 0 0 0 5 -1\n2 3 100 0 0 1 1\n3 3 150 0 0 1 2\n4 3 100 200 0 1 2\n"
    table = table_of(swc, ["c,stem,2,0.5", "c,short,3,", "c,long,4,0.5"])
    lam = table["lambda_um"][0]
    np.testing.assert_allclose(table["L_to_tip"] * lam, [47.5 + 200, 0, 100], rtol=1e-12, atol=1e-9)


def test_steady_and_brief_by_hand():
    """One conductance alone: V = E·gR/(1 + gR) at the site, times R_transfer/R_in at the soma."""
    header = "cell,site,sample,g_peak_nS,driving_force_mV,rise_ms,decay_ms"
    rows = ["c,a,4,2.0,70,0.5,3", "c,b,5,1.0,-8,,", "c,n,5,,,,"]
    table = table_of(trees.ball_and_stick(), rows, header, synapses=True, brief=True)
    R_in, R_soma = table["R_in_MOhm"][:2], table["R_transfer_MOhm"][:2]
    gR = np.array([2.0, 1.0]) * 1e-3 * R_in
    at_site = np.array([70.0, -8.0]) * gR / (1 + gR)
    np.testing.assert_allclose(table["steady_site_mV"], [*at_site, np.nan], rtol=1e-12)
    np.testing.assert_allclose(table["steady_soma_mV"], [*(at_site * R_soma / R_in), np.nan], rtol=1e-12)
    assert 0 < table["peak_soma_mV"][0] < table["peak_site_mV"][0] < table["steady_site_mV"][0]
    assert table["peak_site_error_mV"][0] < 1e-3 * table["peak_site_mV"][0]
    for name in ("peak_site_mV", "peak_soma_mV", "half_width_soma_ms", "half_width_soma_error_ms"):
        assert np.isnan(table[name]).tolist() == [False, True, True]


def test_groups_together_and_vetoes():
    header = "cell,site,sample,fraction,g_peak_nS,driving_force_mV,group"
    rows = ["c,i,3,,2,-8,warden", "c,a,4,,1,70,ferry", "c,b,5,,1,70,ferry", "c,n,5,,,,ferry"]
    tables = answer_of(trees.ball_and_stick(), rows, header, together=True).tables
    together = tables["together"]
    assert together["active"].tolist() == ["ferry"] * 2 + ["warden"] + ["all"] * 3
    assert together["synapses"].tolist() == [2, 2, 1, 3, 3, 3]
    assert together["soma_ratio"][0] < 1
    assert together["soma_ratio"][2] == pytest.approx(1.0)
    assert (together["current_lost"][:2] > 0).all()
    veto = tables["veto"]
    assert veto["site_inhibitory"].tolist() == ["i", "i"]
    assert veto["site_excitatory"].tolist() == ["a", "b"]
    assert veto["on_path"].tolist() == [True, True]
    assert "together" not in answer_of(trees.ball_and_stick(), ["c,n,5,"], together=True).tables


def test_the_clamps_view_by_hand():
    """Two divisions: the clamp's node sees Z_ie/(Z_ee + R_s); perfect at the soma, it sees charge_to_soma."""
    header = "cell,site,sample,fraction,g_peak_nS,driving_force_mV,rise_ms,decay_ms"
    rows = ["c,o,1,,1,70,1,1", "c,p,4,0.3,2,70,0.5,3", "c,n,5,,,,,"]
    asked = {"synapses": True, "brief": True}
    swc = trees.ball_and_stick()
    tables = answer_of(swc, rows, header, clamp_MOhm=0.0, **asked).tables
    perfect, ranking = tables["clamp"], tables["ranking"]
    for suffix in ("", "_10Hz", "_100Hz"):
        np.testing.assert_allclose(
            perfect[f"seen_fraction{suffix}"], ranking[f"charge_to_soma{suffix}"], rtol=1e-10
        )
    assert perfect["escape_MOhm"][0] == 0.0
    poor = answer_of(swc, rows, header, clamp_MOhm=20.0, **asked).tables["clamp"]
    R_s, R_soma = 20.0, ranking["R_in_MOhm"][0]
    seen = ranking["R_transfer_MOhm"] / (R_soma + R_s)
    escape = ranking["R_in_MOhm"] - ranking["R_transfer_MOhm"] ** 2 / (R_soma + R_s)
    np.testing.assert_allclose(poor["seen_fraction"], seen, rtol=1e-10)
    np.testing.assert_allclose(poor["escape_MOhm"], escape, rtol=1e-10)
    gR = np.array([1.0, 2.0]) * 1e-3 * escape[:2]
    np.testing.assert_allclose(poor["steady_seen_fraction"][:2], seen[:2] / (1 + gR), rtol=1e-10)
    np.testing.assert_allclose(poor["steady_escape_mV"][:2], 70 * gR / (1 + gR), rtol=1e-10)
    assert (poor["peak_seen_fraction"][:2] < poor["seen_fraction"][:2]).all()
    for name in ("steady_seen_pA", "peak_seen_fraction", "peak_escape_mV"):
        assert np.isnan(poor[name]).tolist() == [False, False, True]


def test_pairs_are_the_tables_own_numbers_between_a_site_and_the_soma():
    answer = answer_of(
        trees.irregular(40, 2, soma=True), ["c,o,1,", "c,p,20,0.3", "c,q,35,"], pairs=True, keep_unfit=True
    )
    table, matrices = answer.tables["ranking"], answer.pairs.matrices
    for suffix in ("", "_10Hz", "_100Hz"):
        R = matrices[f"R_transfer_MOhm{suffix}"]
        np.testing.assert_array_equal(R, R.T)
        np.testing.assert_allclose(np.diagonal(R), table[f"R_in_MOhm{suffix}"], rtol=1e-12)
        np.testing.assert_allclose(R[0], table[f"R_transfer_MOhm{suffix}"], rtol=1e-12)
        attenuation = matrices[f"attenuation{suffix}"]
        np.testing.assert_allclose(attenuation[:, 0], table[f"attenuation_to_soma{suffix}"], rtol=1e-12)
        np.testing.assert_allclose(attenuation[0], table[f"attenuation_from_soma{suffix}"], rtol=1e-12)
    np.testing.assert_allclose(matrices["delay_total_ms"][0], table["delay_total_ms"], rtol=1e-9)
    rows = answer.pairs.table()
    assert rows["site"].tolist() == ["o"] * 3 + ["p"] * 3 + ["q"] * 3
    assert rows["other_site"].tolist() == ["o", "p", "q"] * 3
    assert rows["attenuation"][2] == matrices["attenuation"][0, 2]


def test_a_file_that_cannot_be_used_turns_its_sites_away():
    for swc, reason in (
        ("1 1 0 0 0 x -1\n", "not_a_number"),
        (trees.scaled(trees.irregular(60, 4, soma=True), 1e3, 1e3), "unfit"),
    ):
        answer = answer_of(swc, ["c,a,1,", "c,b,2,"])
        assert answer.tables == {}
        assert [(one.site, one.reason) for one in answer.turned_away] == [("a", reason), ("b", reason)]
        assert answer.turned_away[0].sentence.startswith("sites.csv: line 2: c.swc: ")


def test_a_cell_gives_the_same_alone_and_in_company():
    swcs = [trees.irregular(50, key, soma=True) for key in (1, 2, 3)]
    file = parse_sites(b"cell,site,sample,fraction\nc,a,9,0.5\nc,b,30,\n", "s.csv")
    request = SiteRequest(Assumptions(hz=HZ), keep_unfit=True)
    files = [FileOfCell(f"{n}.swc", swc.encode(), file.sites) for n, swc in enumerate(swcs)]
    for alone, answer in zip(files, site_answers(files, request), strict=True):
        (own,) = site_answers([alone], request)
        for name, values in own.tables["ranking"].items():
            np.testing.assert_array_equal(values, answer.tables["ranking"][name])


def test_further_columns_are_carried_and_never_hide_one_of_ours():
    header = "cell,site,sample,colour,X,file,rank_in_cell,file_as_given"
    table = table_of(trees.ball_and_stick(), ["c,a,4,pale,deep,mine,best,theirs"], header)
    assert table["colour"].tolist() == ["pale"]
    assert table["X_as_given"].tolist() == ["deep"]
    assert table["X"][0] > 0
    assert "file" not in table
    assert "rank_in_cell" not in table
    assert table["rank_in_cell_as_given"].tolist() == ["best"]
    assert table["file_as_given"].tolist() == ["theirs"]
    assert table["file_as_given_as_given"].tolist() == ["mine"]


def test_headers_are_those_of_the_tables():
    request = SiteRequest(Assumptions(hz=HZ), synapses=True, brief=True, together=True)
    header = headers(request, ["colour"])
    assert set(header) == {"ranking", "together", "veto"}
    rows = ["c,a,4,1,70,1,2,pale"]
    table = table_of(
        trees.ball_and_stick(), rows, "cell,site,sample,g_peak_nS,driving_force_mV,rise_ms,decay_ms,colour",
        synapses=True, brief=True,
    )  # fmt: skip
    assert header["ranking"] == list(table)


@pytest.mark.parametrize(
    ("asked", "sentence"),
    [
        (
            {"farthest_um": -1.0},
            "greatest distance from the cable -1.0 µm, expected a number of 0 µm or more",
        ),
        ({"farthest_um": float("nan")}, "greatest distance from the cable nan"),
        ({"clamp_MOhm": -2.0}, "series resistance -2.0 MΩ, expected a number of 0 MΩ or more"),
    ],
)
def test_requests_without_sense_are_refused(asked, sentence):
    with pytest.raises(AssumptionError, match=sentence):
        SiteRequest(Assumptions(), **asked)


def test_a_clamp_at_a_site_is_perfect_there_and_sees_the_soma_by_reciprocity():
    header, rows = "cell,site,sample,fraction", ["c,o,1,", "c,p,4,0.3", "c,q,5,"]
    swc = trees.ball_and_stick()
    at_site = answer_of(swc, rows, header, clamp_MOhm=5.0, clamp_at="p").tables["clamp"]
    answer = answer_of(swc, rows, header, pairs=True)
    R = answer.pairs.matrices["R_transfer_MOhm"]
    assert at_site["electrode"] == ["p"] * 3
    np.testing.assert_allclose(at_site["seen_fraction"], R[:, 1] / (R[1, 1] + 5.0), rtol=1e-10)
    elsewhere = answer_of(swc, rows, header, clamp_MOhm=5.0, clamp_at="nobody").tables["clamp"]
    assert elsewhere["electrode"] == ["soma"] * 3
    np.testing.assert_allclose(elsewhere["seen_fraction"], R[:, 0] / (R[0, 0] + 5.0), rtol=1e-10)
