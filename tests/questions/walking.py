"""Branches and the cells' row by walking from piece to piece: the definitions of THEORY, slowly.

The cable itself comes from `tests.definitions`, which reads the file row by row; impedances come from the
engine, by sample number, since `tests/cable` holds those against the definitions.
"""

from collections import defaultdict
from dataclasses import dataclass
from math import inf, nan, pi, sqrt
from statistics import mean, stdev

import numpy as np

from morphotone.cable.assumptions import Assumptions, Membrane
from morphotone.cable.electrotonus import build_cases, cases_of, solve, solve_cables
from morphotone.questions.branch_table import branch_table
from morphotone.questions.cell import Cell
from morphotone.questions.cells import cell_row
from morphotone.questions.samples import sample_table
from morphotone.reading.reconstruction import domain_name, reconstruct
from morphotone.reading.vetting import Vetting
from tests.definitions import AXON, SOMA, Choices, Constants, cable_of, electrotonic_length, lateral_area

NAMED = {2: "axon", 3: "basal", 4: "apical"}


@dataclass(frozen=True)
class Tables:
    """What the program makes of one cell."""

    rec: object
    cell: object
    electrotonus: object
    branches: object
    branch_table: dict
    cell_row: dict
    sample_table: dict


DEFAULTS = Assumptions()
NOTHING_SEEN = Vetting((), "sound")


def tables_of(swc, assumptions=DEFAULTS, vetting=NOTHING_SEEN):
    """Ask the program for all tables of SWC text."""
    rec = reconstruct(swc.encode(), file="cell.swc", cell="cell")
    electrotonus = solve_cables([build_cases(rec, [assumptions])], cases_of([assumptions]))[0]
    cell = Cell(rec, vetting, electrotonus)
    return Tables(
        rec, cell, electrotonus, cell.branches, branch_table(cell), cell_row(cell), sample_table(cell)
    )


def choices_of(assumptions, soma_rule):
    """Say assumptions in the words of `tests.definitions`."""

    def constants(m):
        return Constants(m.R_m_ohm_cm2, m.R_i_ohm_cm, m.C_m_uF_cm2, m.spine_factor)

    return Choices(
        soma_rule,
        constants(assumptions.membrane),
        {kind: constants(membrane) for kind, membrane in assumptions.domains.items()},
        assumptions.soma_shunt_nS,
        assumptions.branch_start,
        assumptions.axon,
        assumptions.axon_cut_um or 0.0,
    )


@dataclass
class Walk:
    """One branch: its pieces from the soma outward, the walk it leaves (-1: the soma), and so on."""

    pieces: list
    parent: int
    order: int
    children: int = -1


@dataclass(frozen=True)
class Walked:
    """A cell walked through."""

    assumptions: Assumptions
    cable: object
    walks: list
    number: dict
    """Node -> number of the first sample there."""
    solved: object
    row: dict
    """Sample number -> row of `solved`."""

    def value(self, name, node, case=0):
        """Return what the engine says of a node's sample."""
        return float(getattr(self.solved, name)[self.row[self.number[node]], case])

    def X(self, node):
        return float(self.cable.X[self.number[node]])

    def path(self, node):
        return float(self.cable.path[self.number[node]])

    def constants(self, kind):
        return self.cable.choices.of(kind)

    def L(self, piece):
        return float(electrotonic_length(piece.r_start, piece.r_end, piece.h, self.constants(piece.kind)))

    def lambdas(self, piece):
        """Return sqrt((R_m/R_i)(d/4)) at both ends, um (Rall 1959), R_m over the spine factor."""
        c = self.constants(piece.kind)
        return [1e4 * sqrt(c.R_m / c.F / c.R_i * 2e-4 * float(r) / 4) for r in (piece.r_start, piece.r_end)]

    def G_inf(self, d, kind):
        """Return (pi/2) d^(3/2) / sqrt(R_m R_i), nS (Rall 1959)."""
        c = self.constants(kind)
        return pi / 2 * (1e-4 * float(d)) ** 1.5 / sqrt(c.R_m / c.F * c.R_i) * 1e9


def walk(swc, assumptions, soma_rule):
    """Walk through a cell."""
    cable = cable_of(swc, choices_of(assumptions, soma_rule))
    leaving = defaultdict(list)
    for piece in cable.pieces:
        leaving[piece.start].append(piece)
    walks, waiting = [], [Walk([piece], -1, 1) for piece in leaving[0]]
    while waiting:
        here = waiting.pop(0)
        while len(leaving[here.pieces[-1].end]) == 1:
            here.pieces += leaving[here.pieces[-1].end]
        further = leaving[here.pieces[-1].end]
        here.children = len(further)
        waiting += [Walk([piece], len(walks), here.order + 1) for piece in further]
        walks.append(here)
    number = {}
    for sample, node in cable.node.items():
        number.setdefault(node, sample)
    rec = reconstruct(swc.encode(), file="cell.swc", cell="cell")
    row = {int(sample): index for index, sample in enumerate(rec.number)}
    return Walked(assumptions, cable, walks, number, solve(rec, assumptions), row)


def suffixes(assumptions):
    return ["", *(f"_{hz:g}Hz" for hz in assumptions.hz)]


def total(amounts):
    return float(sum(amounts, start=0.0))


def area(piece):
    return float(lateral_area(piece.r_start, piece.r_end, piece.h))


def rall_ratio(walked, index):
    """Return the summed d^(3/2) of the children's first samples over the parent's at a branch's end."""
    here = walked.walks[index]
    children = [each for each in walked.walks if each.parent == index]
    if not children:
        return nan
    return (
        total(float(2 * c.pieces[0].r_end) ** 1.5 for c in children) / float(2 * here.pieces[-1].r_end) ** 1.5
    )


def branches_by_definition(walked):
    """Return sample_end -> row of ``branches.csv``, the parent branch as the sample at which it ends."""
    rows = {}
    for index, here in enumerate(walked.walks):
        first, last = here.pieces[0], here.pieces[-1]
        parent = walked.walks[here.parent] if here.parent >= 0 else None
        length, L = total(p.h for p in here.pieces), total(walked.L(p) for p in here.pieces)
        local = [value for p in here.pieces for value in walked.lambdas(p)]
        row = {
            "parent_end": walked.number[parent.pieces[-1].end] if parent else None,
            "order": here.order,
            "domain": domain_name(last.kind),
            "sample_start": walked.number[first.start],
            "sample_end": walked.number[last.end],
            "children": here.children,
            "length_um": length,
            "diameter_first_um": float(2 * first.r_end),
            "diameter_mean_um": total(p.h * (p.r_start + p.r_end) for p in here.pieces) / length,
            "diameter_end_um": float(2 * last.r_end),
            "area_um2": total(map(area, here.pieces)),
            "L": L,
            "lambda_um": length / L,
            "lambda_least_um": min(local),
            "lambda_greatest_um": max(local),
            "G_inf_start_nS": walked.G_inf(2 * first.r_end, first.kind),
            "G_inf_end_nS": walked.G_inf(2 * last.r_end, last.kind),
            "rall_ratio_end": rall_ratio(walked, index),
            "path_end_um": walked.path(last.end),
            "X_end": walked.X(last.end),
        }
        for case, suffix in enumerate(suffixes(walked.assumptions)):
            row["R_in_end_MOhm" + suffix] = walked.value("R_in_MOhm", last.end, case)
            for way in ("attenuation_to_soma", "attenuation_from_soma"):
                row[f"{way}_end{suffix}"] = walked.value(way, last.end, case)
        rows[row["sample_end"]] = row
    return rows


def share_beyond_by_integration(walked, limit, steps=4000):
    """Return the share of dendritic membrane beyond an X by adding up thin slices of every piece."""
    beyond = whole = 0.0
    for p in walked.cable.pieces:
        if p.kind == AXON:
            continue
        c = walked.constants(p.kind)
        middle = (np.arange(steps) + 0.5) / steps
        r = float(p.r_start) + middle * float(p.r_end - p.r_start)
        slant = sqrt(1 + float((p.r_end - p.r_start) / p.h) ** 2)
        dX = np.sqrt(2e4 * c.R_i * slant * c.F / (1e8 * c.R_m * r)) * float(p.h) / steps
        X = walked.X(p.start) + np.cumsum(dX) - dX / 2
        slices = r / r.sum() * area(p)
        whole += slices.sum()
        beyond += slices[limit < X].sum()
    return beyond / whole if whole else nan


def cell_by_definition(walked, rec):
    """Return the row of ``cells.csv`` of a cell in one piece that hangs from its soma and was not vetted."""
    cable, pieces, assumptions = walked.cable, walked.cable.pieces, walked.assumptions
    dendrites = [p for p in pieces if p.kind != AXON]
    tips = [w.pieces[-1] for w in walked.walks if w.children == 0]
    dendritic = [p for p in tips if p.kind != AXON]
    farthest = max(dendritic or tips, key=lambda p: walked.path(p.end)).end if tips else 0
    X = [walked.X(p.end) for p in dendritic]
    ratios = [rall_ratio(walked, index) for index, w in enumerate(walked.walks) if w.children]
    stems = [w.pieces[0] for w in walked.walks if w.parent < 0]
    soma = float(cable.soma_area)
    row = {
        "sha256": rec.sha256,
        "grade": "sound",
        "findings_note": 0,
        "findings_doubtful": 0,
        "findings_unfit": 0,
        "samples": len(rec.number),
        "samples_analysed": len(cable.node),
        "branches": len(walked.walks),
        "stems": len(stems),
        "branch_points": sum(w.children > 1 for w in walked.walks) + (len(stems) > 1 and not soma),
        "tips": len(tips),
        "order_greatest": max([0, *(w.order for w in walked.walks)]),
        "soma_rule": cable.choices.soma_rule,
        "soma_samples": int((rec.kind == SOMA).sum()),
        "re_hung": False,
        "orphans_left_out": 0,
        "orphans_joined": 0,
        "orphans_um": 0.0,
        "soma_area_um2": soma,
        "length_um": total(p.h for p in pieces),
        "area_um2": total(map(area, pieces)) + soma,
        "G_inf_stems_nS": total(walked.G_inf(2 * p.r_end, p.kind) for p in stems),
        "trunk_diameter_um": total(float(2 * p.r_end) ** 1.5 for p in stems) ** (2 / 3),
        "rall_ratio_mean": mean(ratios) if ratios else nan,
        "rall_ratio_sd": stdev(ratios) if len(ratios) > 1 else nan,
        "X_tips_mean": mean(X) if X else nan,
        "X_tips_sd": stdev(X) if len(X) > 1 else nan,
        "X_tips_least": min(X, default=nan),
        "X_tips_greatest": max(X, default=nan),
        "path_greatest_um": max(float(path) for path in cable.path.values()),
        "farthest_tip_sample": walked.number[farthest],
        "farthest_tip_path_um": walked.path(farthest),
        "farthest_tip_X": walked.X(farthest),
    }
    by_domain = {"": pieces} | {f"_{name}": [p for p in pieces if p.kind == k] for k, name in NAMED.items()}
    by_domain["_other"] = [p for p in pieces if p.kind not in NAMED]
    for name, here in by_domain.items():
        if name:
            row[f"length{name}_um"] = total(p.h for p in here)
            row[f"area{name}_um2"] = total(map(area, here))
        local = [value for p in here for value in walked.lambdas(p)]
        row[f"lambda{name}_um"] = total(p.h for p in here) / total(map(walked.L, here)) if here else nan
        row[f"lambda{name}_least_um"] = min(local, default=nan)
        row[f"lambda{name}_greatest_um"] = max(local, default=nan)
    amounts = [(SOMA, soma), *((p.kind, area(p)) for p in pieces)]
    constants = [(walked.constants(kind), um2) for kind, um2 in amounts]
    row["capacitance_pF"] = total(c.F * c.C_m * um2 for c, um2 in constants) / 100  # 1 uF/cm2 = 0.01 pF/um2
    for limit in ("0.5", "1"):
        row[f"share_beyond_X{limit}"] = share_beyond_by_integration(walked, float(limit))
    for case, suffix in enumerate(suffixes(assumptions)):
        row[f"R_in_MOhm{suffix}"] = walked.value("R_in_MOhm", 0, case)
        for way in ("attenuation_to_soma", "attenuation_from_soma"):
            row[f"{way}_farthest{suffix}"] = walked.value(way, farthest, case)
            weighted = 0.0
            for p in (
                dendrites
            ):  # the start's part of a frustum's membrane goes with r_start, the end's with r_end
                share = float(p.r_start / (p.r_start + p.r_end))
                start, end = walked.value(way, p.start, case), walked.value(way, p.end, case)
                weighted += area(p) * (share * start + (1 - share) * end)
            membrane = total(map(area, dendrites))
            row[f"{way}_mean{suffix}"] = weighted / membrane if membrane else nan
    m: Membrane = assumptions.membrane
    return row | {
        "R_m_ohm_cm2": m.R_m_ohm_cm2,
        "R_i_ohm_cm": m.R_i_ohm_cm,
        "C_m_uF_cm2": m.C_m_uF_cm2,
        "spine_factor": m.spine_factor,
        "domains_differ": " ".join(domain_name(kind) for kind in assumptions.domains),
        "soma_shunt_nS": assumptions.soma_shunt_nS,
        "unit_um": 1.0,
        "branch_start": assumptions.branch_start,
        "axon": assumptions.axon,
        "orphans": "left out",
    }


def differing(got, expected, tolerance=1e-9, absolute=1e-12):
    """Return what differs between two rows; NaN equals NaN, words and whole numbers must be the same."""
    wrong = {}
    for name in got.keys() | expected.keys():
        have, want = got.get(name, "no such column"), expected.get(name, "no such column")
        numbers = isinstance(have, float | np.floating) and isinstance(want, float)
        close = numbers and (
            abs(have - want) <= max(absolute, tolerance * abs(want)) < inf or (have != have and want != want)
        )
        if not close and not (have == want and not numbers):
            wrong[name] = (have, want)
    return wrong
