"""The methods of a study as its paper tells them, from the record of the survey and what was made of it.

Paragraphs are plain text in the past tense, with symbols between ‹ and › and citations between ⟨ and ⟩.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import pandas as pd

from morphotone.cable.assumptions import Assumptions, Membrane, table_name
from morphotone.questions.units import Units
from morphotone.reading.findings import CATALOGUE
from morphotone.reading.wording import counted
from morphotone.showing.markup import one_line
from morphotone.showing.references import without_citations

_SOMATA = {
    "sphere": "of a sphere",
    "three-point": "of a sphere given by three points",
    "chain": "of the frusta along a chain of samples",
    "outline": "of a sphere as wide as the traced outline",
}
_REASONS = {
    "unfit": "as unfit for cable analysis",
    "empty": "without a sample",
    "single_sample": "with one sample only",
    "fields_missing": "with fields missing",
    "not_a_number": "with text in place of a number",
    "not_finite": "with values that were no finite numbers",
    "number_repeated": "with a sample number given twice",
    "parent_absent": "with a parent that was not in the file",
    "loop": "with samples in a loop",
    "not_swc": "in another format",
    "unreadable": "that could not be opened",
    "orphans_refused": "with pieces apart from the soma",
    "radius_unusable": "without a usable radius",
}
_DOMAINS = {"basal": "basal dendrites", "apical": "apical dendrites", "axon": "the axon", "soma": "the soma"}


@dataclass(frozen=True, eq=False)
class Source:
    """What the methods are told from.

    Attributes
    ----------
    record : mapping
        The survey's ``run.json``.
    assumptions : Assumptions
        Those in the record.
    cells : DataFrame
        The survey's ``cells.csv``: all analysed cells.
    findings : DataFrame
        Its ``findings.csv``: ``file``, ``grade``, ``code``, ``severity``.
    turned_away : DataFrame
        Its ``turned_away.csv``: ``reason``.
    units : Units
        What the tables are made of.
    """

    record: Mapping[str, Any]
    assumptions: Assumptions
    cells: pd.DataFrame
    findings: pd.DataFrame
    turned_away: pd.DataFrame
    units: Units

    @property
    def used(self) -> pd.DataFrame:
        """The rows of the cells behind the tables."""
        return self.cells[self.cells["file"].astype(str).isin(self.units.files)]


def reconstructions(source: Source) -> str:
    """Tell which files were used, which not and why, and how they were read."""
    return " ".join([*_files(source), *_geometry(source.assumptions), *_mended(source), *_pieces(source)])


def electrotonus(source: Source) -> str:
    """Tell what was assumed of the membrane, and how the cable was solved."""
    return " ".join(
        [
            "Each cell was treated as a tree of passive cables with sealed ends ⟨Rall1959⟩; a sample and "
            "its parent made a frustum, and the first piece of a stem, from the soma's surface on, a cylinder"
            f"{_branch_start(source.assumptions)}.",
            *_membrane(source.assumptions),
            *_solution(source),
            "The membrane's constants were assumed and no correction for temperature was made; "
            "voltage-dependent conductances were not included. All results hold under the passive model and "
            "these assumptions.",
        ]
    )


def software(source: Source) -> str:
    """Tell with what versions the survey was made."""
    packages = source.record["packages"]
    return (
        f"The cells were analysed with Morphotone {source.record['morphotone']} ⟨Morphotone⟩ on Python "
        f"{source.record['python']}, with NumPy {packages['numpy']} ⟨Harris2020⟩ and SciPy "
        f"{packages['scipy']} ⟨Virtanen2020⟩."
    )


def listed(words: Sequence[str]) -> str:
    """Return words as a sentence lists them."""
    return " and ".join([", ".join(words[:-1]), words[-1]] if len(words) > 1 else words)


def named(text: str) -> str:
    """Return a name of the user's so that nothing in it is taken for a citation or a symbol."""
    return without_citations(one_line(text))


def _files(source: Source) -> Iterator[str]:
    found, analysed = len(source.cells) + len(source.turned_away), len(source.cells)
    away = source.turned_away["reason"].value_counts(sort=False)
    ordered = sorted(away.items(), key=lambda item: (-item[1], str(item[0])))
    reasons = [f"{count:,} {_reason(str(reason), source.findings)}" for reason, count in ordered]
    turned_away = f" and {sum(away)} turned away: {listed(reasons)}" if reasons else ""
    verb = "was" if analysed == 1 else "were"
    yield (
        f"Of {counted(found, 'reconstruction')} in the SWC format ⟨Cannon1998⟩, {analysed:,} {verb} "
        f"analysed{turned_away}."
    )
    used = len(source.units.files)
    without = analysed - used
    if without:
        yield (
            f"The {counted(used, 'cell')} with a group were used; {without:,} other analysed "
            f"{'cell' if without == 1 else 'cells'} had none."
        )
    grades = source.used["grade"].value_counts()
    told = [f"{grades[grade]:,} {grade}" for grade in ("sound", "doubtful", "unfit") if grade in grades]
    graded = listed(told) if len(told) > 1 else f"all {grades.index[0]}"
    yield (
        f"Of the {counted(used, 'cell')} used, vetting for faults that bear on cable analysis graded "
        f"{graded}."
    )


def _reason(reason: str, findings: pd.DataFrame) -> str:
    """Return in words why files were turned away."""
    words = _REASONS.get(reason, f"({reason.replace('_', ' ')})")
    codes = findings.loc[(findings["grade"] == "unfit") & (findings["severity"] == "unfit"), "code"]
    titles = [CATALOGUE[code].title for code in sorted(set(map(str, codes))) if code in CATALOGUE]
    return f"{words} ({'; '.join(titles)})" if reason == "unfit" and titles else words


def _geometry(assumptions: Assumptions) -> Iterator[str]:
    if assumptions.unit_um == 1:
        unit = "Coordinates and radii were taken as micrometres"
    else:
        unit = f"One unit of the files was taken as {assumptions.unit_um:,.12g} µm"
    if set(assumptions.shrinkage) == {1.0}:
        yield f"{unit}, without correction for shrinkage."
    else:
        factors = listed([f"{factor:.12g}" for factor in assumptions.shrinkage])
        yield f"{unit}; against shrinkage, x, y and z were multiplied by {factors}."
    factor, offset = assumptions.diameter_factor, assumptions.diameter_offset_um
    changes = [f"multiplied by {factor:.12g}"] if factor != 1 else []
    changes += [f"{'in' if offset > 0 else 'de'}creased by {abs(offset):.12g} µm"] if offset else []
    if changes:
        yield f"Diameters were {listed(changes)}."


def _mended(source: Source) -> Iterator[str]:
    files = source.findings.loc[source.findings["code"] == "radius_mended", "file"].astype(str)
    mended = len(set(files) & set(source.units.files))
    if mended:
        yield f"In {counted(mended, 'cell')} radii of zero or below were replaced by a neighbouring sample's."


def _pieces(source: Source) -> Iterator[str]:
    """Tell how somata, axons and orphans were treated."""
    used, assumptions = source.used, source.assumptions
    rules = used["soma_rule"].value_counts()
    somata = [f"{words} ({rules[rule]:,})" for rule, words in _SOMATA.items() if rule in rules]
    if somata:
        yield f"The soma was taken as isopotential, its membrane as that {listed(somata)}."
    if "none" in rules:
        yield f"In {counted(rules['none'], 'cell')} without a soma the root was the point of reference."
    with_axon = int((used["length_axon_um"] > 0).sum())
    treatment = {
        "kept": f"was analysed as traced (in {counted(with_axon, 'cell')})" if with_axon else "",
        "left out": "was left out",
        "cut": f"was cut {assumptions.axon_cut_um or 0:.12g} µm from where it starts",
    }[assumptions.axon]
    if treatment:
        yield f"The axon {treatment}."
    joined, left_out = int((used["orphans_joined"] > 0).sum()), int((used["orphans_left_out"] > 0).sum())
    if joined:
        gap = f"{assumptions.orphan_gap_um or 0:.12g}"
        yield (
            f"Pieces apart from the soma were joined across gaps up to {gap} µm (in "
            f"{counted(joined, 'cell')})."
        )
    if left_out:
        lost = used["orphans_um"].sum()
        yield (
            f"Pieces apart from the soma were left out (in {counted(left_out, 'cell')}, {lost:,.0f} µm of "
            "cable)."
        )


def _branch_start(assumptions: Assumptions) -> str:
    if assumptions.branch_start == "parent radius":
        return ""
    return ", as did the first piece of a daughter at a branch point"


def _membrane(assumptions: Assumptions) -> Iterator[str]:
    general = assumptions.membrane
    differs = any(_constants(of) != _constants(general) for of in assumptions.domains.values())
    yield f"The membrane was given {_constants(general)}{' unless stated otherwise' if differs else ''}."
    for code, of in assumptions.domains.items():
        if _constants(of) != _constants(general):
            name = _domain(code)
            yield f"{name[0].upper()}{name[1:]} had {_constants(of)}."
    yield from _spines(assumptions)
    if assumptions.soma_shunt_nS:
        yield f"The soma had a leak of {assumptions.soma_shunt_nS:.12g} nS besides."


def _spines(assumptions: Assumptions) -> Iterator[str]:
    general = assumptions.membrane.spine_factor
    own = {_domain(code): of.spine_factor for code, of in assumptions.domains.items()}
    factors = [f"{factor:.12g} for {name}" for name, factor in own.items() if factor != general]
    if general != 1:
        factors.insert(0, f"{general:.12g}{' in general' if factors else ''}")
    if factors:
        yield (
            "Membrane of spines that were not traced was added as a factor ‹F› on area, with ‹R_m›/‹F› and "
            f"‹C_m›·‹F› ⟨Holmes1989 RappYaromSegev1992⟩: {listed(factors)}."
        )


def _constants(membrane: Membrane) -> str:
    return (
        f"‹R_m› = {membrane.R_m_ohm_cm2:,.12g} Ω cm², ‹R_i› = {membrane.R_i_ohm_cm:,.12g} Ω cm and "
        f"‹C_m› = {membrane.C_m_uF_cm2:.12g} µF/cm²"
    )


def _domain(code: int) -> str:
    name = table_name(code)
    return _DOMAINS.get(name, f"cable of {name.replace('_', ' ')}")


def _solution(source: Source) -> Iterator[str]:
    hz = [f"{hz:,.12g} Hz" for hz in source.assumptions.hz]
    at = f"steady current and at {listed(hz)}" if hz else "steady current"
    yield (
        f"Input resistance and attenuation ⟨RallRinzel1973⟩ for {at} followed from sweeps over the tree with "
        "the exact solution of each frustum, without compartments."
    )
    if source.record["delays"]:
        yield "Delays were those of the voltage's centroid ⟨AgmonSnirSegev1993⟩."
    if source.record["time_constants"]:
        yield "Time constants were the slowest of the whole cell ⟨Rall1969⟩."
    if source.record["transient_ms"]:
        rise, decay = source.record["transient_ms"]
        yield (
            f"Responses to a brief current (rise {rise:.12g}, decay {decay:.12g} ms) were found by numerical "
            "inversion of the exact Laplace transform ⟨WeidemanTrefethen2007⟩."
        )
