"""One row per cell: size, input resistance, λ, distances of the tips, attenuation, and what was assumed."""

from collections.abc import Iterator, Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.electrotonus import Electrotonus
from morphotone.cable.forest import membrane_of
from morphotone.cable.frustum import electrotonic_lengths
from morphotone.cable.traced import AXON
from morphotone.questions.branches import Branches, endless_conductance, rall_ratios
from morphotone.questions.columns import case_suffixes
from morphotone.reading.reconstruction import Reconstruction, domain_name
from morphotone.reading.soma import SOMA
from morphotone.reading.vetting import SEVERITIES, Vetting
from morphotone.units import PICOFARAD_PER_UF_CM2_UM2, UM_PER_CM

Index = NDArray[np.int64]
Real = NDArray[np.float64]
Mask = NDArray[np.bool_]

# The domains with columns of their own; every other code is counted as "other".
_DOMAINS = {AXON: "axon", 3: "basal", 4: "apical"}
_FAR = (0.5, 1.0)  # X beyond which the share of dendritic membrane is told


def cell_row(
    rec: Reconstruction, vetting: Vetting, electrotonus: Electrotonus, branches: Branches
) -> dict[str, Any]:
    """Return the row of ``cells.csv`` that one cell gives, without its name; columns as in README.

    Parameters
    ----------
    rec : Reconstruction
        As analysed.
    vetting : Vetting
        Its grade and findings.
    electrotonus : Electrotonus
        By node, the cases of one assumptions object, the first at 0 Hz.
    branches : Branches
        Of the same nodes.

    Notes
    -----
    Dendritic membrane and dendritic tips are those outside soma and axon.
    """
    assumptions = electrotonus.cases[0].assumptions
    row: dict[str, Any] = {"sha256": rec.sha256, "grade": vetting.grade}
    for severity in SEVERITIES:
        row[f"findings_{severity}"] = sum(f.severity == severity for f in vetting.findings)
    row |= _counts(rec, electrotonus, branches)
    row |= _sizes(electrotonus, branches, assumptions)
    row |= _space_constants(electrotonus, assumptions)
    row |= _rall_conditions(electrotonus, branches, assumptions)
    row |= _distances(rec, electrotonus, branches)
    for case, suffix in enumerate(case_suffixes(electrotonus)):
        row |= {name + suffix: value for name, value in _attenuation(electrotonus, branches, case)}
    return row | _assumed(assumptions)


def _counts(rec: Reconstruction, electrotonus: Electrotonus, branches: Branches) -> dict[str, Any]:
    cable = electrotonus.cable
    traced = cable.traced
    return {
        "samples": len(rec.number),
        "samples_analysed": int((cable.node >= 0).sum()),
        "branches": len(branches.head),
        "stems": int((branches.parent < 0).sum()),
        "branch_points": int((branches.children > 1).sum()),
        "tips": len(branches.tips),
        "order_greatest": int(branches.order.max(initial=0)),
        "soma_rule": traced.soma.rule,
        "soma_samples": len(traced.soma.members),
        "re_hung": traced.re_hung,
        "orphans_left_out": traced.orphans,
        "orphans_joined": traced.joined,
        "orphans_um": traced.orphan_um,
    }


def _sizes(electrotonus: Electrotonus, branches: Branches, assumptions: Assumptions) -> dict[str, float]:
    """Return cable length (µm) and membrane area (µm2) by domain, and the membrane's capacitance (pF)."""
    cable = electrotonus.cable
    area = sum(cable.areas(), start=np.zeros(1))
    soma_area = cable.traced.soma.area
    capacity = membrane_of(np.append(cable.kind, SOMA), assumptions).capacity
    farads = float((np.append(area, soma_area) * capacity).sum()) * 1e6 * PICOFARAD_PER_UF_CM2_UM2
    sizes = {"soma_area_um2": soma_area, "length_um": float(cable.length.sum())}
    sizes["area_um2"] = float(area.sum()) + soma_area
    for name, here in _domains(cable.kind):
        sizes[f"length_{name}_um"] = float(cable.length[here].sum())
        sizes[f"area_{name}_um2"] = float(area[here].sum())
    return sizes | {"capacitance_pF": farads}


def _domains(kind: Index) -> Iterator[tuple[str, Mask]]:
    """Yield name and nodes of every domain that has columns; node 0 belongs to none."""
    frustum = np.arange(len(kind)) > 0
    for code, name in _DOMAINS.items():
        yield name, frustum & (kind == code)
    yield "other", frustum & ~np.isin(kind, list(_DOMAINS))


def _space_constants(electrotonus: Electrotonus, assumptions: Assumptions) -> dict[str, float]:
    """Return λ (µm): cable length over L, and the least and greatest local value, in all and by domain."""
    cable = electrotonus.cable
    R_i, leak, _ = membrane_of(cable.kind, assumptions)
    L = electrotonic_lengths(cable.r_start, cable.r_end, cable.length, R_i, leak)
    ends = [np.sqrt(UM_PER_CM * radius / (2.0 * R_i * leak)) for radius in (cable.r_start, cable.r_end)]
    least, greatest = np.minimum(*ends), np.maximum(*ends)
    columns = {}
    everywhere = np.arange(len(L)) > 0
    for name, here in [("", everywhere), *((f"_{name}", here) for name, here in _domains(cable.kind))]:
        found = bool(here.any())
        columns[f"lambda{name}_um"] = float(cable.length[here].sum() / L[here].sum()) if found else np.nan
        columns[f"lambda{name}_least_um"] = float(least[here].min()) if found else np.nan
        columns[f"lambda{name}_greatest_um"] = float(greatest[here].max()) if found else np.nan
    return columns


def _rall_conditions(
    electrotonus: Electrotonus, branches: Branches, assumptions: Assumptions
) -> dict[str, float]:
    """Return how far the tree is from one equivalent cylinder (Rall 1962, Ann N Y Acad Sci 96:1071–1092)."""
    cable = electrotonus.cable
    stems = branches.parent < 0
    d_first, d_end = 2.0 * cable.r_end[branches.head], 2.0 * cable.r_end[branches.end]
    membrane = membrane_of(cable.kind, assumptions)
    R_i, leak = (np.broadcast_to(values, cable.kind.shape)[branches.head] for values in membrane[:2])
    G_inf = endless_conductance(d_first, R_i, leak)
    ratios = rall_ratios(branches, d_first, d_end)
    ratios = ratios[~np.isnan(ratios)]
    tips = _dendritic(cable.kind[branches.end]) & (branches.children == 0)
    X = electrotonus.X[branches.end[tips], 0]
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


def _distances(rec: Reconstruction, electrotonus: Electrotonus, branches: Branches) -> dict[str, float]:
    """Return the greatest path, the farthest dendritic tip, and how much dendritic membrane lies far out."""
    cable, path = electrotonus.cable, electrotonus.path_um[:, 0]
    farthest = _farthest_tip(electrotonus, branches)
    shares = {
        f"share_beyond_X{limit:g}": share_beyond(electrotonus, limit, _dendritic(cable.kind))
        for limit in _FAR
    }
    return {
        "path_greatest_um": float(path.max()),
        "farthest_tip_sample": int(rec.number[cable.sample[farthest]]),
        "farthest_tip_path_um": float(path[farthest]),
        "farthest_tip_X": float(electrotonus.X[farthest, 0]),
        **shares,
    }


def share_beyond(electrotonus: Electrotonus, limit: float, chosen: Mask) -> float:
    """Return the share of the membrane of chosen frusta that lies beyond an X; NaN without membrane.

    Exact: along a linear taper X grows with the square root of the radius, and membrane with its square.
    """
    cable = electrotonus.cable
    area = np.where(chosen, sum(cable.areas(), start=np.zeros(1)), 0.0)
    if not area.any():
        return float("nan")
    far, near = electrotonus.X[:, 0], electrotonus.X[np.maximum(cable.parent, 0), 0]
    span = far - near
    reached = np.clip(np.divide(limit - near, span, out=(near < limit) * 1.0, where=span > 0), 0.0, 1.0)
    root_start, root_end = np.sqrt(cable.r_start), np.sqrt(cable.r_end)
    root = root_start + reached * (root_end - root_start)
    along = reached * (root + root_start) / (root_end + root_start)  # share of the axis up to the limit
    within = np.where(reached < 1.0, along * (root**2 + cable.r_start) / (cable.r_end + cable.r_start), 1.0)
    return float((area * (1.0 - within)).sum() / area.sum())


def _attenuation(electrotonus: Electrotonus, branches: Branches, case: int) -> Iterator[tuple[str, float]]:
    """Yield what is told of every case: R_in at the soma, attenuation at the farthest tip and on average."""
    cable = electrotonus.cable
    farthest = _farthest_tip(electrotonus, branches)
    to_soma = np.exp(electrotonus.log_attenuation_to_soma[:, case])
    from_soma = np.exp(electrotonus.log_attenuation_from_soma[:, case])
    yield "R_in_MOhm", float(np.abs(electrotonus.Z_in[0, case]))
    yield "attenuation_to_soma_farthest", float(to_soma[farthest])
    yield "attenuation_from_soma_farthest", float(from_soma[farthest])
    at_start, at_end = (np.where(_dendritic(cable.kind), part, 0.0) for part in cable.areas())
    area = at_end.copy()
    np.add.at(area, cable.parent[1:], at_start[1:])
    total = area.sum()
    for name, values in (("to", to_soma), ("from", from_soma)):
        yield f"attenuation_{name}_soma_mean", float((area * values).sum() / total) if total else np.nan


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


def _dendritic(kind: Index) -> Mask:
    return np.asarray((kind != SOMA) & (kind != AXON))


def _farthest_tip(electrotonus: Electrotonus, branches: Branches) -> int:
    """Return the node of the dendritic tip with the longest path; of all tips where no dendrite is."""
    tips = branches.end[branches.tips]
    if not len(tips):
        return 0
    dendritic = tips[_dendritic(electrotonus.cable.kind[tips])]
    tips = dendritic if len(dendritic) else tips
    return int(tips[np.argmax(electrotonus.path_um[tips, 0])])


def _mean(values: Real) -> float:
    return float(values.mean()) if len(values) else float("nan")


def _sd(values: Real) -> float:
    return float(values.std(ddof=1)) if len(values) > 1 else float("nan")
