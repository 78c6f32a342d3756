"""What a run assumed, row by row with range and source, and what its results owe to it, in words."""

import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from morphotone.cable.assumptions import Assumptions, table_name
from morphotone.cable.kinds import Number
from morphotone.cable.ranges import RANGES, PublishedRange, range_of
from morphotone.cable.settings import LAYOUT, MEMBRANE, VETTING, Setting
from morphotone.questions.outliers import rounded

_SIGNS = {"ohm cm2": "Ω cm²", "ohm cm": "Ω cm", "uF/cm2": "µF/cm²", "um2": "µm²", "um": "µm"}
_UNIT = re.compile(rf"(?<!\w)({'|'.join(_SIGNS)})(?!\w)")
_RALL = "Rall 1959, Exp Neurol 1:491–527"


@dataclass(frozen=True)
class Assumed:
    """One assumption.

    Attributes
    ----------
    where, key : str
        Table and key of the assumptions file.
    value, unit : str
        What was assumed.
    is_default : bool
        Whether that is the program's default.
    meaning, reason : str
        What it is, and why the default is what it is.
    ranges : tuple of str
        Published or usual ranges, each with its source.
    """

    where: str
    key: str
    value: str
    unit: str
    is_default: bool
    meaning: str
    reason: str
    ranges: tuple[str, ...]


@dataclass(frozen=True)
class Doubt:
    """What nobody measured, and what hangs on it."""

    what: str  #: the quantity
    law: str  #: how results go with it
    span: str  #: what that makes of its range, for the values assumed; empty where it has none
    source: str  #: where the law and the range come from


def assumed(assumptions: Assumptions) -> list[Assumed]:
    """Return the assumptions but the limits of the vetting, in the order of the file."""
    defaults = Assumptions().to_dict()
    tree = assumptions.to_dict()
    rows = [_row("membrane", setting, tree["membrane"], defaults["membrane"]) for setting in MEMBRANE]
    for code in assumptions.domains:
        name = table_name(code)
        own = tree["membrane"][name]
        rows += [
            _row(f"membrane.{name}", setting, own, defaults["membrane"], name)
            for setting in MEMBRANE
            if own[setting.key] != tree["membrane"][setting.key]
        ]
    return rows + [
        _row(setting.table, setting, tree[setting.table], defaults[setting.table]) for setting in LAYOUT
    ]


def limits(assumptions: Assumptions) -> list[Assumed]:
    """Return the limits of the vetting."""
    tree, defaults = assumptions.to_dict()["vetting"], Assumptions().to_dict()["vetting"]
    return [_row("vetting", setting, tree, defaults) for setting in VETTING]


def _row(
    where: str, setting: Setting, given: dict[str, Any], defaults: dict[str, Any], domain: str = ""
) -> Assumed:
    value = given.get(setting.key)
    unit = setting.kind.unit if isinstance(setting.kind, Number) else "Hz" if setting.key == "hz" else ""
    return Assumed(
        where=where,
        key=setting.key,
        value=_written(value),
        unit=with_signs(unit) if value is not None else "",
        is_default=value == defaults.get(setting.key),
        meaning=with_signs(setting.meaning),
        reason=with_signs(setting.reason),
        ranges=tuple(_ranges(setting, domain)),
    )


def _written(value: object) -> str:
    if value is None:
        return "not set"
    if isinstance(value, list | tuple):
        return ", ".join(map(_written, value)) or "none"
    return f"{value:.12g}" if isinstance(value, float) else str(value)


def _ranges(setting: Setting, domain: str) -> Iterator[str]:
    names = (setting.field, f"{setting.field}_xy", f"{setting.field}_z")
    for name in names:
        if name in RANGES:
            known = range_of(name, domain)
            axes = name.removeprefix(setting.field).replace("_xy", " in x and y").replace("_z", " in z")
            yield f"{known.standing}{axes}: {with_signs(known.in_words)}"


def with_signs(text: str) -> str:
    """Return a text of ours with the signs of units, Ω cm² for ohm cm2; names such as unit_um stay."""
    return _UNIT.sub(lambda found: _SIGNS[found[0]], text)


def doubts(assumptions: Assumptions, R_in_MOhm: float) -> list[Doubt]:
    """Return what nobody measured and how the results go with it, worked out for the values assumed.

    Parameters
    ----------
    assumptions : Assumptions
        Those of the run.
    R_in_MOhm : float
        The median input resistance of the cells, MΩ; NaN where there is none.
    """
    membrane = assumptions.membrane
    R_m, R_i, C_m = (RANGES[name] for name in ("R_m_ohm_cm2", "R_i_ohm_cm", "C_m_uF_cm2"))
    return [
        Doubt(
            "R_m, the specific membrane resistance",
            "λ goes with √R_m and X with 1/√R_m, exactly, when R_m is multiplied by one factor everywhere. "
            "R_in goes with R_m in a compact cell and with √R_m in a long cable. Attenuation follows X.",
            _at_ends(R_m, membrane.R_m_ohm_cm2, 0.5),
            _from(R_m),
        ),
        Doubt(
            "R_i, the axial resistivity",
            "λ goes with 1/√R_i and X with √R_i, exactly, when R_i is multiplied by one factor everywhere. "
            "R_in of a compact cell hardly notices, that of a long cable goes with √R_i.",
            _at_ends(R_i, membrane.R_i_ohm_cm, -0.5),
            _from(R_i),
        ),
        Doubt(
            "Diameters",
            "λ goes with √d. R_in goes with 1/d in a compact cell and with d^(−3/2) in a long cable. An "
            "error of one resolution width of light, 0.2 µm, is half the diameter of a process of 0.4 µm.",
            _at_ends(RANGES["diameter_factor"], 1.0, 0.5, "that stands for diameters as traced"),
            _from(RANGES["diameter_factor"]),
        ),
        Doubt(
            "Spines that were not traced",
            "A factor F on the membrane stands for R_m/F and C_m·F: λ goes with 1/√F, X with √F.",
            _at_ends(RANGES["spine_factor"], membrane.spine_factor, -0.5),
            f"{_source(RANGES['spine_factor'])}; F after Holmes 1989 (from memory)",
        ),
        Doubt(
            "Shrinkage of the tissue",
            "X goes with length, λ stays: a length that shrank to a part of itself gives that part of its X.",
            "In a section that kept a quarter of its thickness, paths straight through it should be four "
            "times as long, and their X with them.",
            _source(_RANGE_Z),
        ),
        Doubt(
            "C_m, the specific membrane capacitance",
            "Nothing at 0 Hz. Time constants and delays go with it. At frequencies far above 1/(2π R_m C_m) "
            "the decay length tends to √(d/(4π f R_i C_m)), in which R_m has no part.",
            _time_constants(C_m, membrane.C_m_uF_cm2, membrane.R_m_ohm_cm2),
            f"the cable equation with 1/R_m + 2πi f C_m for the membrane; range: {_source(C_m)}",
        ),
        Doubt(
            "A leak at the soma, such as an electrode's",
            "It adds to the input conductance of the cell: 1/R_in grows by it, exactly. Attenuation toward "
            "the soma grows, attenuation from the soma stays.",
            _leak(R_in_MOhm, assumptions.soma_shunt_nS),
            f"Ohm's law; range: {_source(RANGES['soma_shunt_nS'])}",
        ),
    ]


_RANGE_Z = RANGES["shrinkage_z"]


def _at_ends(known: PublishedRange, value: float, power: float, given: str = "assumed") -> str:
    """Say what λ and X become at the ends of a range, when λ goes with a power of the quantity."""
    unit = f" {with_signs(known.unit)}" if known.unit else ""
    low, high = ((end / value) ** power for end in (known.low, known.high))
    return (
        f"At {rounded(known.low, 6)} and at {rounded(known.high, 6)}{unit}, the ends of the {known.standing} "
        f"range, instead of the {rounded(value, 6)} {given}: λ {_times(low)} and {_times(high)} times, X "
        f"{_times(1 / low)} and {_times(1 / high)} times what stands here."
    )


def _time_constants(known: PublishedRange, C_m: float, R_m: float) -> str:
    tau_ms = R_m * C_m / 1e3  # ohm cm2 · µF/cm2 = µs
    low, high = (tau_ms * end / C_m for end in (known.low, known.high))
    return (
        f"R_m·C_m is {rounded(tau_ms, 3)} ms as assumed, {rounded(low, 3)} and {rounded(high, 3)} ms at the "
        f"ends of the {known.standing} range, {known.low:g} and {known.high:g} {with_signs(known.unit)}."
    )


def _leak(R_in_MOhm: float, shunt_nS: float) -> str:
    if not R_in_MOhm > 0 or shunt_nS:
        return ""
    high = RANGES["soma_shunt_nS"].high
    leaky = 1 / (1 / R_in_MOhm + high * 1e-3)
    return (
        f"A leak of {high:g} nS, the most that is plausible, would make {rounded(leaky, 3)} MΩ of the median "
        f"R_in, {rounded(R_in_MOhm, 3)} MΩ."
    )


def _times(factor: float) -> str:
    return rounded(factor, 2)


def _from(known: PublishedRange) -> str:
    return f"λ = √(R_m d/(4 R_i)), {_RALL}; range: {_source(known)}"


def _source(known: PublishedRange) -> str:
    return f"{with_signs(known.source)} ({known.provenance})"


def outside(assumptions: Assumptions) -> Sequence[str]:
    """Return a sentence per value outside its range."""
    return [with_signs(sentence) for sentence in assumptions.warnings]
