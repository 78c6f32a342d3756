"""README says what is true now: every column, every command, an example that works."""

import argparse
import re
from importlib import import_module
from pathlib import Path

import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.commands import COMMANDS
from morphotone.questions.comparisons import COMPARISON_COLUMNS
from morphotone.questions.groups import Missing
from morphotone.questions.ranking import ADDED_COLUMNS, MOVERS_COLUMNS, ORDERS_COLUMNS
from morphotone.questions.site_answers import SiteRequest
from morphotone.questions.site_answers import headers as site_headers
from morphotone.questions.summaries import SUMMARY_COLUMNS
from morphotone.questions.survey import Request, headers
from morphotone.questions.time_axis import TimeRequest
from morphotone.showing.map_files import COLUMNS as MAPS_COLUMNS

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
DOMAINS = ("basal", "apical", "other")
ALL = Request(Assumptions(), samples=True, time=TimeRequest(True, 1, SynapticCurrent(0.5, 3.0)))


def section(title: str) -> str:
    """Return the text under one heading."""
    match = re.search(rf"^### {re.escape(title)}$(.*?)(?=^##)", README, re.MULTILINE | re.DOTALL)
    assert match, f"no section {title}"
    return match.group(1)


@pytest.mark.parametrize(
    ("table", "title"),
    [
        ("cells", "`cells.csv`"),
        ("branches", "`branches.csv`"),
        ("samples", "`samples/`"),
        ("findings", "`findings.csv`"),
    ],
)
def test_every_column_is_explained(table: str, title: str) -> None:
    explained = set(re.findall(r"`([^`]+)`", section(title)))
    ends = ("_um", "_least_um", "_greatest_um")
    and_so_on = {f"lambda_{domain}{end}" for domain in DOMAINS for end in ends}
    assert set(headers(ALL)[table]) - explained <= and_so_on


@pytest.mark.parametrize(
    ("table", "title"),
    [("branches", "`branches.csv`"), ("samples", "`samples/`"), ("cells", "`cells.csv`")],
)
def test_no_column_is_explained_that_is_not_there(table: str, title: str) -> None:
    rows = re.findall(r"^\| ((?:`[^`]+`(?:, | and so on)?)+)", section(title), re.MULTILINE)
    explained = {name for row in rows for name in re.findall(r"`([^`]+)`", row)}
    assert explained <= set(headers(ALL)[table])
    assert explained


OF_GROUPS = {*SUMMARY_COLUMNS, *COMPARISON_COLUMNS, *Missing._fields}
ASKED = SiteRequest(Assumptions(), synapses=True, brief=True, together=True, clamp_MOhm=5.0)
OF_SITES = {
    "`ranking.csv`": [*site_headers(ASKED, [])["ranking"], *ADDED_COLUMNS],
    "`orders.csv`, `movers.csv`": [*ORDERS_COLUMNS, *MOVERS_COLUMNS],
    "`clamp.csv`": site_headers(ASKED, [])["clamp"],
    "`together.csv`, `veto.csv`": [name for t in ("together", "veto") for name in site_headers(ASKED, [])[t]],
}


@pytest.mark.parametrize("title", OF_SITES)
def test_the_columns_of_ranking_are_those_explained(title: str) -> None:
    rows = re.findall(r"^\| ((?:`[^`]+`(?:, )?)+) \|", section(title), re.MULTILINE)
    explained = {name for row in rows for name in re.findall(r"`([^`]+)`", row)}
    assert explained == set(OF_SITES[title]) - {"file", "cell"}


def test_every_column_of_maps_is_explained() -> None:
    rows = re.findall(r"^\| ((?:`[^`]+`(?:, )?)+) \|", section("`maps.csv`"), re.MULTILINE)
    assert [name for row in rows for name in re.findall(r"`([^`]+)`", row)] == list(MAPS_COLUMNS)


def test_the_columns_of_groups_are_those_explained() -> None:
    text = section("`summary.csv`, `comparisons.csv`, `missing.csv`")
    rows = re.findall(r"^\| ((?:`[^`]+`(?:, )?)+) \|", text, re.MULTILINE)
    assert {name for row in rows for name in re.findall(r"`([^`]+)`", row)} == OF_GROUPS


def test_every_command_is_named() -> None:
    for command in COMMANDS:
        assert f"`morphotone {command}" in README


def test_every_option_is_explained_with_its_commands() -> None:
    explained: dict[str, set[str]] = {}
    for options, of in re.findall(r"^\| (`--[^|]+) \| ([^|]+) \|", README, re.MULTILINE):
        named = set(re.findall(r"`(\w+)`", of))
        for option in re.findall(r"--[\w-]+", options):
            explained[option] = set(COMMANDS) - named if of.startswith("all") else named
    known: dict[str, set[str]] = {"--debug": set(COMMANDS)}
    for command in COMMANDS:
        parser = argparse.ArgumentParser()
        import_module(f"morphotone.commands.{command}").add_arguments(parser)
        for option in re.findall(r"--[\w-]+", parser.format_usage()):
            known.setdefault(option, set()).add(command)
    assert explained == known
