"""Columns as a journal titles them: symbol or words, what of it, and the unit: `R_in_MOhm` is R_in (MΩ).

A trade symbol stands between ‹ and ›, so that LaTeX can set it in math: ‹R_in› (MΩ). `plain` leaves them out.
"""

import re

#: Ends of column names and the units they stand for, the longest first.
_UNITS = {
    "MOhm_per_ms": "MΩ/ms",
    "mV_ms_per_pA": "mV ms/pA",
    "mV_per_pA": "mV/pA",
    "mV_per_pC": "mV/pC",
    "uF_cm2": "µF/cm²",
    "ohm_cm2": "Ω cm²",
    "ohm_cm": "Ω cm",
    "MOhm": "MΩ",
    "um2": "µm²",
    "um": "µm",
    "nS": "nS",
    "pF": "pF",
    "ms": "ms",
    "mV": "mV",
}
#: What remains of a column's name without frequency and unit.
_WORDS = {
    "R_in": "‹R_in›",
    "Z_in": "|‹Z_in›|",
    "R_m": "‹R_m›",
    "R_i": "‹R_i›",
    "C_m": "‹C_m›",
    "C_in": "‹C_in›",
    "G_inf_stems": "‹G_∞› of the stems",
    "L_by_peeling": "‹L› by peeling",
    "X_tips_mean": "‹X› of the tips, mean",
    "X_tips_sd": "‹X› of the tips, SD",
    "X_tips_least": "‹X› of the tips, least",
    "X_tips_greatest": "‹X› of the tips, greatest",
    "area": "Membrane area",
    "attenuation_to_soma_farthest": "Attenuation toward the soma, farthest tip",
    "attenuation_from_soma_farthest": "Attenuation from the soma, farthest tip",
    "attenuation_to_soma_mean": "Attenuation toward the soma, mean",
    "attenuation_from_soma_mean": "Attenuation from the soma, mean",
    "delay_total_farthest": "Total delay, farthest tip",
    "delay_total_mean": "Total delay, mean",
    "delay_total_greatest": "Total delay, greatest",
    "delay_local_soma": "Local delay at the soma",
    "farthest_tip_X": "‹X› of the farthest tip",
    "farthest_tip_path": "Path to the farthest tip",
    "lambda": "‹λ›",
    "length": "Cable length",
    "order_greatest": "Greatest branch order",
    "orphans": "Cable of orphans",
    "path_greatest": "Longest path",
    "rall_ratio_mean": "Rall's ratio, mean",
    "rall_ratio_sd": "Rall's ratio, SD",
    "share_beyond_X0.5": "Share of membrane beyond ‹X› = 0.5",
    "share_beyond_X1": "Share of membrane beyond ‹X› = 1",
    "trunk_diameter": "Diameter of the equivalent trunk",
}
#: For the notes below a table, by the column's name without frequency.
_MEANINGS = {
    "length_um": "cable length and membrane area: all that was analysed",
    "path_greatest_um": "longest path: along the cable from the soma to a dendritic tip",
    "R_in_MOhm": "‹R_in›: input resistance at the soma",
    "Z_in_MOhm": "|‹Z_in›|: magnitude of the input impedance at the soma",
    "lambda_um": "‹λ›: cable length over its electrotonic length",
    "X_tips_mean": "‹X›: electrotonic distance from the soma",
    "attenuation_to_soma_farthest": (
        "attenuation toward the soma: voltage at the tip of the longest path over that at the soma, for "
        "current at the tip"
    ),
    "attenuation_from_soma_farthest": "attenuation from the soma: the reverse, for current at the soma",
}
_OF_DOMAIN = re.compile(r"(length|area|lambda)(?:_(axon|basal|apical|other))?(?:_(least|greatest))?")
_OF_COURSE = re.compile(r"(\w+)_(soma|farthest)_from_(soma|farthest)")
_PLACES = {"soma": "soma", "farthest": "farthest tip"}
_HZ = re.compile(r"(.+)_([\d.e+-]+)Hz")
_TAU = re.compile(r"tau(\d+)(?:_(amplitude|modes))?")


def title(column: str) -> str:
    """Return a column's title with its unit in parentheses, symbols between ‹ and ›.

    Parameters
    ----------
    column : str
        Of any table; words are made of the name of one that is not known.
    """
    at = _HZ.fullmatch(column)
    name, hz = (_at_frequency(at[1]), f", {at[2]} Hz") if at else (column, "")
    base, unit = without_unit(name)
    words = _WORDS.get(base) or _composed(base)
    return f"{words}{hz}" + (f" ({unit})" if unit else "")


def without_unit(column: str) -> tuple[str, str]:
    """Return a column's name, without frequency, without its unit, and the unit as it is printed."""
    ending = next((end for end in _UNITS if column.endswith(f"_{end}")), "")
    return (column.removesuffix(f"_{ending}"), _UNITS[ending]) if ending else (column, "")


def plain(text: str) -> str:
    """Return a title, or any text of ours, without the marks around symbols."""
    return text.replace("‹", "").replace("›", "")


def meaning(column: str) -> str:
    """Return what a column means, for the notes below a table; empty where its title says it."""
    at = _HZ.fullmatch(column)
    return _MEANINGS.get(_at_frequency(at[1]) if at else column, "")


def _at_frequency(name: str) -> str:
    """Return a column's name for what it is at a frequency: an impedance's magnitude is no resistance."""
    return name.replace("R_in", "Z_in")


def _composed(base: str) -> str:
    of_domain = _OF_DOMAIN.fullmatch(base)
    if of_domain:
        return ", ".join(filter(None, (_WORDS[of_domain[1]], of_domain[2], of_domain[3])))
    tau = _TAU.fullmatch(base)
    if tau:
        return f"‹τ_{tau[1]}›" + (f", {tau[2]}" if tau[2] else "")
    course = _OF_COURSE.fullmatch(base)
    if course:
        return f"{_sentence(course[1])} at the {_PLACES[course[2]]}, current at the {_PLACES[course[3]]}"
    return _sentence(base)


def _sentence(name: str) -> str:
    words = name.replace("_", " ").strip() or name
    return words[0].upper() + words[1:]
