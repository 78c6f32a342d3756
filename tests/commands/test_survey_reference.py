"""Whole sample cells, from the file to the digits in the survey's tables, against the definitions."""

from pathlib import Path

import pandas as pd
import pytest
from mpmath import mpf

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.commands.survey import survey
from tests.definitions import Choices, Constants, cable_of, two_port

SAMPLES = Path(__file__).parents[2] / "sample_morphologies"
HZ = 100.0
TOLERANCE = 1e-12
BASE, APICAL = (15_000.0, 150.0, 0.95, 1.0), (15_000.0, 150.0, 0.95, 1.8)


def impedances(cable, hz):
    """Return Z_ii and Z_i,soma of every node by eliminating tips first, then soma first, at 50 digits.

    The literal recursion on two-ports; `tests.definitions` inverts a dense matrix, for fewer nodes.
    """
    choices = cable.choices
    ports = {}
    for p in cable.pieces:
        c = choices.of(p.kind)
        ports[p.end] = (p.start, *two_port(p.r_start, p.r_end, p.h, c.R_i, c.g(hz)))
    away = [mpf(0)] * cable.node_count
    away[0] = cable.soma_area * choices.of(1).g(hz)
    for p in reversed(cable.pieces):
        start, y11, y12, y22 = ports[p.end]
        away[start] += y11 - y12**2 / (y22 + away[p.end])
    whole = {0: away[0]}  # admittance of the whole cell seen at a node
    transfer = {0: 1 / away[0]}
    for p in cable.pieces:
        start, y11, y12, y22 = ports[p.end]
        rest = whole[start] - (y11 - y12**2 / (y22 + away[p.end]))
        whole[p.end] = away[p.end] + y22 - y12**2 / (y11 + rest)
        transfer[p.end] = transfer[start] * -y12 / (y22 + away[p.end])
    return {node: 1 / y for node, y in whole.items()}, transfer


@pytest.mark.slow
@pytest.mark.parametrize(("name", "rule"), [("spar_01", "sphere"), ("tether_01", "three-point")])
def test_the_survey_of_a_sample_cell_is_the_reference(name, rule, tmp_path):
    swc = (SAMPLES / f"{name}.swc").read_text(encoding="utf-8")
    (tmp_path / f"{name}.swc").write_text(swc, encoding="utf-8")
    assumptions = Assumptions(membrane=Membrane(*BASE), domains={4: Membrane(*APICAL)}, hz=(HZ,))
    table = survey(tmp_path, assumptions=assumptions, samples=True).samples[f"{name}.swc"]
    cable = cable_of(
        swc, Choices(constants=Constants(*BASE), domains={4: Constants(*APICAL)}, soma_rule=rule)
    )
    assert len(table) == len(cable.node) > 700
    node = [cable.node[number] for number in table["sample"]]
    expect(table["X"], [cable.X[number] for number in table["sample"]])
    expect(table["path_um"], [cable.path[number] for number in table["sample"]])
    for hz, suffix in ((0.0, ""), (HZ, "_100Hz")):
        Z_in, transfer = impedances(cable, hz)
        expect(table[f"R_in_MOhm{suffix}"], [abs(Z_in[i]) for i in node])
        expect(table[f"R_transfer_MOhm{suffix}"], [abs(transfer[i]) for i in node])
        expect(table[f"attenuation_to_soma{suffix}"], [abs(Z_in[i] / transfer[i]) for i in node])
        expect(table[f"attenuation_from_soma{suffix}"], [abs(Z_in[0] / transfer[i]) for i in node])


def expect(column: pd.Series, wanted: list) -> None:
    """Compare a column with numbers of many digits."""
    deviations = [abs(mpf(got) - want) / (abs(want) or 1) for got, want in zip(column, wanted, strict=True)]
    assert max(deviations) <= TOLERANCE, column.name
