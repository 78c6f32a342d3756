"""One row per sample of a cell: where it is, and how it is coupled to the soma."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from morphotone.questions.cell import Cell
from morphotone.questions.columns import Columns, case_suffixes
from morphotone.questions.time_axis import time_columns
from morphotone.reading.reconstruction import domain_name


def sample_table(cell: Cell) -> Columns:
    """Return the columns of a file of ``samples/``, one row per sample in file order; README explains them.

    Samples that are not analysed have empty cells after their diameter.
    """
    rec, branches, by_sample = cell.rec, cell.branches, cell.electrotonus.by_sample()
    traced, node = cell.cable.traced, cell.cable.node
    left_out = node < 0
    centre = traced.soma.centre if len(traced.soma.members) else traced.position[traced.root]
    straight = np.linalg.norm(traced.position - centre, axis=1)
    straight[left_out] = np.nan
    names = {kind: domain_name(kind) for kind in np.unique(rec.kind).tolist()}
    number = _blank(branches.of_node[node] + 1, left_out)
    order = _blank(np.append(branches.order, 0)[branches.of_node[node]], left_out)
    columns: Columns = {
        "sample": rec.number,
        "domain": [names[kind] for kind in rec.kind.tolist()],
        "diameter_um": 2.0 * traced.radius,
        "branch": number,
        "order": order,
        "path_um": by_sample.path_um[:, 0],
        "straight_um": straight,
        "lambda_um": by_sample.lambda_um[:, 0],
        "X": by_sample.X[:, 0],
    }
    for case, suffix in enumerate(case_suffixes(by_sample)):
        to_soma, from_soma = (
            by_sample.log_attenuation_to_soma[:, case],
            by_sample.log_attenuation_from_soma[:, case],
        )
        columns |= {
            f"R_in_MOhm{suffix}": by_sample.R_in_MOhm[:, case],
            f"R_transfer_MOhm{suffix}": by_sample.R_transfer_MOhm[:, case],
            f"attenuation_to_soma{suffix}": np.exp(to_soma),
            f"attenuation_from_soma{suffix}": np.exp(from_soma),
            f"log_attenuation_to_soma{suffix}": to_soma,
            f"log_attenuation_from_soma{suffix}": from_soma,
        }
        if not suffix:
            columns["charge_to_soma"] = np.exp(-from_soma)
    columns |= time_columns(cell.time)
    in_file = np.argsort(rec.line, kind="stable")
    return {name: np.asarray(values)[in_file] for name, values in columns.items()}


def _blank(whole: NDArray[np.int64], where: NDArray[np.bool_]) -> NDArray[Any]:
    """Return whole numbers with None at some places."""
    if not where.any():
        return whole
    blanked = whole.astype(object)
    blanked[where] = None
    return blanked
