"""One row per cell: size, input resistance, λ, distances of the tips, attenuation, and what was assumed."""

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.forest import membrane_of
from morphotone.cable.traced import AXON
from morphotone.questions.branches import endless_conductance, rall_ratios
from morphotone.questions.cell import Cell
from morphotone.questions.columns import case_suffixes
from morphotone.questions.time_axis import time_row
from morphotone.reading.reconstruction import domain_name
from morphotone.reading.soma import SOMA
from morphotone.reading.vetting import SEVERITIES
from morphotone.units import PICOFARAD_PER_F_CM2_UM2

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]

# The domains with columns of their own; every other code is counted as "other".
_DOMAINS = {AXON: "axon", 3: "basal", 4: "apical"}
_DOMAIN_NAMES = (*_DOMAINS.values(), "other")
_FAR = (0.5, 1.0)  # X beyond which the share of dendritic membrane is told


def cell_row(cell: Cell, time_constants: int = 0) -> dict[str, Any]:
    """Return the row of ``cells.csv`` that one cell gives, without its name; README explains the columns.

    Dendritic membrane and dendritic tips are those outside soma and axon.

    Parameters
    ----------
    cell : Cell
        What is known of it.
    time_constants : int
        How many time constants have columns, whether or not the cell has as many.
    """
    row: dict[str, Any] = {"sha256": cell.rec.sha256, "grade": cell.vetting.grade}
    for severity in SEVERITIES:
        row[f"findings_{severity}"] = sum(f.severity == severity for f in cell.vetting.findings)
    domain = _domain_of_nodes(cell.cable.kind)
    row |= _counts(cell) | _sizes(cell, domain) | _space_constants(cell, domain)
    row |= _rall_conditions(cell) | _distances(cell)
    for case, suffix in enumerate(case_suffixes(cell.electrotonus)):
        row |= {name + suffix: value for name, value in _attenuation(cell, case)}
    row |= time_row(cell.time, cell.farthest_tip, time_constants)
    return row | _assumed(cell.assumptions)


def _counts(cell: Cell) -> dict[str, Any]:
    branches, traced = cell.branches, cell.cable.traced
    stems = int((branches.parent < 0).sum())
    root_branches = not len(traced.soma.members) and stems > 1
    return {
        "samples": len(cell.rec.number),
        "samples_analysed": int(np.count_nonzero(cell.cable.node >= 0)),
        "branches": len(branches.head),
        "stems": stems,
        "branch_points": int((branches.children > 1).sum()) + int(root_branches),
        "tips": len(branches.tips),
        "order_greatest": int(branches.order.max(initial=0)),
        "soma_rule": traced.soma.rule,
        "soma_samples": len(traced.soma.members),
        "re_hung": traced.re_hung,
        "orphans_left_out": traced.orphans,
        "orphans_joined": traced.joined,
        "orphans_um": traced.orphan_um,
    }


def _sizes(cell: Cell, domain: Index) -> dict[str, float]:
    """Return cable length (µm) and membrane area (µm2) by domain, and the membrane's capacitance (pF)."""
    soma_area = cell.cable.traced.soma.area
    soma_capacity = float(membrane_of(np.array([SOMA]), cell.assumptions).capacity[0])
    farads = float((cell.area * cell.membrane.capacity).sum()) + soma_area * soma_capacity
    sizes = {
        "soma_area_um2": soma_area,
        "length_um": float(cell.cable.length.sum()),
        "area_um2": float(cell.area.sum()) + soma_area,
    }
    lengths, areas = (_by_domain(domain, values) for values in (cell.cable.length, cell.area))
    for name, length, area in zip(_DOMAIN_NAMES, lengths, areas, strict=True):
        sizes |= {f"length_{name}_um": float(length), f"area_{name}_um2": float(area)}
    return sizes | {"capacitance_pF": farads * PICOFARAD_PER_F_CM2_UM2}


def _domain_of_nodes(kind: Index) -> Index:
    """Return which of the domains with columns each node is in; node 0 is in none and stands behind all."""
    domain = np.full(len(kind), len(_DOMAINS))  # other
    for which, code in enumerate(_DOMAINS):
        domain[kind == code] = which
    domain[0] = len(_DOMAIN_NAMES)
    return domain


def _by_domain(domain: Index, amount: Real) -> Real:
    """Return the sum of an amount per frustum in each domain."""
    return np.asarray(np.bincount(domain, amount, len(_DOMAIN_NAMES) + 1)[:-1], np.float64)


def _space_constants(cell: Cell, domain: Index) -> dict[str, float]:
    """Return λ (µm): cable length over L, and the least and greatest local value, in all and by domain."""
    least, greatest = np.full(len(_DOMAIN_NAMES) + 1, np.inf), np.zeros(len(_DOMAIN_NAMES) + 1)
    np.minimum.at(least, domain, cell.lambdas[0])
    np.maximum.at(greatest, domain, cell.lambdas[1])
    lengths, Ls = (_by_domain(domain, values) for values in (cell.cable.length, cell.L))
    found = np.bincount(domain, minlength=len(least))[:-1] > 0
    columns = {}
    each = zip(_DOMAIN_NAMES, np.eye(len(_DOMAIN_NAMES), dtype=bool), strict=True)
    for name, which in [("", found), *((f"_{name}", mask) for name, mask in each)]:
        there = bool(found[which].any())
        ratio = lengths[which].sum() / Ls[which].sum() if there else np.nan
        columns[f"lambda{name}_um"] = float(ratio)
        columns[f"lambda{name}_least_um"] = float(least[:-1][which].min()) if there else np.nan
        columns[f"lambda{name}_greatest_um"] = float(greatest[:-1][which].max()) if there else np.nan
    return columns


def _rall_conditions(cell: Cell) -> dict[str, float]:
    """Return how far the tree is from one equivalent cylinder (Rall 1962, Ann N Y Acad Sci 96:1071–1092)."""
    cable, branches = cell.cable, cell.branches
    stems = branches.parent < 0
    d_first, d_end = 2.0 * cable.r_end[branches.head], 2.0 * cable.r_end[branches.end]
    heads = branches.head
    G_inf = endless_conductance(d_first, cell.membrane.R_i[heads], cell.membrane.leak[heads])
    ratios = rall_ratios(branches, d_first, d_end)
    ratios = ratios[~np.isnan(ratios)]
    tips = branches.end[branches.tips]
    X = cell.electrotonus.X[tips[cell.dendritic[tips]], 0]
    return {
        "G_inf_stems_nS": float(G_inf[stems].sum()),
        "trunk_diameter_um": float((d_first[stems] ** 1.5).sum() ** (2.0 / 3.0)),
        "rall_ratio_mean": _mean(ratios),
        "rall_ratio_sd": _sd(ratios),
        "X_tips_mean": _mean(X),
        "X_tips_sd": _sd(X),
        "X_tips_least": float(X.min()) if len(X) else np.nan,
        "X_tips_greatest": float(X.max()) if len(X) else np.nan,
    }


def _distances(cell: Cell) -> dict[str, float]:
    """Return the greatest path, the farthest dendritic tip, and how much dendritic membrane lies far out."""
    path, farthest = cell.electrotonus.path_um[:, 0], cell.farthest_tip
    return {
        "path_greatest_um": float(path.max()),
        "farthest_tip_sample": int(cell.rec.number[cell.cable.sample[farthest]]),
        "farthest_tip_path_um": float(path[farthest]),
        "farthest_tip_X": float(cell.electrotonus.X[farthest, 0]),
        **{f"share_beyond_X{limit:g}": share_beyond(cell, limit, cell.dendritic) for limit in _FAR},
    }


def share_beyond(cell: Cell, limit: float, chosen: Mask) -> float:
    """Return the share of the membrane of chosen frusta (by node) beyond an X; NaN without membrane.

    Exact: along a linear taper X grows with the square root of the radius, and membrane with its square.
    """
    cable = cell.cable
    area = np.where(chosen, cell.area, 0.0)
    if not area.any():
        return float("nan")
    X = cell.electrotonus.X[:, 0]
    beyond = limit < X
    crossing = np.flatnonzero(beyond & (X.take(cable.parent) < limit))
    outside = area * beyond
    outside[crossing] *= 1.0 - _share_within(cell, limit, crossing)
    return float(outside.sum() / area.sum())


def _share_within(cell: Cell, limit: float, which: Index) -> Real:
    """Return the share of the membrane of some frusta on the soma's side of an X that they cross."""
    cable, X = cell.cable, cell.electrotonus.X[:, 0]
    near, far = X[cable.parent[which]], X[which]
    start, end = cable.r_start[which], cable.r_end[which]
    reached = (limit - near) / (far - near)
    root = np.sqrt(start) + reached * (np.sqrt(end) - np.sqrt(start))
    along = reached * (root + np.sqrt(start)) / (np.sqrt(end) + np.sqrt(start))  # share of the axis
    share: Real = along * (root**2 + start) / (end + start)
    return share


def _attenuation(cell: Cell, case: int) -> Iterator[tuple[str, float]]:
    """Yield what is told of every case: R_in at the soma, attenuation at the farthest tip and on average."""
    electrotonus, farthest = cell.electrotonus, cell.farthest_tip
    attenuation = {
        "to": np.exp(electrotonus.log_attenuation_to_soma[:, case]),
        "from": np.exp(electrotonus.log_attenuation_from_soma[:, case]),
    }
    yield "R_in_MOhm", float(cell.R_in_MOhm[0][case])
    for direction, values in attenuation.items():
        yield f"attenuation_{direction}_soma_farthest", float(values[farthest])
    membrane = cell.dendritic_membrane
    total = membrane.sum()
    for direction, values in attenuation.items():
        whole = (membrane * values).sum()
        yield f"attenuation_{direction}_soma_mean", float(whole / total) if total else np.nan


def _assumed(assumptions: Assumptions) -> dict[str, Any]:
    """Return the choices a reader of the row must know; assumptions.toml and run.json have all."""
    membrane: Mapping[str, float] = assumptions.membrane.to_dict()
    return {
        **membrane,
        "domains_differ": " ".join(domain_name(code) for code in assumptions.domains),
        "soma_shunt_nS": assumptions.soma_shunt_nS,
        "unit_um": assumptions.unit_um,
        "branch_start": assumptions.branch_start,
        "axon": assumptions.axon,
        "orphans": assumptions.orphans,
    }


def _mean(values: Real) -> float:
    return float(values.mean()) if len(values) else float("nan")


def _sd(values: Real) -> float:
    return float(values.std(ddof=1)) if len(values) > 1 else float("nan")
