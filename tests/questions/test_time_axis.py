"""What the time axis adds to the tables: every column against closed forms and against the engine itself."""

from math import cosh, e, pi, tan, tanh

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.special import lambertw

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.delays import delays
from morphotone.cable.modes import time_constants
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import transients
from morphotone.cable.tree import build
from morphotone.errors import AssumptionError
from morphotone.questions import time_axis
from morphotone.questions.survey import Request, answers, headers
from morphotone.questions.time_axis import TimeRequest
from morphotone.reading.reconstruction import reconstruct
from tests import trees
from tests.outside.cells import R_infinity, cable_of_L, lambda_um
from tests.questions.test_answers import FILES, same

TAU_MS = 20.0  # R_m·C_m of the defaults
CURRENT = SynapticCurrent(0.3, 4.0)
ALL = TimeRequest(True, 3, CURRENT)
SHAPE = (
    *("peak{}_mV_per_pA", "peak{}_mV_per_pC", "time_to_peak{}_ms", "rise{}_ms", "half_width{}_ms"),
    *("area{}_mV_ms_per_pA", "error{}"),
)
WAYS = ("_soma_from_soma", "_soma_from_farthest", "_farthest_from_farthest")
DELAYS = (
    *("delay_total_farthest_ms", "delay_total_mean_ms", "delay_total_greatest_ms"),
    *("delay_local_soma_ms", "C_in_pF"),
)
DELAYS_BY_SAMPLE = ("delay_total_ms", "delay_local_ms", "delay_propagation_ms", "delay_net_ms")
PEELING = ("L_by_peeling", "peeling_conditions_broken", "peeling_warnings")
INSIDE = "1 1 0 0 0 5 -1\n2 3 3 0 0 1 1\n"  # a dendrite within the soma: one potential everywhere
ORPHAN = "90 3 900 0 0 1 -1\n91 3 960 0 0 1 90\n"
DOMAINS = {1: Membrane(4000.0), 2: Membrane(9000.0, 70.0, 1.3), 4: Membrane(12000.0, 80.0, 0.7, 1.9)}
ASSUMPTIONS = {
    "defaults": Assumptions(),
    "shunt": Assumptions(soma_shunt_nS=2.0),
    "domains, axon left out": Assumptions(domains=DOMAINS, axon="left out"),
}


TAU_AMPLITUDE = "tau{}_amplitude_MOhm_per_ms"


def modes_columns(count):
    return [name.format(k) for k in range(count) for name in ("tau{}_ms", "tau{}_modes", TAU_AMPLITUDE)]


def shape_columns(*where):
    return [name.format(each) for each in where for name in SHAPE]


def answered(swc, time=ALL, assumptions=ASSUMPTIONS["defaults"], samples=True):
    """Ask for one cell, whatever its grade."""
    request = Request(assumptions, keep_unfit=True, samples=samples, time=time)
    (answer,) = answers([("cell.swc", swc.encode())], request)
    return answer


def engine(swc, assumptions):
    """Return the cell's cable and what the engine says of it, asked directly."""
    cable = build(reconstruct(swc.encode(), file="cell.swc", cell="cell"), assumptions)
    (lags,) = delays([cable], assumptions)
    (modes,) = time_constants([cable], assumptions, 3)
    (brief,) = transients([cable], assumptions, CURRENT)
    return cable, lags, modes, brief


def shape(responses, where):
    """Return what a transient looks like at each site, named as its columns are."""
    values = (
        *(responses.peak_mV_per_pA, responses.peak_mV_per_pC, responses.time_to_peak_ms, responses.rise_ms),
        *(responses.half_width_ms, responses.area_mV_ms_per_pA, responses.error),
    )
    return dict(zip(shape_columns(where), values, strict=True))


def assert_equal(got, expected):
    """Compare column by column to the rounding of sums in another order; NaN is like NaN."""
    assert list(got) == list(expected)
    for name, values in expected.items():
        np.testing.assert_allclose(got[name], values, rtol=1e-9, atol=1e-15, err_msg=name)


def added(table, columns):
    return {name: table[name] for name in columns}


# ---------------------------------------------------------------- which columns there are


@pytest.mark.parametrize(
    ("time", "of_cell", "by_sample"),
    [
        (TimeRequest(delays=True), [*DELAYS], [*DELAYS_BY_SAMPLE]),
        (TimeRequest(time_constants=2), [*modes_columns(2), *PEELING], []),
        (TimeRequest(current=CURRENT), shape_columns(*WAYS), shape_columns("_site", "_soma")),
        (
            ALL,
            [*DELAYS, *modes_columns(3), *PEELING, *shape_columns(*WAYS)],
            [*DELAYS_BY_SAMPLE, *shape_columns("_site", "_soma")],
        ),
    ],
    ids=["delays", "time constants", "transients", "all"],
)
def test_columns_come_where_they_are_asked_for_and_change_no_other(time, of_cell, by_sample):
    swc = trees.with_axon()
    plain, asked = (answered(swc, request) for request in (TimeRequest(), time))
    for table, new in (("cell", of_cell), ("by_sample", by_sample)):
        before, after = getattr(plain, table), getattr(asked, table)
        assert [name for name in after if name not in before] == new
        assert [name for name in after if name in before] == list(before)
        for name, values in before.items():
            np.testing.assert_array_equal(after[name], values)
    assert list(asked.branches) == list(plain.branches)


def test_nothing_is_computed_that_is_not_asked_for(monkeypatch):
    for name in ("delays_in", "time_constants", "transients"):
        monkeypatch.setattr(time_axis, name, None)
    assert answered(trees.comb(), TimeRequest()).cell


@pytest.mark.parametrize("samples", [True, False])
def test_headers_are_those_of_every_cell(samples):
    request = Request(Assumptions(), keep_unfit=True, samples=samples, time=TimeRequest(True, 20, CURRENT))
    expected = headers(request)
    assert expected["cells"][-10:] == list(answered(INSIDE, TimeRequest()).cell)[-10:]  # what was assumed
    given = [each for each in answers(list(FILES.items()), request) if each.cell]
    assert len(given) == 7
    for each in given:
        assert list(each.cell) == expected["cells"]
        assert (each.by_sample is None) == (not samples)
        assert list(each.by_sample or ()) == expected.get("samples", [])


# ---------------------------------------------------------------- against the engine


@pytest.mark.parametrize("assumed", ASSUMPTIONS)
@pytest.mark.parametrize(
    "family", ["ball and stick", "comb", "with axon", "zero-length joints", "soma chain"]
)
def test_the_row_of_a_cell_says_what_the_engine_says(family, assumed):
    swc = trees.FAMILIES[family][0]()
    row = answered(swc, assumptions=ASSUMPTIONS[assumed], samples=False).cell
    cable, lags, modes, brief = engine(swc, ASSUMPTIONS[assumed])
    numbers = [r.number for r in trees.rows_of(swc)]
    tip = cable.node[numbers.index(row["farthest_tip_sample"])]
    assert_equal(
        added(row, DELAYS),
        {
            "delay_total_farthest_ms": lags.total_ms[tip],
            "delay_total_mean_ms": lags.membrane_mean_ms(),
            "delay_total_greatest_ms": lags.total_ms.max(),
            "delay_local_soma_ms": lags.local_ms[0],
            "C_in_pF": 1e3 * lags.local_ms[0] / lags.R_in_MOhm[0],  # ms/MΩ is nF
        },
    )
    values = zip(modes.tau_ms, modes.multiplicity, modes.amplitude_soma, strict=True)
    expected = dict(zip(modes_columns(3), [x for each in values for x in each], strict=True))
    assert_equal(added(row, modes_columns(3)), expected)
    assert row["L_by_peeling"] == pytest.approx(modes.peeled.L, rel=1e-9)
    assert row["peeling_conditions_broken"] == len(modes.peeled.warnings)
    assert row["peeling_warnings"] == " | ".join(modes.peeled.warnings)
    seen = ((brief.at_soma, 0), (brief.at_soma, tip), (brief.at_site, tip))
    for way, (responses, node) in zip(WAYS, seen, strict=True):
        expected = {name: values[node] for name, values in shape(responses, way).items()}
        assert_equal(added(row, shape_columns(way)), expected)


@pytest.mark.parametrize("assumed", ASSUMPTIONS)
def test_rows_of_samples_say_what_the_engine_says_in_file_order(assumed):
    swc = trees.with_axon()
    order = np.random.default_rng(5).permutation(len(trees.rows_of(swc))).tolist()
    table = answered(trees.reordered(swc, order), assumptions=ASSUMPTIONS[assumed]).by_sample
    cable, lags, _, brief = engine(swc, ASSUMPTIONS[assumed])
    numbers = [r.number for r in trees.rows_of(swc)]
    assert table["sample"].tolist() == [numbers[k] for k in order]
    node = cable.node[order]
    expected = dict(
        zip(DELAYS_BY_SAMPLE, (lags.total_ms, lags.local_ms, lags.propagation_ms, lags.net_ms), strict=True)
    )
    expected |= shape(brief.at_site, "_site") | shape(brief.at_soma, "_soma")
    # Samples that are not analysed have node −1: empty.
    expected = {name: np.where(node < 0, np.nan, values[node]) for name, values in expected.items()}
    assert (node < 0).any() == (ASSUMPTIONS[assumed].axon == "left out")
    assert_equal(added(table, expected), expected)


def test_farthest_tip_is_the_dendritic_one_that_the_row_names():
    answer = answered(trees.with_axon())
    table = answer.by_sample
    at = table["sample"].tolist().index(answer.cell["farthest_tip_sample"])
    assert (answer.cell["farthest_tip_sample"], table["path_um"].argmax() + 1) == (6, 9)  # 9: the axon's
    assert answer.cell["delay_total_farthest_ms"] == table["delay_total_ms"][at]
    assert (
        answer.cell["delay_total_greatest_ms"] == table["delay_total_ms"].max() == table["delay_total_ms"][8]
    )
    for name in SHAPE:
        for way, seen in (("_soma_from_farthest", "_soma"), ("_farthest_from_farthest", "_site")):
            got, expected = answer.cell[name.format(way)], table[name.format(seen)][at]
            assert got == pytest.approx(expected, rel=1e-12)


def test_responses_are_the_same_with_and_without_tables_by_sample():
    asked, other = (answered(trees.comb(), samples=samples).cell for samples in (True, False))
    assert_equal(added(asked, shape_columns(*WAYS)), added(other, shape_columns(*WAYS)))


# ---------------------------------------------------------------- closed forms


def test_delays_of_a_sealed_cylinder():
    """Derivatives of Z(X) = R∞/q·cosh(q(L − X))/sinh(qL), q² = 1 + sτ, at s = 0, by hand."""
    L, pieces, d = 1.6, 8, 4.0
    swc = cable_of_L(L, 2e4, 150.0, d, [L * k / pieces for k in range(1, pieces)])
    answer = answered(swc, TimeRequest(delays=True))
    X = L * np.arange(pieces + 1) / pieces
    far = L - X
    total = 0.5 * TAU_MS * (1 + L / tanh(L) - far * np.tanh(far))
    local = total - 0.5 * TAU_MS * X * np.tanh(X)
    expected = (total, local, 0.5 * TAU_MS * X * np.tanh(X), total - local[0])
    for name, values in zip(DELAYS_BY_SAMPLE, expected, strict=True):
        np.testing.assert_allclose(answer.by_sample[name], values, rtol=1e-12, atol=1e-13, err_msg=name)
    weights = np.full(pieces + 1, 1.0)  # every piece's membrane goes half to each of its ends
    weights[[0, -1]] = 0.5
    R_in = R_infinity(2e4, 150.0, d) / tanh(L)
    of_cell = (total[-1], np.average(total, weights=weights), total[-1], local[0], 1e3 * local[0] / R_in)
    for name, value in zip(DELAYS, of_cell, strict=True):
        assert answer.cell[name] == pytest.approx(value, rel=1e-12), name


def ball_and_stick():
    """Return G of the sphere and G∞ of the stick, µS, and its L: 10 µm radius, 600 µm long, 2 µm thick."""
    return 4 * pi * 10.0**2 / 2e4 * 1e-2, 1 / R_infinity(2e4, 150.0, 2.0), 600.0 / lambda_um(2e4, 150.0, 2.0)


def test_delays_of_ball_and_stick():
    """Rall 1959: Y = G_s·q² + G∞·q·tanh(qL); its derivative by hand."""
    G_s, G_inf, L = ball_and_stick()
    row = answered(trees.ball_and_stick(10.0, 600.0, 2.0), TimeRequest(delays=True)).cell
    G_in = G_s + G_inf * tanh(L)
    local = 0.5 * TAU_MS * (2 * G_s + G_inf * (tanh(L) + L / cosh(L) ** 2)) / G_in
    total = local + 0.5 * TAU_MS * L * tanh(L)
    assert row["delay_local_soma_ms"] == pytest.approx(local, rel=1e-12)
    assert row["delay_total_farthest_ms"] == pytest.approx(total, rel=1e-12)
    assert row["C_in_pF"] == pytest.approx(1e3 * local * G_in, rel=1e-12)


def test_time_constants_of_ball_and_stick():
    """Poles of 1/Y at q = iα: tan(αL) = −α·G_s/G∞ (Rall 1969); amplitudes 1/(dY/ds) there."""
    G_s, G_inf, L = ball_and_stick()
    row = answered(trees.ball_and_stick(10.0, 600.0, 2.0), TimeRequest(time_constants=4)).cell
    for k in range(4):
        low, high = (k - 0.5) * pi / L, k * pi / L
        alpha = brentq(lambda a: G_s * a + G_inf * tan(a * L), low * (1 + 1e-9), high, xtol=1e-14) if k else 0
        cos2 = np.cos(alpha * L) ** 2
        slope = 0.5 * TAU_MS * (2 * G_s + G_inf * (tan(alpha * L) / alpha if k else L) + G_inf * L / cos2)
        assert row[f"tau{k}_ms"] == pytest.approx(TAU_MS / (1 + alpha**2), rel=1e-9)
        assert row[f"tau{k}_modes"] == 1
        assert row[f"tau{k}_amplitude_MOhm_per_ms"] == pytest.approx(1 / slope, rel=1e-7)
    assert row["L_by_peeling"] == pytest.approx(pi / np.sqrt(row["tau0_ms"] / row["tau1_ms"] - 1))


def test_equal_trees_share_their_time_constants():
    """Six equal trees (Rall 1969): five odd modes that leave the soma at rest, then one even."""
    row = answered(trees.rall_neuron(6, 1, 1.0), TimeRequest(time_constants=3)).cell
    assert [row[f"tau{k}_modes"] for k in range(3)][:2] == [1, 5]
    assert abs(row["tau1_amplitude_MOhm_per_ms"]) < 1e-6 * row["tau0_amplitude_MOhm_per_ms"]
    assert "τ1 belongs to charge that moves between trees" in row["peeling_warnings"]


def test_one_potential_everywhere_in_closed_form():
    """A sphere: V = (t/τ)²/2·e^{−t/τ}/C for a charge of 1 in an alpha current whose time is τ; peak at 2τ."""
    time = TimeRequest(True, 3, SynapticCurrent(TAU_MS, TAU_MS))
    answer = answered(INSIDE, time)
    row, table = answer.cell, answer.by_sample
    C_pF = 4 * pi * 5.0**2 * 0.01  # 1 µF/cm2 is 0.01 pF/µm2
    R_MOhm = TAU_MS / C_pF * 1e3
    delays_of_row = (TAU_MS, TAU_MS, TAU_MS, TAU_MS, C_pF)
    for name, value in zip(DELAYS, delays_of_row, strict=True):
        assert row[name] == pytest.approx(value, rel=1e-12), name
    assert (row["tau0_ms"], row["tau0_modes"]) == (TAU_MS, 1)
    assert row["tau0_amplitude_MOhm_per_ms"] == pytest.approx(1e3 / C_pF, rel=1e-9)
    rising = {share: -2 * TAU_MS * lambertw(-np.sqrt(share) / e).real for share in (0.1, 0.5, 0.9)}
    falling = -2 * TAU_MS * lambertw(-np.sqrt(0.5) / e, -1).real
    charge = e * TAU_MS  # pA·ms, of a current with a peak of 1 pA
    peak = 1e3 / C_pF * 2 * e**-2
    values = (
        *(peak * charge * 1e-3, peak, 2 * TAU_MS, rising[0.9] - rising[0.1], falling - rising[0.5]),
        R_MOhm * charge * 1e-3,
    )
    columns = [(row[name.format(way)], name, way) for way in WAYS for name in SHAPE]
    columns += [
        (table[name.format(way)][k], name, way)
        for way in ("_site", "_soma")
        for name in SHAPE
        for k in (0, 1)
    ]
    expected = dict(zip(SHAPE, values, strict=False))
    for got, name, way in columns:
        if name in expected:
            assert got == pytest.approx(expected[name], rel=1e-7), name.format(way)
        else:
            assert 0 <= got < 1e-8


def test_area_is_resistance_times_charge():
    answer = answered(trees.with_axon())
    charge_nC = CURRENT.charge_fC * 1e-3  # MΩ·pA·ms is 1e-3 mV·ms
    table = answer.by_sample
    for seen, resistance in (("site", "R_in_MOhm"), ("soma", "R_transfer_MOhm")):
        expected = table[resistance] * charge_nC
        np.testing.assert_allclose(table[f"area_{seen}_mV_ms_per_pA"], expected, rtol=1e-13)


def test_unit_charge_and_unit_current_differ_by_the_charge():
    table = answered(trees.comb()).by_sample
    ratio = table["peak_soma_mV_per_pA"] / table["peak_soma_mV_per_pC"]
    np.testing.assert_allclose(ratio, CURRENT.charge_fC * 1e-3, rtol=1e-12)


# ---------------------------------------------------------------- cells that hardly are any


def test_modes_that_a_cell_does_not_have_are_empty():
    row = answered(INSIDE, TimeRequest(time_constants=20)).cell
    assert row["tau0_ms"] == TAU_MS
    for k in range(1, 20):
        assert row[f"tau{k}_modes"] == 0
        assert np.isnan(row[f"tau{k}_ms"])
        assert np.isnan(row[f"tau{k}_amplitude_MOhm_per_ms"])
    assert np.isnan(row["L_by_peeling"])
    assert row["peeling_conditions_broken"] == 1


def test_a_cell_that_is_soma_only_is_its_own_farthest_tip():
    """Two samples of one lump: no branch, no tip."""
    row = answered("1 1 0 0 0 5 -1\n2 1 5 0 0 5 1\n").cell
    assert (row["tips"], row["farthest_tip_sample"]) == (0, 1)
    for name in SHAPE:
        values = {row[name.format(way)] for way in WAYS}
        assert len(values) == 1
    assert row["delay_total_farthest_ms"] == row["delay_total_greatest_ms"] == pytest.approx(TAU_MS)


def test_samples_left_out_are_empty():
    answer = answered(trees.ball_and_stick() + ORPHAN)
    plain = answered(trees.ball_and_stick())
    new = [*DELAYS_BY_SAMPLE, *shape_columns("_site", "_soma")]
    for name in new:
        assert np.isnan(answer.by_sample[name][-2:]).all(), name
        np.testing.assert_array_equal(answer.by_sample[name][:-2], plain.by_sample[name])
    of_cell = [*DELAYS, *modes_columns(3), *PEELING, *shape_columns(*WAYS)]
    assert added(answer.cell, of_cell) == added(plain.cell, of_cell)


def test_what_arrives_too_small_is_empty_and_its_area_still_known():
    """Some 80 λ away nothing is seen at the soma above the error; where it is injected it is."""
    swc = trees.scaled(trees.irregular(60, 4, soma=True), 1000.0, 1000.0)
    row = answered(swc, samples=False).cell
    for name in SHAPE[:5]:
        assert np.isnan(row[name.format("_soma_from_farthest")])
        assert row[name.format("_farthest_from_farthest")] > 0
    assert row["area_soma_from_farthest_mV_ms_per_pA"] > 0
    assert row["error_soma_from_farthest"] > 1e-3


def test_company_changes_nothing_at_all():
    request = Request(Assumptions(), keep_unfit=True, samples=True, time=ALL)
    together = answers(list(FILES.items()), request)
    for (name, each), among_others in zip(FILES.items(), together, strict=True):
        (alone,) = answers([(name, each)], request)
        assert same(alone, among_others), name


# ---------------------------------------------------------------- the request


@pytest.mark.parametrize("count", [-1, 21, float("nan")])
def test_time_constants_beyond_their_range_are_refused(count):
    with pytest.raises(AssumptionError, match=f"read {count} time constants, expected 1 to 20, or 0 for"):
        TimeRequest(time_constants=count)


def test_a_request_as_json_types():
    assert TimeRequest().to_dict() == {"delays": False, "time_constants": 0, "transient_ms": None}
    assert ALL.to_dict() == {"delays": True, "time_constants": 3, "transient_ms": [0.3, 4.0]}
