"""Delays, time constants and transients as columns, where a run asks for them."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from morphotone.cable.delays import Delays, delays_in
from morphotone.cable.forest import Forest
from morphotone.cable.modes import MOST, Modes, time_constants
from morphotone.cable.synaptic import SynapticCurrent
from morphotone.cable.transients import Responses, Transients, transients
from morphotone.errors import AssumptionError
from morphotone.questions.columns import Columns


@dataclass(frozen=True)
class TimeRequest:
    """What of the time axis is asked for; each costs a run that asks, and no other.

    Attributes
    ----------
    delays : bool
        Delays of every sample.
    time_constants : int
        How many of the cell's own time constants; 0 for none.
    current : SynapticCurrent or None
        The brief synaptic current whose responses are wanted.
    """

    delays: bool = False
    time_constants: int = 0
    current: SynapticCurrent | None = None

    def __post_init__(self) -> None:
        if not 0 <= self.time_constants <= MOST:
            raise AssumptionError(
                f"read {self.time_constants} time constants, expected 1 to {MOST}, or 0 for none"
            )

    def to_dict(self) -> dict[str, Any]:
        """Return the request as JSON types."""
        current = self.current
        return {
            "delays": self.delays,
            "time_constants": self.time_constants,
            "transient_ms": [current.rise_ms, current.decay_ms] if current else None,
        }


@dataclass(frozen=True, eq=False)
class TimeAxis:
    """What of the time axis is known of one cell; None where it was not asked for."""

    delays: Delays | None = None
    modes: Modes | None = None
    transients: Transients | None = None


def time_axes(forest: Forest, farthest: list[int], request: TimeRequest, everywhere: bool) -> list[TimeAxis]:
    """Return what is asked for of many cells, each exactly as if it were alone.

    Parameters
    ----------
    forest : Forest
        The cells under one choice of assumptions, of which membrane and shunt are used.
    farthest : list of int
        Per cell the node of its farthest tip.
    request : TimeRequest
        What is asked for.
    everywhere : bool
        Transients at every node, instead of only at the soma and the farthest tip.
    """
    cells, assumptions = [cables[0] for cables in forest.cells], forest.many[0]
    nothing = [None] * len(cells)
    lags = delays_in(forest) if request.delays else nothing
    modes = time_constants(cells, assumptions, request.time_constants) if request.time_constants else nothing
    brief: list[Transients] | list[None] = nothing
    if request.current is not None:
        sites = None if everywhere else [np.unique([0, tip]) for tip in farthest]
        brief = transients(cells, assumptions, request.current, sites)
    return [TimeAxis(*one) for one in zip(lags, modes, brief, strict=True)]


def time_row(axis: TimeAxis, farthest: int, time_constants: int) -> dict[str, Any]:
    """Return what the time axis adds to a cell's row; README explains the columns."""
    row: dict[str, Any] = {}
    if axis.delays is not None:
        at_soma = axis.delays.at(np.zeros(1, np.int64))
        row |= {
            "delay_total_farthest_ms": float(axis.delays.total_ms[farthest]),
            "delay_total_mean_ms": axis.delays.membrane_mean_ms(),
            "delay_total_greatest_ms": axis.delays.greatest_ms(),
            "delay_local_soma_ms": float(at_soma.local_ms[0]),
            "C_in_pF": float(at_soma.C_in_pF[0]),
        }
    if axis.modes is not None:
        row |= _modes_row(axis.modes, time_constants)
    if axis.transients is not None:
        at = np.searchsorted(axis.transients.nodes, [0, farthest])
        row |= _response_row(axis.transients.at_soma, int(at[0]), "_soma_from_soma")
        row |= _response_row(axis.transients.at_soma, int(at[1]), "_soma_from_farthest")
        row |= _response_row(axis.transients.at_site, int(at[1]), "_farthest_from_farthest")
    return row


def time_columns(axis: TimeAxis) -> Columns:
    """Return what the time axis adds to the table by sample; README explains the columns."""
    columns: Columns = {}
    if axis.delays is not None:
        by_sample = axis.delays.by_sample()
        for name in ("total", "local", "propagation", "net"):
            columns[f"delay_{name}_ms"] = getattr(by_sample, f"{name}_ms")
    if axis.transients is not None:
        brief = axis.transients.by_sample()
        columns |= _shape(brief.at_site, "_site") | _shape(brief.at_soma, "_soma")
    return columns


def _modes_row(modes: Modes, count: int) -> dict[str, Any]:
    """Return time constants, the sum of modes behind each, their amplitudes at the soma, and L by peeling."""
    row: dict[str, Any] = {}
    for k in range(count):
        there = k < len(modes.tau_ms)
        row[f"tau{k}_ms"] = float(modes.tau_ms[k]) if there else np.nan
        row[f"tau{k}_modes"] = int(modes.multiplicity[k]) if there else 0
        row[f"tau{k}_amplitude_MOhm_per_ms"] = float(modes.amplitude_soma[k]) if there else np.nan
    return row | {
        "L_by_peeling": modes.peeled.L,
        "peeling_conditions_broken": len(modes.peeled.warnings),
        "peeling_warnings": " | ".join(modes.peeled.warnings),
    }


def _shape(responses: Responses, where: str) -> Columns:
    return {
        f"peak{where}_mV_per_pA": responses.peak_mV_per_pA,
        f"peak{where}_mV_per_pC": responses.peak_mV_per_pC,
        f"time_to_peak{where}_ms": responses.time_to_peak_ms,
        f"rise{where}_ms": responses.rise_ms,
        f"half_width{where}_ms": responses.half_width_ms,
        f"area{where}_mV_ms_per_pA": responses.area_mV_ms_per_pA,
        f"error{where}": responses.error,
    }


def _response_row(responses: Responses, site: int, where: str) -> dict[str, float]:
    return {name: float(values[site]) for name, values in _shape(responses, where).items()}
