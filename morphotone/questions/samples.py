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
    x, y, z = (traced.position - centre).T
    straight = np.sqrt(x**2 + y**2 + z**2)
    straight[left_out] = np.nan
    number = _blank(branches.of_node[node] + 1, left_out)
    order = _blank(np.append(branches.order, 0)[branches.of_node[node]], left_out)
    columns: Columns = {
        "sample": rec.number,
        "domain": _domain_names(rec.kind),
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
    if (np.diff(rec.line) > 0).all():
        return columns
    in_file = np.argsort(rec.line)
    return {name: values[in_file] for name, values in columns.items()}


def _domain_names(kind: NDArray[np.int64]) -> NDArray[np.object_]:
    """Return the name of each sample's domain; it is looked up once for each run of samples of one type."""
    starts = np.flatnonzero(np.diff(kind, prepend=~kind[0]))
    names = np.array([domain_name(code) for code in kind[starts].tolist()], object)
    return np.repeat(names, np.diff(starts, append=len(kind)))


def _blank(whole: NDArray[np.int64], where: NDArray[np.bool_]) -> NDArray[Any]:
    """Return whole numbers with None at some places."""
    if not where.any():
        return whole
    blanked = whole.astype(object)
    blanked[where] = None
    return blanked
