"""What was seen in a file: the record of one finding, and the catalogue of the kinds there are."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Severity = Literal["note", "doubtful", "unfit"]


@dataclass(frozen=True)
class Kind:
    """One kind of finding."""

    severity: Severity  #: what such a finding is worth, where no threshold says otherwise
    title: str  #: a few words for tables and headings
    effect: str  #: what it does to electrotonus, one sentence
    explanation: str  #: what it is, where it comes from and what to do about it


CATALOGUE: dict[str, Kind] = {
    "separator_odd": Kind(
        severity="note",
        title="commas or semicolons between columns",
        effect="None: the numbers are read as they stand.",
        explanation=(
            "The SWC standard separates columns by white space. This file uses commas or semicolons, "
            "as a spreadsheet does when it saves a table; every one of them was read as a separator. "
            "If commas were meant as decimal points, the columns are wrong and the file must be "
            "written anew."
        ),
    ),
    "columns_extra": Kind(
        severity="note",
        title="more than seven columns",
        effect="None: the first seven columns are read, the others are not.",
        explanation=(
            "An SWC sample has seven columns: number, type, x, y, z, radius, parent. Some programs "
            "add their own after these. They are left aside."
        ),
    ),
    "header_scale": Kind(
        severity="doubtful",
        title="the header names a scale",
        effect=(
            "If the coordinates still have to be multiplied, every length is off by that factor, and "
            "λ, X and R_in with it."
        ),
        explanation=(
            "The header's SCALE field gives factors for x, y and z other than 1 (Cannon et al. 1998, "
            "quoted in the INCF SWC specification). Whether the numbers below are already scaled cannot "
            "be seen, so nothing was multiplied. If they are not, put the factors into the assumptions "
            "file as shrinkage (per axis) or unit_um (all axes and radii)."
        ),
    ),
    "header_shrinkage": Kind(
        severity="note",
        title="the header speaks of shrinkage",
        effect="Uncorrected shrinkage shortens paths, and with them X and the attenuation.",
        explanation=(
            "The header's SHRINKAGE_CORRECTION field is filled in (Cannon et al. 1998, quoted in the INCF "
            "SWC specification). In words it tells what was done. In numbers other than 1 it does not "
            "tell whether the coordinates are already corrected: such a file is doubtful. Nothing was "
            "applied; if it has to be, give the factors as shrinkage in the assumptions file."
        ),
    ),
    "header_units": Kind(
        severity="doubtful",
        title="the header names a unit that is not the micrometre",
        effect="With lengths in another unit λ, X and R_in are wrong by powers of the unit's size.",
        explanation=(
            "The SWC standard has micrometres. A comment line speaks of nanometres, millimetres, voxels "
            "or pixels and not of micrometres. Nothing was converted: if the coordinates are in that "
            "unit, give its size with --unit-um or as unit_um in the assumptions file. Once a unit is "
            "given, or where the same line names micrometres, this is a note."
        ),
    ),
    "unit_implausible": Kind(
        severity="unfit",
        title="sizes no neuron has",
        effect=("Lengths and diameters enter λ, X and R_in; in the wrong unit none of them means anything."),
        explanation=(
            "Sizes that occur in no neuron show a file in another unit. Any of these is enough: wider "
            "than unit_extent_um with a median step above unit_step_um in a branched tree; wider than "
            "unit_extent_um with a radius above unit_largest_radius_um; a branched tree whose median "
            "radius is above unit_typical_radius_um; a median radius below unit_thinnest_radius_um. Long "
            "axons with ordinary steps and radii pass, and files of few samples are not judged. "
            "Nanometres need --unit-um 0.001, voxels the length of their edge in µm, millimetres 1000."
        ),
    ),
    "radius_zero": Kind(
        severity="doubtful",
        title="radii of zero",
        effect="A radius of zero blocks axial current: everything beyond would be cut off.",
        explanation=(
            "Some samples have radius 0, mostly because no diameter was taken there. They are mended "
            "before the analysis: each takes the nearest positive radius toward the root, else below, and "
            "the finding radius_mended says so. Up to the share mended_few of the samples this is a note, "
            "above mended_share the file is unfit, since the result would be that of the borrowed radii. "
            "The commonest among radii of zero, of -1 and other negative ones is weighed with the share "
            "of all three."
        ),
    ),
    "radius_negative": Kind(
        severity="doubtful",
        title="negative radii",
        effect=(
            "A negative radius has no cable: neither membrane nor axial resistance can be computed from it."
        ),
        explanation=(
            "Some radii are negative, through an error of export or an unusual code for not measured. "
            "They are mended and weighed like radii of zero."
        ),
    ),
    "radius_minus_one": Kind(
        severity="doubtful",
        title="radii of -1, not measured",
        effect="Without a radius neither membrane nor axial resistance can be computed.",
        explanation=(
            "By a habit of large electron-microscopic data sets, -1 stands for a radius that nobody "
            "measured. Single ones are mended like radii of zero, and weighed like them: skeletons "
            "without diameters are unfit for cable work."
        ),
    ),
    "radius_constant": Kind(
        severity="unfit",
        title="one radius for the whole cell",
        effect="λ, X, R_in and every attenuation follow from the one value that was typed in.",
        explanation=(
            "Nearly all neurite samples (constant_share) have one and the same radius, as tracings do "
            "whose makers wanted the path and not the calibre. A tracing of more than constant_samples "
            "samples is unfit; a smaller one, or a straight cylinder as models use it, is doubtful."
        ),
    ),
    "radius_placeholder": Kind(
        severity="note",
        title="one radius for nearly all of a domain",
        effect=(
            "The domain's own results follow from a value nobody measured, and its load on R_in with them."
        ),
        explanation=(
            "Nearly all samples of the axon, or of the other neurites, share one radius: a smallest "
            "diameter of the tracing program, or a value typed in. Where a quarter of the neurites' "
            "membrane or more rests on it (placeholder_membrane) the file is doubtful. For an axon, the "
            'assumption axon = "left out" or "cut" takes it out of the result.'
        ),
    ),
    "diameter_below_optics": Kind(
        severity="note",
        title="diameters below the resolution of light",
        effect=(
            "λ grows with the square root of the diameter: an unresolved process drawn too thick or "
            "too thin is electrotonically too near or too far."
        ),
        explanation=(
            "Light microscopy resolves λ/(2 NA) after Abbe: 0.196 µm at 550 nm and NA 1.4. Diameters "
            "below that were not measured if the cell was traced from light microscopy; with half of the "
            "membrane (optics_membrane) on such samples the file is doubtful. Electron microscopy "
            "resolves far less, and for its reconstructions the finding means nothing: set "
            "optics_diameter_um in [vetting] of the assumptions file to the resolution of the data."
        ),
    ),
    "diameter_quantised": Kind(
        severity="note",
        title="few different diameters",
        effect=(
            "Diameters rounded to steps give λ an error of half a step's share; it averages out along "
            "paths, not at thin tips."
        ),
        explanation=(
            "A large tree has only a dozen different diameters or fewer: they were taken in steps of the "
            "optics or of a scale. Three or fewer (quantised_classes) are classes such as thick and thin, "
            "and the file is doubtful."
        ),
    ),
    "diameter_jump": Kind(
        severity="note",
        title="sudden changes of diameter within a branch",
        effect="A narrow sample works as an extra axial resistance, a thick one as a pool of membrane.",
        explanation=(
            "From one sample to the next within a branch the diameter changes by more than the "
            "factor jump_ratio. A few are boutons or slips of the pen; where more than the share "
            "jump_share of the neurite samples do it, and jump_count of them at least, the diameters "
            "were not taken with care and the file is doubtful."
        ),
    ),
    "soma_absent": Kind(
        severity="doubtful",
        title="no soma",
        effect="Attenuation and X count from the root sample, and R_in lacks the soma's membrane.",
        explanation=(
            "No sample has type 1. The root of the longest piece stands for the soma as the reference site, "
            "and no membrane is added. If the soma was drawn but typed otherwise, set its type to 1."
        ),
    ),
    "soma_not_root": Kind(
        severity="note",
        title="the soma is not the root",
        effect="None: the tree is hung from the soma before anything is computed.",
        explanation=(
            "The tree starts elsewhere, often at the end of the primary neurite. Distances and orders "
            "count from the soma all the same."
        ),
    ),
    "soma_odd": Kind(
        severity="doubtful",
        title="a soma of unlikely size",
        effect=(
            "The soma's membrane is part of R_in and of every attenuation toward it; here it is "
            "nearly missing, or far too much."
        ),
        explanation=(
            "The soma as drawn has the membrane of a sphere smaller than soma_least_um or larger than "
            "soma_most_um in radius. Often a single sample carries the radius of a dendrite because the "
            "body was not drawn, or a contour was saved as a chain. Draw it anew, or force another rule "
            "with soma_rule in the assumptions file."
        ),
    ),
    "soma_outline": Kind(
        severity="note",
        title="the soma is drawn as an outline",
        effect=(
            "The soma's membrane is that of a sphere of the contour's mean radius; a flat or long "
            "body differs."
        ),
        explanation=(
            "The type-1 samples go round the cell body with hardly any radius. The soma is taken as a "
            "sphere whose radius is their mean distance from the centroid. Another rule can be forced "
            "with soma_rule in the assumptions file."
        ),
    ),
    "soma_coincident": Kind(
        severity="note",
        title="soma samples in one place",
        effect=("None where the samples share a place: they count once, as a sphere of the largest radius."),
        explanation=(
            "Soma samples lie on top of each other, as programs write them that need two points for a "
            "body. A soma wholly in one place is taken as one sphere."
        ),
    ),
    "soma_several": Kind(
        severity="doubtful",
        title="more than one soma",
        effect=(
            "Only one can be the reference; type-1 samples apart from it count as cable and add their "
            "membrane where they stand."
        ),
        explanation=(
            "Groups of type-1 samples are not connected to each other: two cells in one file, or a wrong "
            "type within a neurite. The largest group that holds a root is the soma."
        ),
    ),
    "piece_apart": Kind(
        severity="doubtful",
        title="a piece not connected to the soma",
        effect="Its membrane is missing: R_in comes out too large and the tree too short.",
        explanation=(
            "The file has several roots. Pieces other than the soma's are left out unless the assumptions "
            'say orphans = "joined" with a gap. Below the share apart_share of the cable they are notes; '
            "above apart_most the file is unfit, because what is analysed is not the cell. The longest "
            "pieces come first; beyond apart_listed they are summed up."
        ),
    ),
    "domain_unknown": Kind(
        severity="note",
        title="types beyond soma, axon, basal and apical",
        effect="None with one membrane for all; an axon among these samples cannot be treated as one.",
        explanation=(
            "The SWC standard names the types 1 to 4; 0 is undefined, others are free. Such samples have "
            "the general membrane, unless the assumptions file has a table for their type, such as "
            "[membrane.type_7]."
        ),
    ),
    "axon_only": Kind(
        severity="doubtful",
        title="axon without dendrites",
        effect=(
            "The dendrites' load is missing: R_in is too large, and attenuation toward the soma too small."
        ),
        explanation=(
            "All neurite samples are axon. Within the axon λ and L hold; what depends on the rest of the "
            "cell does not."
        ),
    ),
    "samples_coincident": Kind(
        severity="note",
        title="samples in one place",
        effect="None: the two samples are one electrical point.",
        explanation=(
            "A sample lies exactly where its parent does. Programs write such steps where a branch starts "
            "with a diameter of its own, or where coordinates were rounded."
        ),
    ),
    "step_long": Kind(
        severity="note",
        title="steps far longer than the rest",
        effect=(
            "A long straight step cuts the windings of the neurite: the path, and X with it, is too "
            "short there."
        ),
        explanation=(
            "Some steps stand out of the file's own: a gap bridged, a section lost, or a wrong parent. "
            "With more than the share step_share of the cable in such steps the file is doubtful. Look at "
            "the place named."
        ),
    ),
    "flat": Kind(
        severity="doubtful",
        title="no depth",
        effect="Paths are those of the cell's projection: lengths, membrane and X are too small.",
        explanation=(
            "All samples lie in one plane, or nearly so (flat_ratio): the depth was not traced or got "
            "lost in a conversion."
        ),
    ),
    "depth_zigzag": Kind(
        severity="doubtful",
        title="paths zigzag in depth",
        effect=(
            "The zigzag adds length and membrane that the neurite does not have: X and attenuation "
            "come out too large."
        ),
        explanation=(
            "Along z the path turns back steeply far more often than along x or y: an unsteady focus, or "
            "the coarser sampling of depth. Measured at single samples and over zigzag_stride samples, so "
            "that slow drifts show too. Smoothing z is for whoever has the images; nothing is smoothed "
            "here."
        ),
    ),
    "radius_mended": Kind(
        severity="doubtful",
        title="radii mended",
        effect="λ and membrane at these samples are those of their neighbours.",
        explanation=(
            "Radii of zero or below were replaced: by the nearest positive radius on the path toward the "
            "root, else the nearest below, else the median of the neurites; soma and neurites do not "
            "borrow from each other. The file itself was not changed. The finding weighs what the radii "
            "replaced weighed: up to the share mended_few of the samples a note, above mended_share "
            "unfit."
        ),
    ),
}


@dataclass(frozen=True)
class Finding:
    """One observation about a file, at the first place where it holds."""

    code: str  #: key of `CATALOGUE`
    sentence: str  #: what was seen, with numbers, in words a physiologist understands
    line: int | None = None  #: 1-based line of the first place
    sample: int | None = None  #: sample number, as in the file, of the first place
    count: int = 1  #: number of places in the file
    severity: Severity = ""  # type: ignore[assignment]  #: the catalogue's, unless a threshold says otherwise

    def __post_init__(self) -> None:
        """Fill the severity from the catalogue; an unknown code is a KeyError."""
        if not self.severity:
            object.__setattr__(self, "severity", CATALOGUE[self.code].severity)
