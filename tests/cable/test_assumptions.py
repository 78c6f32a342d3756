import dataclasses
import json
import pickle
import re
import tomllib

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from morphotone.cable.assumptions import Assumptions, Membrane, differences, table_name
from morphotone.cable.ranges import RANGES
from morphotone.cable.settings import LAYOUT, MEMBRANE, TABLES, VETTING
from morphotone.errors import AssumptionError
from morphotone.reading.soma import SOMA_RULES
from morphotone.reading.thresholds import Thresholds

# Defaults


def test_defaults_are_usable_and_raise_no_warning():
    assert Assumptions().warnings == ()


def test_default_membrane_lies_in_what_was_measured():
    # CA3_Rm 23600 with C_m 1 and MN_CR 7 to 35 kohm cm2; L23_Ri 140 to 170 ohm cm; Cm_rule 1 uF/cm2:
    # check_values.csv, all looked up.
    assert Membrane() == Membrane(20000.0, 150.0, 1.0, 1.0)
    assert 7000 <= Membrane().R_m_ohm_cm2 <= 35000
    assert 140 <= Membrane().R_i_ohm_cm <= 170


def test_every_field_has_one_key_and_every_key_one_field():
    flat = [setting.field for setting in LAYOUT]
    assert [entry.name for entry in dataclasses.fields(Assumptions)] == [
        "membrane",
        "domains",
        *flat,
        "thresholds",
    ]
    assert [entry.name for entry in dataclasses.fields(Membrane)] == [setting.field for setting in MEMBRANE]
    assert [entry.name for entry in dataclasses.fields(Thresholds)] == [setting.field for setting in VETTING]
    keys = [(setting.table, setting.key) for setting in (*MEMBRANE, *LAYOUT, *VETTING)]
    assert len(set(keys)) == len(keys)


def test_an_empty_file_gives_the_defaults():
    assert Assumptions.from_toml("") == Assumptions()
    assert Assumptions.from_toml("# nothing but a comment\n[membrane]\n") == Assumptions()


# The file and back


@pytest.mark.parametrize(
    ("line", "field", "value"),
    [
        ("[geometry]\nunit_um = 0.5", "unit_um", 0.5),
        ("[geometry]\nshrinkage = [1, 1.1, 2]", "shrinkage", (1.0, 1.1, 2.0)),
        ("[geometry]\ndiameter_factor = 2", "diameter_factor", 2.0),
        ("[geometry]\ndiameter_offset_um = -0.1", "diameter_offset_um", -0.1),
        ('[geometry]\nbranch_start = "own radius"', "branch_start", "own radius"),
        ('[soma]\nrule = "sphere"', "soma_rule", "sphere"),
        ("[soma]\nshunt_nS = 5", "soma_shunt_nS", 5.0),
        ('[axon]\ntreatment = "left out"', "axon", "left out"),
        ('[orphans]\ntreatment = "refused"', "orphans", "refused"),
        ("[frequencies]\nhz = [100, 10]", "hz", (10.0, 100.0)),
    ],
)
def test_each_key_fills_its_field_and_no_other(line, field, value):
    read = Assumptions.from_toml(line)
    assert read == Assumptions(**{field: value})
    assert getattr(read, field) == value
    assert type(getattr(read, field)) is type(value)


def test_lengths_that_go_with_a_treatment():
    text = '[axon]\ntreatment = "cut"\ncut_um = 0\n[orphans]\ntreatment = "joined"\ngap_um = 2.5\n'
    expected = Assumptions(axon="cut", axon_cut_um=0.0, orphans="joined", orphan_gap_um=2.5)
    assert Assumptions.from_toml(text) == expected


def test_thresholds_keep_their_types():
    read = Assumptions.from_toml("[vetting]\nfew_samples = 5\njump_ratio = 6\n")
    assert read.thresholds == dataclasses.replace(Thresholds(), few_samples=5, jump_ratio=6.0)
    assert type(read.thresholds.few_samples) is int
    assert type(read.thresholds.jump_ratio) is float


def positive(largest=1e6):
    return st.floats(1e-6, largest)


membranes = st.builds(Membrane, positive(), positive(), positive(), st.floats(1.0, 10.0))
lengths = st.floats(0.0, 1e4)


@st.composite
def assumptions(draw):
    axon = draw(st.sampled_from(["kept", "left out", "cut"]))
    orphans = draw(st.sampled_from(["left out", "joined", "refused"]))
    return Assumptions(
        membrane=draw(membranes),
        domains=draw(st.dictionaries(st.integers(0, 12), membranes, max_size=3)),
        unit_um=draw(positive()),
        shrinkage=draw(st.tuples(positive(), positive(), positive())),
        diameter_factor=draw(positive()),
        diameter_offset_um=draw(st.floats(-5, 5)),
        branch_start=draw(st.sampled_from(["parent radius", "own radius"])),
        soma_rule=draw(st.sampled_from(SOMA_RULES)),
        soma_shunt_nS=draw(lengths),
        axon=axon,
        axon_cut_um=draw(lengths) if axon == "cut" else None,
        orphans=orphans,
        orphan_gap_um=draw(lengths) if orphans == "joined" else None,
        hz=draw(st.lists(positive(), unique=True, max_size=4)),
        thresholds=Thresholds(few_samples=draw(st.integers(0, 99)), jump_ratio=draw(lengths)),
    )


@given(assumptions())
@settings(max_examples=60, deadline=None)
def test_written_assumptions_read_back_equal(made):
    assert Assumptions.from_toml(made.to_toml()) == made
    assert Assumptions.from_dict(json.loads(json.dumps(made.to_dict()))) == made
    assert Assumptions.from_toml(made.to_toml()).to_toml() == made.to_toml()
    assert pickle.loads(pickle.dumps(made)) == made
    assert differences(made, made) == []


def test_the_file_holds_every_key_and_says_what_each_means():
    text = Assumptions().to_toml()
    tree = tomllib.loads(text)
    assert tree == Assumptions().to_dict()
    assert tuple(tree) == TABLES
    for setting in (*MEMBRANE, *LAYOUT, *VETTING):
        assert f"# {setting.key}: " in text
        assert re.search(rf"^(# )?{setting.key} = ", text, re.MULTILINE)
    for setting in (*MEMBRANE, *VETTING):
        assert f"#   default {tree[setting.table][setting.key]!r}: " in text
    folded = re.sub(r"\n#\s+", " ", text)
    for published in RANGES.values():
        assert published.in_words in folded
    assert max(map(len, text.splitlines())) <= 100


def test_the_commented_lengths_are_usable_once_uncommented():
    text = Assumptions(axon="cut", axon_cut_um=1, orphans="joined", orphan_gap_um=1).to_toml()
    examples = re.findall(r"^# (\w+_um = .*)$", Assumptions().to_toml(), re.MULTILINE)
    assert [line.split(" = ")[0] for line in examples] == ["cut_um", "gap_um"]
    for line in examples:
        text = re.sub(rf"^{line.split(' = ')[0]} = .*$", line, text, flags=re.MULTILINE)
    assert Assumptions.from_toml(text).warnings == ()


# Domains


def test_a_domain_overrides_single_keys_and_takes_the_rest_from_the_membrane_table():
    read = Assumptions.from_toml(
        "[membrane]\nR_m_ohm_cm2 = 30000\nspine_factor = 2\n"
        "[membrane.soma]\nspine_factor = 1\n[membrane.axon]\nR_i_ohm_cm = 100\nspine_factor = 1\n"
        "[membrane.basal]\nC_m_uF_cm2 = 0.9\n[membrane.apical]\nR_m_ohm_cm2 = 10000\n"
        "[membrane.type_7]\nR_m_ohm_cm2 = 5000\n[membrane.type_0]\nR_m_ohm_cm2 = 6000\n"
    )
    assert read.of(1) == Membrane(30000, 150, 1, 1)
    assert read.of(2) == Membrane(30000, 100, 1, 1)
    assert read.of(3) == Membrane(30000, 150, 0.9, 2)
    assert read.of(4) == Membrane(10000, 150, 1, 2)
    assert read.of(7) == Membrane(5000, 150, 1, 2)
    assert read.of(0) == Membrane(6000, 150, 1, 2)
    assert read.of(99) == read.membrane == Membrane(30000, 150, 1, 2)
    assert list(read.domains) == [0, 1, 2, 3, 4, 7]
    assert read.of(np.int64(7)) == read.of(7)


def test_a_domain_equal_to_the_rest_is_no_domain_of_its_own():
    assert Assumptions.from_toml("[membrane.axon]\nR_m_ohm_cm2 = 20000\n") == Assumptions()
    assert Assumptions(domains={2: Membrane()}).domains == {}


def test_codes_from_arrays_become_int():
    made = Assumptions(domains={np.int64(7): Membrane(5000), np.int64(2): Membrane(6000)})
    assert [type(code) for code in made.domains] == [int, int]
    assert list(made.domains) == [2, 7]


def test_names_of_domain_tables():
    assert [table_name(code) for code in (0, 1, 2, 3, 4, 5, 7)] == [
        "type_0",
        "soma",
        "axon",
        "basal",
        "apical",
        "type_5",
        "type_7",
    ]


# Refusals

REFUSED_KEYS = [
    (
        "[membrane]\nR_m_kohm_cm2 = 20",
        r"\[membrane\] R_m_kohm_cm2 = 20: .*expected R_m_ohm_cm2, .*in ohm cm2",
    ),
    ("[membrane]\nR_m = 20000", r"R_m = 20000: .*expected R_m_ohm_cm2, .*in ohm cm2"),
    ("[membrane]\nRm = 20000", r"Rm = 20000: .*expected R_m_ohm_cm2, .*in ohm cm2"),
    ("[membrane]\nr_m_ohm_cm2 = 20000", r"expected R_m_ohm_cm2, .*write the key exactly so"),
    ("[membrane]\nR_i_ohm_m = 1.5", r"R_i_ohm_m = 1.5: .*expected R_i_ohm_cm, .*in ohm cm "),
    ("[membrane]\nC_m_F_m2 = 0.01", r"C_m_F_m2 = 0.01: .*expected C_m_uF_cm2, .*in uF/cm2"),
    ("[membrane]\nRa = 150", r"Ra = 150: .*expected R_m_ohm_cm2, R_i_ohm_cm, C_m_uF_cm2, spine_factor"),
    ("[membrane]\nspine_facter = 2", r"spine_facter = 2: .*the nearest is spine_factor\."),
    ("[membrane.axon]\nC_m = 1", r"\[membrane.axon\] C_m = 1: .*expected C_m_uF_cm2"),
    ("[membrane.axon]\nspines = 1", r"\[membrane.axon\] spines = 1: there is no such key"),
    ("[geometry]\nunit_nm = 1000", r"unit_nm = 1000: .*expected unit_um, .*in um"),
    ("[geometry]\nshunt_nS = 1", r"shunt_nS = 1: .*here; expected it as shunt_nS in \[soma\]"),
    ('[soma]\nsoma_rule = "auto"', r"soma_rule = 'auto': .*expected it as rule in \[soma\]"),
    ("[soma]\nshunt_pS = 1", r"shunt_pS = 1: .*expected shunt_nS, .*in nS"),
    ("[axon]\ncut_mm = 1", r"cut_mm = 1: .*expected cut_um, .*in um"),
    ("[orphans]\ngap = 1", r"gap = 1: .*expected gap_um, .*in um"),
    ("[frequencies]\nkhz = [1]", r"khz = \[1\]: .*the nearest is hz"),
    ("[vetting]\nfew_sample = 1", r"few_sample = 1: .*the nearest is few_samples"),
    ("[geometry]\njump_ratio = 1", r"expected it as jump_ratio in \[vetting\]"),
    ("R_m_ohm_cm2 = 1", r"^R_m_ohm_cm2 = 1: .*expected it as R_m_ohm_cm2 in \[membrane\]"),
    ("colour = 1", r"^colour = 1: .*outside the tables; expected it below one of \[membrane\], \[geometry\]"),
]

REFUSED_TABLES = [
    (
        "[membran]\nR_m_ohm_cm2 = 1",
        r"\[membran\] is no table here: expected \[membrane\].*nearest is membrane",
    ),
    ("membrane = 3", r"membrane = 3: expected a table, so write \[membrane\]"),
    ("[[membrane]]\nR_m_ohm_cm2 = 1", r"expected a table, so write \[membrane\]"),
    ("[membrane.type_3]", r"\[membrane.type_3\] .*write \[membrane.basal\]"),
    (
        "[membrane.dendrite]",
        r"\[membrane.dendrite\] is no domain: expected soma, axon, basal, apical or type_N",
    ),
    ("[membrane.apicle]", r"\[membrane.apicle\] is no domain: .*nearest is apical"),
    ("[membrane.type_07]", r"\[membrane.type_07\] is no domain"),
    ("[membrane.type_-1]", r"\[membrane.type_-1\] is no domain"),
    ("[membrane\n", r"not valid TOML: .*line 1.*correct the place"),
    ("[soma]\nshunt_nS = 1\nshunt_nS = 2\n", r"not valid TOML: Cannot overwrite a value.*line 3"),
    ("[membrane]\nR_m_ohm_cm2 = 1" + 5000 * "0", r"not valid TOML: .*5001 digits"),
    ("[membrane]\nR_m_ohm_cm2 = " + 5000 * "[", r"not valid TOML: .*(recursion|nest)"),
]

REFUSED_VALUES = [
    (
        "[membrane]\nR_m_ohm_cm2 = 0",
        r"R_m_ohm_cm2 = 0: expected a finite number above 0 in ohm cm2, such as 2",
    ),
    ("[membrane]\nR_m_ohm_cm2 = -5.0", r"\[membrane\] R_m_ohm_cm2 = -5.0: expected"),
    ("[membrane]\nR_m_ohm_cm2 = nan", r"R_m_ohm_cm2 = nan: expected a finite number"),
    ("[membrane]\nR_m_ohm_cm2 = inf", r"R_m_ohm_cm2 = inf: expected a finite number"),
    ("[membrane]\nR_m_ohm_cm2 = true", r"R_m_ohm_cm2 = true: expected a finite number"),
    ('[membrane]\nR_m_ohm_cm2 = "20000"', r"R_m_ohm_cm2 = '20000': expected a finite number"),
    ("[membrane]\nR_m_ohm_cm2 = [20000]", r"R_m_ohm_cm2 = \[20000\]: expected a finite number"),
    ("[membrane.R_m_ohm_cm2]\nvalue = 1", r"R_m_ohm_cm2 = {'value': 1}: expected a finite number"),
    ("[membrane]\nR_m_ohm_cm2 = 1" + 400 * "0", r"R_m_ohm_cm2 = 10*\.\.\.: expected a finite number"),
    ("[membrane]\nR_i_ohm_cm = 0", r"R_i_ohm_cm = 0: expected a finite number above 0 in ohm cm,"),
    ("[membrane]\nC_m_uF_cm2 = 0", r"C_m_uF_cm2 = 0: expected a finite number above 0 in uF/cm2"),
    ("[membrane]\nspine_factor = 0.99", r"spine_factor = 0.99: expected a finite number of 1 or more"),
    ("[membrane.axon]\nR_m_ohm_cm2 = -1", r"\[membrane.axon\] R_m_ohm_cm2 = -1: expected"),
    ("[geometry]\nunit_um = 0", r"\[geometry\] unit_um = 0: expected a finite number above 0 in um"),
    ("[geometry]\nshrinkage = 1.2", r"shrinkage = 1.2: expected three numbers above 0"),
    ("[geometry]\nshrinkage = [1, 1.2]", r"shrinkage = \[1, 1.2\]: expected three numbers"),
    ('[geometry]\nshrinkage = "xyz"', r"shrinkage = 'xyz': expected three numbers"),
    ("[geometry]\nshrinkage = [1, 1, 0]", r"\[geometry\] shrinkage, z = 0: expected a finite number above 0"),
    ("[geometry]\ndiameter_factor = 0", r"diameter_factor = 0: expected a finite number above 0"),
    ("[geometry]\ndiameter_offset_um = nan", r"diameter_offset_um = nan: expected a finite number in um"),
    ('[geometry]\nbranch_start = "own"', r"branch_start = 'own': expected one of \"parent radius\", \"own"),
    ('[soma]\nrule = "spere"', r"rule = 'spere': expected one of \"auto\".*the nearest is sphere"),
    ("[soma]\nshunt_nS = -1", r"\[soma\] shunt_nS = -1: expected a finite number of 0 or more in nS"),
    ("[axon]\ntreatment = true", r"treatment = true: expected one of \"kept\", \"left out\", \"cut\"\."),
    ('[axon]\ntreatment = "cut"', r"\[axon\] treatment = \"cut\" needs a length: expected cut_um in um"),
    (
        '[axon]\ntreatment = "cut"\ncut_um = -1',
        r"\[axon\] cut_um = -1: expected a finite number of 0 or more",
    ),
    ("[axon]\ncut_um = 50", r"\[axon\] cut_um = 50.0 has no effect with treatment = \"kept\".*delete cut_um"),
    (
        '[orphans]\ntreatment = "joined"',
        r"\[orphans\] treatment = \"joined\" needs a length: expected gap_um",
    ),
    (
        '[orphans]\ntreatment = "joined"\ngap_um = -1',
        r"\[orphans\] gap_um = -1: expected a finite number of 0",
    ),
    ("[orphans]\ngap_um = 5", r"\[orphans\] gap_um = 5.0 has no effect with treatment = \"left out\""),
    (
        '[orphans]\ntreatment = "lost"',
        r"treatment = 'lost': expected one of \"left out\", \"joined\", \"refused\"",
    ),
    ("[frequencies]\nhz = 100", r"hz = 100: expected a list of numbers in Hz"),
    ('[frequencies]\nhz = "100"', r"hz = '100': expected a list of numbers in Hz"),
    ("[frequencies]\nhz = [10, 0]", r"hz, entry 2 = 0: expected a finite number above 0 in Hz"),
    ("[frequencies]\nhz = [inf]", r"hz, entry 1 = inf: expected a finite number above 0 in Hz"),
    ("[frequencies]\nhz = [10, 5, 10.0]", r"hz gives 10.0 Hz more than once"),
    ("[vetting]\nfew_samples = 2.5", r"few_samples = 2.5: expected a whole number of 0 or more"),
    ("[vetting]\njump_ratio = -1", r"\[vetting\] jump_ratio = -1: expected a finite number of 0 or more"),
    ("[vetting]\nunit_step_um = false", r"unit_step_um = false: expected a finite number of 0 or more in um"),
]


@pytest.mark.parametrize(("text", "match"), REFUSED_KEYS + REFUSED_TABLES + REFUSED_VALUES)
def test_refused_with_the_key_the_value_and_the_way_out(text, match):
    with pytest.raises(AssumptionError, match=match) as caught:
        Assumptions.from_toml(text)
    sentence = str(caught.value)
    assert "\n" not in sentence
    assert sentence.endswith(".")


@pytest.mark.parametrize(
    ("values", "match"),
    [
        ({"unit_um": -1}, r"^unit_um = -1: expected a finite number above 0"),
        ({"soma_shunt_nS": np.nan}, r"^soma_shunt_nS \(\[soma\] shunt_nS\) = nan: expected"),
        ({"axon": "cut"}, r"cut_um .*\(axon_cut_um from Python\)"),
        ({"orphan_gap_um": 3}, r"delete gap_um \(orphan_gap_um from Python\)"),
        ({"unit_um": None}, r"^unit_um = None: expected"),
        ({"hz": {10: 1}}, r"hz = {10: 1}: expected a list"),
        ({"domains": {"axon": Membrane(1e4)}}, r"domains has the key 'axon': expected an SWC code"),
        ({"domains": {-1: Membrane(1e4)}}, r"domains has the key -1: expected an SWC code"),
        ({"domains": {True: Membrane(1e4)}}, r"domains has the key true: expected an SWC code"),
    ],
)
def test_python_is_held_to_the_same_rules(values, match):
    with pytest.raises(AssumptionError, match=match):
        Assumptions(**values)


def test_a_membrane_from_python_is_checked():
    with pytest.raises(AssumptionError, match=r"^R_i_ohm_cm = 0: expected a finite number above 0 in ohm cm"):
        Membrane(R_i_ohm_cm=0)


def test_arrays_and_numpy_numbers_are_taken():
    made = Assumptions(hz=np.array([100.0, 1.0]), shrinkage=np.array([1, 1, 2]), unit_um=np.float32(0.5))
    assert made == Assumptions(hz=(1.0, 100.0), shrinkage=(1.0, 1.0, 2.0), unit_um=0.5)
    assert {type(value) for value in (*made.hz, *made.shrinkage, made.unit_um)} == {float}


def test_thresholds_handed_in_are_left_as_they_were():
    thresholds = Thresholds(jump_ratio=6)
    assert type(Assumptions(thresholds=thresholds).thresholds.jump_ratio) is float
    assert type(thresholds.jump_ratio) is int


# Published ranges: ends from check_values.csv (provenance as written there), else from memory

ENDS = [
    ("[membrane]\nR_m_ohm_cm2 = {}", 2500, 141000),  # RGC; PC_RH_Rm: looked up
    ("[membrane.soma]\nR_m_ohm_cm2 = {}", 100, 141000),  # MN_CR: looked up
    ("[membrane.axon]\nR_m_ohm_cm2 = {}", 2500, 141000),
    ("[membrane]\nR_i_ohm_cm = {}", 70, 250),  # MN_Fleshman; PC_Rapp: looked up
    ("[membrane.basal]\nR_i_ohm_cm = {}", 70, 250),
    ("[membrane]\nC_m_uF_cm2 = {}", 0.5, 2.4),  # Cm_human; MN_Thurbon: looked up
    ("[membrane]\nspine_factor = {}", 1, 4.2),  # Rapp_F, sp_Rapp: looked up; upper end computed from them
    ("[geometry]\nunit_um = {}", 0.001, 1000),  # ends chosen here
    ("[geometry]\nshrinkage = [{}, 1, 1]", 1, 1.25),  # mem_shr: FROM MEMORY
    ("[geometry]\nshrinkage = [1, {}, 1]", 1, 1.25),  # mem_shr: FROM MEMORY
    ("[geometry]\nshrinkage = [1, 1, {}]", 1, 4),  # mem_shr: FROM MEMORY
    ("[geometry]\ndiameter_factor = {}", 0.5, 2),  # FROM MEMORY
    ("[geometry]\ndiameter_offset_um = {}", -0.2, 0.2),  # LM_limit: formula looked up
    ("[soma]\nshunt_nS = {}", 0, 18.4),  # L23_Gtot: looked up
    ("[frequencies]\nhz = [{}]", 0, 10000),  # FROM MEMORY
]
BOUNDED_BELOW = ("spine_factor", "shunt_nS", "hz")  # less than the low end is refused, not warned about


@pytest.mark.parametrize(("text", "low", "high"), ENDS)
def test_values_outside_the_range_warn_with_it_and_the_ends_do_not(text, low, high):
    where = re.sub(r"^(\[[\w.]+\])\n(\w+) = .*", r"\1 \2", text)
    outside = [high * 1.001 if high > 0 else high]
    if not any(key in text for key in BOUNDED_BELOW):
        outside.append(low - abs(low) * 0.001)
    for value in outside:
        (sentence,) = Assumptions.from_toml(text.format(value)).warnings
        assert sentence.startswith(where)
        assert f"= {value!r} lies outside the " in sentence
        assert f"{low:g} to {high:g}" in sentence
        assert sentence.endswith(".")
    for end in (low, high):
        if end > 0 or "offset" in text:
            assert Assumptions.from_toml(text.format(end)).warnings == ()


def test_every_range_is_tried_above():
    tried = {(low, high) for _, low, high in ENDS}
    assert {(published.low, published.high) for published in RANGES.values()} == tried


def test_spine_factors_follow_from_the_published_areas():
    # Rapp, Segev & Yarom 1994 abstract (looked up): 150000 um2, 100000 of it spines; 10 spines/um of 1 um2.
    whole_cell = 150000 / (150000 - 100000)
    assert f"whole guinea-pig Purkinje cell {whole_cell:g}," in RANGES["spine_factor"].source
    assert RANGES["spine_factor"].high == pytest.approx(1 + 10 * 1 / (np.pi * 1.0), abs=0.05)


@pytest.mark.parametrize(
    ("text", "meant"),
    [
        ("[membrane]\nR_m_ohm_cm2 = 2", "ohm m2 (20000 ohm cm2)"),
        ("[membrane]\nR_m_ohm_cm2 = 20", "kohm cm2 (20000 ohm cm2)"),
        ("[membrane]\nR_i_ohm_cm = 1.5", "ohm m (150 ohm cm)"),
        ("[membrane]\nC_m_uF_cm2 = 0.01", "F/m2 (1 uF/cm2)"),
        ("[membrane]\nC_m_uF_cm2 = 10", "fF/um2 (1 uF/cm2)"),
        ("[geometry]\ndiameter_offset_um = 80", "nm (0.08 um)"),
        ("[soma]\nshunt_nS = 5000", "pS (5 nS)"),
    ],
)
def test_a_value_that_looks_like_another_unit_is_told_which(text, meant):
    (sentence,) = Assumptions.from_toml(text).warnings
    assert f"it would lie inside if it was meant in {meant}." in sentence


def test_a_range_nobody_looked_up_is_not_called_published():
    (sentence,) = Assumptions(hz=(20000,)).warnings
    assert "outside the usual 0 to 10000 Hz" in sentence
    assert "from memory" in sentence
    (sentence,) = Assumptions(membrane=Membrane(R_i_ohm_cm=300)).warnings
    assert "outside the published 70 to 250 ohm cm" in sentence
    assert "looked up" in sentence


def test_a_domain_warns_of_its_own_values_only():
    made = Assumptions.from_toml("[membrane]\nR_m_ohm_cm2 = 2\n[membrane.axon]\nC_m_uF_cm2 = 9\n")
    assert [sentence.split(" = ")[0] for sentence in made.warnings] == [
        "[membrane] R_m_ohm_cm2",
        "[membrane.axon] C_m_uF_cm2",
    ]


# Differences


def test_differences_name_key_and_both_values():
    ours = Assumptions(membrane=Membrane(10000), axon="cut", axon_cut_um=50)
    theirs = Assumptions(hz=(100,), thresholds=Thresholds(jump_ratio=5.0))
    assert differences(ours, theirs) == [
        "membrane.R_m_ohm_cm2: 10000.0 against 20000.0",
        "axon.treatment: 'cut' against 'kept'",
        "axon.cut_um: 50.0 against not set",
        "frequencies.hz: [] against [100.0]",
        "vetting.jump_ratio: 4.0 against 5.0",
    ]
    assert "axon.cut_um: not set against 50.0" in differences(theirs, ours)


def test_differences_compare_a_domain_with_what_holds_there_in_the_other():
    plain = Assumptions()
    assert differences(plain, Assumptions(domains={2: Membrane(5000)})) == [
        "membrane.axon.R_m_ohm_cm2: 20000.0 against 5000.0"
    ]
