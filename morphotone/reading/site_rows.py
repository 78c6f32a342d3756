"""Rows of a file of sites, checked column by column: the first thing wrong with a row turns it away."""

import math
import re
from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import Literal, NamedTuple

import numpy as np
import pandas as pd
from numpy.typing import NDArray

from morphotone.reading.diagnosis import LARGEST_WHOLE, quote

Floats = NDArray[np.float64]
Mask = NDArray[np.bool_]
Way = Literal["sample", "space", "branch"]
"""How a place is given."""

LARGEST_UM = 1e7  # ten metres: no cell is longer, and a double still tells nanometres apart
SHORTEST_MS, LONGEST_MS = 1e-6, 1e6  # as for synaptic currents in the assumptions

TEXTS = ("cell", "site", "group")
COORDINATES = ("x_um", "y_um", "z_um")
NEEDED: dict[Way, tuple[str, ...]] = {
    "sample": ("sample",),
    "space": COORDINATES,
    "branch": ("branch", "along_um"),
}
_COLUMNS: dict[Way, tuple[str, ...]] = {**NEEDED, "sample": ("sample", "fraction")}
_ONE_WAY = "sample with or without fraction, or x_um, y_um and z_um, or branch and along_um"


class Range(NamedTuple):
    """What a column of numbers may hold, bounds included."""

    least: float
    most: float
    expected: str


_LENGTH = Range(-LARGEST_UM, LARGEST_UM, f"a length in um within ±{LARGEST_UM:g}")
_TIME = Range(SHORTEST_MS, LONGEST_MS, f"a time from {SHORTEST_MS:g} to {LONGEST_MS:g} ms")
NUMBERS = {
    "sample": Range(0, LARGEST_WHOLE, "a sample's number in the file, whole and not negative"),
    "fraction": Range(0, 1, "a number from 0 (at the sample) to 1 (at its parent)"),
    **dict.fromkeys(COORDINATES, _LENGTH),
    "branch": Range(1, LARGEST_WHOLE, "a branch's number in branches.csv, whole and 1 or more"),
    "along_um": Range(0, LARGEST_UM, f"a path from the branch's start, 0 to {LARGEST_UM:g} um"),
    "g_peak_nS": Range(0, math.inf, "a conductance in nS, 0 or more"),
    "driving_force_mV": Range(-math.inf, math.inf, "a voltage in mV"),
    "rise_ms": _TIME,
    "decay_ms": _TIME,
}
WHOLE = ("sample", "branch")
KNOWN = (*TEXTS, *NUMBERS)

_NUMBER = r"[+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?"
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)", re.IGNORECASE)


class Verdict(NamedTuple):
    """Why a row is turned away."""

    reason: str
    sentence: str


@dataclass(frozen=True, eq=False)
class Rows:
    """The text of all rows, by column of the file, and the first thing found wrong with each."""

    text: pd.DataFrame
    verdicts: dict[int, Verdict] = field(default_factory=dict)

    def known(self, name: str) -> NDArray[np.object_]:
        """Return a known column without white space around its text; empty text where there is none."""
        if name not in self.text:
            return np.full(len(self.text), "", object)
        return self.text[name].str.strip().to_numpy(object)

    def turn_away(self, rows: Iterable[int], reason: str, read: str, expected: str) -> None:
        """Turn rows away, unless something else was wrong with them before."""
        for row in rows:
            self.verdicts.setdefault(int(row), Verdict(reason, f"read {read}, expected {expected}"))


def check_all(rows: Rows) -> tuple[NDArray[np.object_], dict[str, Floats]]:
    """Check names, places and numbers.

    Returns
    -------
    way : ndarray of object, shape (rows,)
        How each row's place is given; empty where it is given in none or several ways.
    numbers : dict of str to ndarray, shape (rows,)
        Every column of numbers; NaN where there is none.
    """
    for name, what in (
        ("cell", "the name of a reconstruction's file; fill it in"),
        ("site", "a label, unique in the cell; fill it in"),
    ):
        rows.turn_away(np.flatnonzero(rows.known(name) == ""), f"{name}_missing", f"no {name}", what)
    way = _ways(rows)
    numbers = {name: _numbers(rows, name, bounds) for name, bounds in NUMBERS.items()}
    _check_times(rows, numbers["rise_ms"], numbers["decay_ms"])
    return way, numbers


def _ways(rows: Rows) -> NDArray[np.object_]:
    """Return how each row's place is given, and turn away those that give it in no way, or in several."""
    filled = {name: rows.known(name) != "" for columns in _COLUMNS.values() for name in columns}
    tried = {way: _any(filled[name] for name in columns) for way, columns in _COLUMNS.items()}
    count = np.sum(list(tried.values()), axis=0)
    rows.turn_away(np.flatnonzero(count == 0), "place_missing", "no place", f"{_ONE_WAY}; give one")
    for row in np.flatnonzero(count > 1).tolist():
        given = [name for name, there in filled.items() if there[row]]
        rows.turn_away([row], "place_several", _listed(given), f"one way only: {_ONE_WAY}; empty the others")
    way = np.full(len(rows.text), "", object)
    for one, mask in tried.items():
        way[mask & (count == 1)] = one
        for name in NEEDED[one]:
            lacking = np.flatnonzero(mask & (count == 1) & ~filled[name])
            others = _listed([other for other in _COLUMNS[one] if other != name])
            rows.turn_away(lacking, "place_incomplete", f"no {name}", f"one beside {others}; fill it in")
    return way


def _numbers(rows: Rows, name: str, bounds: Range) -> Floats:
    """Return a column of numbers, and turn away the rows whose text is none or out of bounds."""
    text = pd.Series(rows.known(name), dtype=object)
    is_number = text.str.fullmatch(_NUMBER).to_numpy(bool)
    values = np.full(len(text), np.nan)
    values[is_number] = text[is_number].to_numpy(object).astype(np.float64)
    with np.errstate(invalid="ignore"):
        allowed = (values >= bounds.least) & (values <= bounds.most) & np.isfinite(values)
        if name in WHOLE:
            allowed &= np.rint(values) == values
    for row in np.flatnonzero((text != "").to_numpy() & ~allowed).tolist():
        shown = f"{name} {quote(text[row].encode())!r}"
        rows.turn_away([row], _reason(text[row], values[row]), shown, f"{bounds.expected}; mend the field")
    return np.where(allowed, values, np.nan)


def _reason(text: str, value: float) -> str:
    """Return the code for a field that is no number a column may hold."""
    if _NOT_FINITE.fullmatch(text) or math.isinf(value):
        return "not_finite"
    return "not_a_number" if math.isnan(value) else "out_of_range"


def _check_times(rows: Rows, rise: Floats, decay: Floats) -> None:
    """Turn away a rise time without decay time or the other way round, and one longer than it."""
    for name, other, alone in (
        ("rise_ms", "decay_ms", ~np.isnan(rise) & np.isnan(decay)),
        ("decay_ms", "rise_ms", np.isnan(rise) & ~np.isnan(decay)),
    ):
        read, expected = f"{name} without {other}", "both or neither; fill it in or empty the other"
        rows.turn_away(np.flatnonzero(alone), "time_missing", read, expected)
    for row in np.flatnonzero(rise > decay).tolist():
        read = f"rise_ms {rise[row]:g} with decay_ms {decay[row]:g}"
        rows.turn_away([row], "times_exchanged", read, "rise_ms no longer than decay_ms; exchange them")


def _any(masks: Iterable[Mask]) -> Mask:
    together: Mask = np.any(list(masks), axis=0)
    return together


def _listed(names: list[str]) -> str:
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} and {names[-1]}"
