"""The page: its structure, what is on it, and that no text of a file is ever more than text."""

import base64
import hashlib
import json
from dataclasses import replace

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.questions.groups import Missing
from morphotone.reading.findings import CATALOGUE
from morphotone.showing.page import Picture, page
from tests.showing.mornings import cells_of, morning_of, parsed, record_of

NASTY = [
    "<script>alert(1)</script>",
    '"><img src=x onerror=alert(1)>',
    "</script><b>bold",
    "line\nbreak",
    "{{ 7 * 7 }}{% raw %}",
    "שלום\u202eabc",
    "a&amp;b'c",
    "<!--",
]
AWAY = [["w.swc", "empty", "w.swc: read an empty file"], ["x.swc", "empty", "x.swc: read <b>"]]


def study(**more):
    """A dozen cells in two groups, one far from its own, with findings and files turned away."""
    cells = cells_of(12)
    cells.loc[5, "R_in_MOhm"] = 4000.0
    cells.loc[[2, 3], "grade"] = "doubtful"
    findings = [
        {"file": cells["file"][2], "code": "flat", "severity": "doubtful"},
        {"file": cells["file"][2], "code": "soma_absent", "severity": "doubtful"},
        {"file": cells["file"][3], "code": "flat", "severity": "doubtful"},
        {"file": cells["file"][7], "code": "columns_extra"},
        {"file": "w.swc", "code": "unit_implausible", "severity": "unfit"},
    ]
    groups = ["bramble"] * 6 + ["spar"] * 5 + [""]
    return morning_of(cells, findings, AWAY, by="class", groups=groups, **more)


VARIANTS = {
    "a study": study(),
    "with pictures": study(pictures={"night/cell_0001.swc": Picture("f.png", "t.png", "m.glb", "s.csv")}),
    "no groups": replace(study(), groups=None, by=""),
    "nothing analysed": morning_of(cells_of(0), (), AWAY),
    "nothing at all": morning_of(cells_of(0)),
    "one cell": morning_of(cells_of(1)),
    "one cell, grouped": morning_of(cells_of(1), by="class", groups=["alone"]),
    "no cell has a group": morning_of(cells_of(3), by="class", groups=["", "", ""]),
    "constant columns": morning_of(cells_of(9, R_in_MOhm=5.0, X_tips_mean=0.0)),
    "no values": morning_of(cells_of(9, X_tips_mean=np.nan, R_in_MOhm=np.inf)),
    "absurd values": morning_of(cells_of(3, R_in_MOhm=[1e-300, 1e300, np.nan], lambda_um=[-1.0, 0.0, 1e308])),
    "many cells": morning_of(cells_of(250)),
    "nasty names": morning_of(cells_of(len(NASTY), NASTY), by=NASTY[0], groups=NASTY),
    "frequencies": morning_of(cells_of(4, **{"attenuation_to_soma_farthest_100Hz": 9.0, "tau0_ms": 15.0})),
}


@pytest.mark.parametrize("morning", VARIANTS.values(), ids=VARIANTS)
def test_elements_are_balanced_ids_unique_and_every_link_has_its_target(morning):
    found = parsed(morning)
    assert found.faults == []
    assert len(found.ids) == len(set(found.ids))
    inside = [link["href"][1:] for link in found.all("a") if link["href"].startswith("#")]
    assert inside
    assert set(inside) <= set(found.ids)
    labels = [element[1]["aria-labelledby"] for element in found.elements if "aria-labelledby" in element[1]]
    assert set(labels) <= set(found.ids)
    assert "nan" not in found.words.lower().replace("nanomet", "").replace("nm", "").split()


@pytest.mark.parametrize("morning", VARIANTS.values(), ids=VARIANTS)
def test_headings_go_down_one_step_at_a_time_below_one_first(morning):
    levels = [int(tag[1]) for tag, _ in parsed(morning).elements if tag in ("h1", "h2", "h3", "h4")]
    assert levels[0] == 1
    assert levels.count(1) == 1
    assert max(np.diff(levels)) <= 1


def test_a_page_has_its_landmarks_and_a_way_past_the_top():
    found = parsed(study())
    for tag in ("header", "nav", "main", "footer"):
        assert len(found.all(tag)) == 1
    assert found.all("html")[0]["lang"] == "en"
    first_link = found.all("a")[0]
    assert first_link == {"class": "skip", "href": "#main"}
    assert all(image["aria-label"] for image in found.all("svg"))
    assert all(button["type"] == "button" for button in found.all("button"))
    assert len(found.all("caption")) == len(found.all("table")) == 1


def test_nothing_is_fetched():
    """No element of the page names a source, and the policy forbids what is not said."""
    found = parsed(VARIANTS["with pictures"])
    assert not any("src" in attributes for _, attributes in found.elements)
    assert not found.all("link")
    assert not found.all("img")
    policy = found.all("meta")[1]["content"]
    assert policy.startswith("default-src 'none'; script-src 'sha256-")
    assert "url(" not in found.text_of("style")


def test_the_policy_allows_the_script_of_the_page_and_no_other():
    html = page(study())
    script = html.rpartition("<script>")[2].partition("</script>")[0]
    digest = base64.b64encode(hashlib.sha256(script.encode()).digest()).decode()
    assert f"script-src 'sha256-{digest}'" in html


def test_names_with_markup_are_text_and_come_back_whole():
    found = parsed(VARIANTS["nasty names"])
    assert len(found.all("script")) == 2  # our data, our script
    assert not found.all("img")
    assert not any(name.startswith("on") for _, attributes in found.elements for name in attributes)
    shown = [" ".join(data.split()) for name, data in found.texts if name == "bdi"]
    assert {" ".join(name.rpartition("/")[2].split()) for name in NASTY} <= set(shown)
    data = json.loads(next(text for name, text in found.texts if name == "script"))
    assert [row[0] for row in data["cells"]] == [f"{name}.swc" for name in NASTY]


def test_sentences_and_reasons_with_markup_are_text():
    row = ["a.swc", "<i>odd</i>", "<script>alert(1)</script>"]
    finding = {"file": "night/cell_0000.swc", "sentence": "</script><script>alert(1)</script>"}
    found = parsed(morning_of(cells_of(1), [finding], [row], remarks=["<b>remark</b>"]))
    assert found.faults == []
    assert len(found.all("script")) == 2
    assert not found.all("i") or "odd" not in found.text_of("i")
    assert "<b>remark</b>" in found.words


def test_what_came_of_the_files_is_counted():
    words = parsed(study()).words
    assert "14 files found = 12 analysed + 2 turned away." in words
    assert "10 sound" in words
    assert "2 doubtful" in words
    assert "empty : 2 files" in words


def test_every_file_turned_away_is_named_once_with_its_sentence():
    found = parsed(study())
    assert [one for one in found.ids if one.startswith("away-")] == ["away-0", "away-1"]
    assert "read an empty file" in found.words
    assert "w.swc: read" not in found.words  # its name stands before it already


def test_findings_are_counted_with_title_and_effect_and_lead_to_their_files():
    found = parsed(study())
    assert f"{CATALOGUE['flat'].title} flat , 2 files {CATALOGUE['flat'].effect}" in found.words
    marks = [text for name, text in found.texts if name == "span"]
    assert marks[:4] == ["unfit", "doubtful", "doubtful", "note"]
    assert {"href": "#cell-3"} in found.all("a")
    assert {"href": "#away-0"} in found.all("a")


def test_a_finding_that_this_version_does_not_know_keeps_the_effect_it_came_with():
    finding = {"file": "night/cell_0000.swc", "code": "brand_new", "effect": "Nobody knows."}
    words = parsed(morning_of(cells_of(1), [finding])).words
    assert "this version does not know brand_new , 1 file Nobody knows." in words


def test_a_cell_far_from_its_group_comes_first_with_the_reason():
    found = parsed(study())
    first = found.words.partition("2 of 12 cells stand out. ")[2]
    assert first.startswith("night/cell_0005 ( bramble ) : R_in ")
    assert "times the median of its group" in first[:120]


def test_every_cell_has_a_row_with_its_numbers():
    found = parsed(study())
    assert [one for one in found.ids if one.startswith("cell-")] == [f"cell-{row}" for row in range(12)]
    heads = [row for row in found.all("button") if "title" in row]
    assert [head["title"] for head in heads[:2]] == ["R_in_MOhm", "lambda_um"]
    assert " 4000 " in found.words


def test_columns_of_frequencies_and_of_the_time_axis_are_taken_where_they_are():
    titles = {button.get("title") for button in parsed(VARIANTS["frequencies"]).all("button")}
    assert {"attenuation_to_soma_farthest_100Hz", "tau0_ms"} <= titles


def test_a_value_that_is_none_is_an_empty_cell_and_counted_beside_the_drawing():
    found = parsed(VARIANTS["no values"])
    assert "9 cells without a finite value" in found.words
    assert "No cell has a value." in found.words
    assert "Infinity" in found.words


def test_pictures_are_named_in_the_data_only():
    html = page(VARIANTS["with pictures"])
    assert html.count("t.png") == 1
    data = html.partition('id="details">')[2].partition("</script>")[0]
    assert json.loads(data)["cells"][1][1] == ["f.png", "t.png", "m.glb", "s.csv"]


def test_the_findings_of_a_cell_come_the_weightiest_first():
    file = "night/cell_0000.swc"
    kinds = [("columns_extra", "note"), ("flat", "doubtful"), ("soma_outline", "note"), ("soma_odd", "unfit")]
    findings = [{"file": file, "code": code, "severity": severity} for code, severity in kinds]
    html = page(morning_of(cells_of(1), findings))
    data = json.loads(html.partition('id="details">')[2].partition("</script>")[0])
    assert [code for _, code, _ in data["cells"][0][2]] == [
        "soma_odd",
        "flat",
        "columns_extra",
        "soma_outline",
    ]


def test_cells_and_lines_without_partner_are_named():
    missing = (
        Missing("night/cell_0011", None, "group_absent", "no row"),
        Missing("ghost", 7, "cell_unknown", "read cell 'ghost'"),
    )
    words = parsed(study(missing=missing)).words
    assert "1 analysed cell has no row in the table of groups: night/cell_0011" in words
    assert "line 7: ghost read cell 'ghost'" in words


def test_assumptions_stand_in_full_with_ranges_and_those_outside_are_said():
    odd = Assumptions(membrane=Membrane(R_m_ohm_cm2=500.0), domains={2: Membrane(R_i_ohm_cm=90.0)})
    words = parsed(morning_of(cells_of(5), assumptions=odd)).words
    assert "Outside its range. [membrane] R_m_ohm_cm2 = 500.0 lies outside the published" in words
    assert "500 Ω cm² : specific membrane resistance" in words
    assert "[membrane.axon] R_i_ohm_cm 90 Ω cm" in words
    assert "Roth & Häusser 2001" in words
    assert "zigzag_ratio 3 , the default" in words


def test_what_ran_is_told_with_and_without_what_a_record_may_lack():
    words = parsed(study()).words
    assert "Started Sunday 1 March 2026, 20:00:00 UTC" in words
    assert "Took 9 h 30 min 10 s" in words
    bare = {key: value for key, value in record_of().items() if key not in ("started", "command", "machine")}
    assert parsed(replace(study(), record=bare)).faults == []
    first = {"started": "2026-03-01T20:00:00+00:00", "seconds_by_stage": {"read": 1.25}}
    second = {"entered": {"turned_away": 5}, "seconds_by_stage": {"read": 0.5, "vet": 2.0}}
    words = parsed(replace(study(), record=record_of(sittings=[first, second]))).words
    assert "Seconds by stage, all workers read 1.75, vet 2" in words
    assert "started: Sunday 1 March 2026, 20:00:00 UTC; seconds by stage: read 1.25" in words
    assert "entered: turned away 5; seconds by stage: read 0.5, vet 2" in words


def test_two_thousand_cells_stay_small_and_are_all_there():
    count = 2000
    cells = cells_of(count, attenuation_to_soma_farthest_100Hz=40.0)
    findings = [
        {"file": file, "code": code, "sentence": "Seen in this file, as often as not. " * 4}
        for file in cells["file"]
        for code in ("flat", "diameter_jump", "soma_odd")
    ]
    pictures = {file: Picture(*[f"maps/{kind}/{file}.png" for kind in "abcd"]) for file in cells["file"]}
    groups = [f"group {number % 20}" for number in range(count)]
    html = page(morning_of(cells, findings, AWAY, pictures=pictures, by="class", groups=groups))
    assert html.count('<tr id="cell-') == count
    assert html.count(" hidden><th scope=") == count - 250
    assert len(html.encode()) < 15e6 / 3
    assert html.count("<circle") == 0  # bars, not thousands of dots
