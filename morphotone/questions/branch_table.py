"""One row per branch of a cell."""

import numpy as np

from morphotone.questions.branches import endless_conductance, rall_ratios
from morphotone.questions.cell import Cell
from morphotone.questions.columns import Columns, case_suffixes
from morphotone.reading.reconstruction import domain_name


def branch_table(cell: Cell) -> Columns:
    """Return the columns of ``branches.csv``, one row per branch; README explains them.

    Notes
    -----
    G∞ = (π/2)·d^(3/2)/sqrt(R_m·R_i), the input conductance of an endless cylinder, and the 3/2 power
    ratio at branch points: Rall 1959, Exp Neurol 1:491–527.
    """
    cable, branches, electrotonus = cell.cable, cell.branches, cell.electrotonus
    R_i, leak, _ = cell.membrane
    head, end = branches.head, branches.end
    length, L = branches.total(cable.length), branches.total(cell.L)
    least, greatest = cell.lambdas
    d_first, d_end = 2.0 * cable.r_end[head], 2.0 * cable.r_end[end]
    kinds = cable.kind[end].tolist()
    names = {kind: domain_name(kind) for kind in set(kinds)}
    columns: Columns = {
        "branch": np.arange(1, len(head) + 1),
        "parent_branch": branches.parent + 1,
        "order": branches.order,
        "domain": [names[kind] for kind in kinds],
        "sample_start": cell.rec.number[cable.sample[cable.parent[head]]],
        "sample_end": cell.rec.number[cable.sample[end]],
        "children": branches.children,
        "length_um": length,
        "diameter_first_um": d_first,
        "diameter_mean_um": branches.total(cable.length * (cable.r_start + cable.r_end)) / length,
        "diameter_end_um": d_end,
        "area_um2": branches.total(cell.area),
        "L": L,
        "lambda_um": length / L,
        "lambda_least_um": branches.least(least),
        "lambda_greatest_um": -branches.least(-greatest),
        "G_inf_start_nS": endless_conductance(d_first, R_i[head], leak[head]),
        "G_inf_end_nS": endless_conductance(d_end, R_i[end], leak[end]),
        "rall_ratio_end": rall_ratios(branches, d_first, d_end),
        "path_end_um": electrotonus.path_um[end, 0],
        "X_end": electrotonus.X[end, 0],
    }
    for case, suffix in enumerate(case_suffixes(electrotonus)):
        columns |= {
            f"R_in_end_MOhm{suffix}": cell.R_in_MOhm[1][:, case],
            f"attenuation_to_soma_end{suffix}": np.exp(electrotonus.log_attenuation_to_soma[end, case]),
            f"attenuation_from_soma_end{suffix}": np.exp(electrotonus.log_attenuation_from_soma[end, case]),
        }
    return columns
