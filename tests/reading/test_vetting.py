"""Every finding at its threshold: seen on one side, not on the other, with the sentence a reader gets."""

from collections.abc import Callable
from dataclasses import dataclass, fields, replace

import numpy as np
import pytest
from numpy.typing import NDArray

from morphotone.reading.findings import CATALOGUE, Finding
from morphotone.reading.reconstruction import Reconstruction, parents_first, reconstruct, trees
from morphotone.reading.repair import mend_radii
from morphotone.reading.thresholds import reasons
from morphotone.reading.vetting import Thresholds, grade_of, vet_reconstruction

HEAD_LINES = 2  # the made files have their first sample on line 3


@dataclass
class Made:
    """A cell under construction; arrays may be changed before `cell` is called."""

    kind: NDArray[np.int64]
    position: NDArray[np.float64]
    radius: NDArray[np.float64]
    parent: NDArray[np.int64]
    comments: tuple[str, ...] = ()
    unit_um: float = 1.0

    def cell(self) -> Reconstruction:
        order = parents_first(self.parent)
        place = np.empty(len(order) + 1, dtype=np.int64)
        place[order], place[-1] = np.arange(len(order)), -1
        parent = place[self.parent[order]]
        number = np.arange(1, len(order) + 1)
        return Reconstruction(
            cell="made",
            file="made.swc",
            sha256="",
            number=number[order],
            kind=self.kind[order],
            position=self.position[order] * self.unit_um,
            radius=self.radius[order] * self.unit_um,
            parent=parent,
            line=number[order] + HEAD_LINES,
            tree=trees(parent),
            comments=self.comments,
            findings=(),
            unit_um=self.unit_um,
        )


def healthy(samples: int = 400) -> Made:
    """Make a cell as a careful tracer leaves it: a soma, and dendrites that wander, branch and taper."""
    rng = np.random.default_rng(20240611)
    parent, position, radius = [-1], [np.zeros(3)], [7.0]
    tips = []
    for direction in rng.normal(size=(5, 3)):
        heading = direction / np.linalg.norm(direction)
        parent.append(0)
        position.append(7.5 * heading)
        radius.append(rng.uniform(1.0, 1.6))
        tips.append((len(parent) - 1, heading))
    while len(parent) < samples:
        at, heading = tips.pop(0)
        for _ in range(int(rng.integers(5, 12))):
            heading = heading + 0.25 * rng.normal(size=3)
            heading /= np.linalg.norm(heading)
            parent.append(at)
            position.append(position[at] + rng.uniform(1.5, 4.0) * heading)
            radius.append(max(radius[at] * rng.uniform(0.96, 1.0), 0.12 + 0.1 * rng.uniform()))
            at = len(parent) - 1
        tips += [(at, heading + 0.4 * rng.normal(size=3)) for _ in range(2)]
    kind = np.full(len(parent), 3)
    kind[0] = 1
    return Made(kind, np.array(position), np.array(radius), np.array(parent))


def line_of(samples: int, step: float = 2.0, radius: float = 0.5, soma: bool = True) -> Made:
    """Make a straight cylinder along x, with or without a soma sample at its start."""
    kind = np.full(samples, 3)
    position = np.zeros((samples, 3))
    position[:, 0] = step * np.arange(samples)
    radii = np.full(samples, radius)
    if soma:
        kind[0], radii[0] = 1, 5.0
    return Made(kind, position, radii, np.arange(-1, samples - 1))


def branching(samples: int, radius: float = 0.5) -> Made:
    """Make a healthy cell whose neurites all have one radius."""
    made = healthy(samples)
    made.radius[1:] = radius
    return made


def seen(made: Made, code: str, **limits: float) -> Finding | None:
    """Return the first finding of one kind."""
    found = vet_reconstruction(made.cell(), Thresholds(**limits)).findings  # type: ignore[arg-type]
    return next((finding for finding in found if finding.code == code), None)


def severity(made: Made, code: str, **limits: float) -> str | None:
    finding = seen(made, code, **limits)
    return None if finding is None else finding.severity


def sentence(made: Made, code: str, **limits: float) -> str:
    finding = seen(made, code, **limits)
    assert finding is not None
    return finding.sentence


# --- the whole ---


@pytest.mark.parametrize("samples", [30, 400, 3000])
def test_a_healthy_cell_is_sound_and_nothing_is_said_of_it(samples: int) -> None:
    vetting = vet_reconstruction(healthy(samples).cell())
    assert vetting.findings == ()
    assert vetting.grade == "sound"


def test_the_reading_s_own_findings_come_first() -> None:
    extra = Finding("columns_extra", "Line 3 has 9 columns.", 3)
    made = healthy()
    made.kind[0] = 3
    vetting = vet_reconstruction(replace(made.cell(), findings=(extra,)))
    assert [finding.code for finding in vetting.findings] == ["columns_extra", "soma_absent"]


@pytest.mark.parametrize(
    ("severities", "grade"),
    [
        ((), "sound"),
        (("note",), "sound"),
        (("note", "doubtful"), "doubtful"),
        (("doubtful", "unfit", "note"), "unfit"),
    ],
)
def test_the_grade_is_the_worst_severity(severities: tuple[str, ...], grade: str) -> None:
    assert grade_of(tuple(Finding("flat", "", severity=one) for one in severities)) == grade  # type: ignore[arg-type]


def test_every_threshold_has_its_reason() -> None:
    assert list(reasons()) == [entry.name for entry in fields(Thresholds)]
    assert all(len(reason) > 20 for reason in reasons().values())


def test_a_cell_is_not_changed() -> None:
    made = healthy()
    cell = made.cell()
    before = [array.copy() for array in (cell.position, cell.radius, cell.parent, cell.kind)]
    vet_reconstruction(cell)
    for was, now in zip(before, (cell.position, cell.radius, cell.parent, cell.kind), strict=True):
        np.testing.assert_array_equal(was, now)


def test_one_soma_sample_alone_can_be_vetted() -> None:
    assert vet_reconstruction(line_of(1).cell()).grade == "sound"


# --- header ---


def with_comments(*comments: str, unit_um: float = 1.0) -> Made:
    return replace(healthy(), comments=comments, unit_um=unit_um)


@pytest.mark.parametrize(
    "comment", ["SCALE 1.0 1.0 1.0", "SCALE", "scaled by hand 2 2 2", "SCALE micrometers"]
)
def test_a_scale_of_one_or_none_is_no_finding(comment: str) -> None:
    assert seen(with_comments(comment), "header_scale") is None


@pytest.mark.parametrize("comment", ["SCALE 1 1 2", " scale: 0.5 0.5 0.5 ", "SCALE=.1"])
def test_another_scale_is_doubtful(comment: str) -> None:
    assert severity(with_comments("ORIGINAL", comment), "header_scale") == "doubtful"


def test_the_scale_is_quoted_and_not_applied() -> None:
    assert sentence(with_comments("SCALE 1 1 2"), "header_scale") == (
        "The header says SCALE 1 1 2; the coordinates were read as they stand."
    )


@pytest.mark.parametrize(
    ("comment", "expected"),
    [
        ("SHRINKAGE_CORRECTION", None),
        ("SHRINKAGE_CORRECTION 1.0 1.0 1.0", None),
        ("SHRINKAGE_CORRECTION none in z", "note"),
        ("SHRINKAGE_CORRECTION 1.1 1.1 2", "doubtful"),
    ],
)
def test_shrinkage_in_the_header(comment: str, expected: str | None) -> None:
    assert severity(with_comments(comment, "REGION"), "header_shrinkage") == expected


def test_a_long_header_value_is_shortened_in_the_sentence() -> None:
    assert sentence(with_comments("SHRINKAGE_CORRECTION " + "x" * 80), "header_shrinkage") == (
        f"The header says SHRINKAGE_CORRECTION {'x' * 57}...; no correction was applied."
    )


@pytest.mark.parametrize(
    ("comment", "expected"),
    [
        ("units: micrometers", None),
        ("imaged at 550 nm", None),
        ("frames of 1024 pixels", None),
        ("coordinates in nanometers", "doubtful"),
        ("Unit: nm", "doubtful"),
        ("positions are voxels", "doubtful"),
        ("pixel size 0.3 um", "note"),
    ],
)
def test_units_in_words(comment: str, expected: str | None) -> None:
    assert severity(with_comments("a cell", comment), "header_units") == expected


def test_a_unit_that_was_given_settles_the_header_s_words() -> None:
    made = with_comments("coordinates in nanometres", unit_um=0.9)
    assert severity(made, "header_units") == "note"
    assert sentence(made, "header_units") == (
        "The header speaks of nanometres ('coordinates in nanometres'); lengths were read in units of 0.9 µm."
    )


# --- unit ---


def in_unit(made: Made, factor: float) -> Made:
    return replace(made, position=made.position * factor, radius=made.radius * factor)


@pytest.mark.parametrize("factor", [1000.0, 100.0, 1e-3])  # nanometres, voxels of 10 nm, millimetres
def test_a_file_in_another_unit_is_unfit(factor: float) -> None:
    assert severity(in_unit(healthy(), factor), "unit_implausible") == "unfit"


def test_the_unit_s_sentence_names_the_sizes_and_the_way_out() -> None:
    made = line_of(30, step=400.0, radius=0.5)
    made.position[:, 1] = 200.0 * (np.arange(30) % 2)
    assert sentence(made, "unit_implausible") == (
        "Read in units of 1 µm the cell is 11,600 µm wide, half of all steps are longer than 447 µm, "
        "which no neuron shows: say the file's unit with --unit-um (0.001 for nanometres, the edge "
        "in µm for voxels) or as unit_um in the assumptions file."
    )


def test_the_unit_given_settles_it() -> None:
    made = replace(in_unit(healthy(), 1000.0), unit_um=0.001)
    assert vet_reconstruction(made.cell()).grade == "sound"


def test_a_long_axon_in_ordinary_steps_passes() -> None:
    """A mouse's axon may span 1 cm and more (from memory); steps of 20 µm, radii of 0.3 µm."""
    made = line_of(5000, step=20.0, radius=0.3)
    made.position[:, 1] = 8.0 * np.sin(np.arange(5000))
    assert np.ptp(made.position[:, 0]) > 9.9e4
    assert seen(made, "unit_implausible") is None


def test_a_cylinder_drawn_straight_may_be_of_any_size() -> None:
    """The squid's giant axon: radius 238 µm, drawn every 500 µm over 2 cm."""
    made = line_of(41, step=500.0, radius=238.0, soma=False)
    assert seen(made, "unit_implausible") is None


def winding_line(samples: int, step: float, radius: float) -> Made:
    made = line_of(samples, step, radius)
    made.position[1:, 1] = step * (np.arange(1, samples) % 2)
    return made


def test_unit_by_steps_at_its_limits() -> None:
    made = winding_line(61, 100.0, 0.5)  # 6 mm wide; steps of 100·sqrt(2) but for the first
    assert seen(made, "unit_implausible", unit_step_um=141.0) is not None
    assert seen(made, "unit_implausible", unit_step_um=142.0) is None
    assert seen(made, "unit_implausible", unit_extent_um=6001.0) is None
    assert seen(made, "unit_implausible", few_samples=61) is None
    assert seen(made, "unit_implausible", drawn_winding=1.5) is None


def test_unit_by_the_largest_radius_at_its_limit() -> None:
    made = line_of(4, 2000.0, 0.5)
    made.radius[0] = 600.0
    assert seen(made, "unit_implausible") is None
    made.radius[0] = 600.1
    assert seen(made, "unit_implausible") is not None
    assert seen(made, "unit_implausible", unit_extent_um=6000.0) is None


def test_unit_by_typical_radius_at_its_limit() -> None:
    made = winding_line(21, 5.0, 5.0)
    assert seen(made, "unit_implausible") is None
    made.radius[1:] = 5.01
    assert "half of the neurite samples have a radius of 5.01 µm or more" in sentence(
        made, "unit_implausible"
    )
    assert seen(winding_line(20, 5.0, 5.01), "unit_implausible") is None  # 19 neurite samples say nothing


def test_unit_by_the_thinnest_radius_at_its_limit() -> None:
    assert seen(line_of(21, 1.0, 0.01), "unit_implausible") is None
    assert "radius of 0.0099 µm or less" in sentence(line_of(21, 1.0, 0.0099), "unit_implausible")


# --- radii ---


def with_radii(value: float, count: int, of: int = 200) -> Made:
    """Make a cell of `of` samples with a bad radius at the last `count` of them."""
    made = healthy(of)
    for array in ("kind", "position", "radius", "parent"):
        setattr(made, array, getattr(made, array)[:of])
    made.radius[of - count :] = value
    return made


BROKEN = [("radius_zero", 0.0), ("radius_minus_one", -1.0), ("radius_negative", -2.5)]


@pytest.mark.parametrize(("code", "value"), BROKEN)
@pytest.mark.parametrize(
    ("count", "expected"),
    [(0, None), (1, "note"), (2, "note"), (3, "doubtful"), (20, "doubtful"), (21, "unfit")],
)
def test_radii_of_zero_or_below_weigh_by_their_share(
    code: str, value: float, count: int, expected: str | None
) -> None:
    assert severity(with_radii(value, count), code) == expected


def test_radii_of_zero_or_below_weigh_together_on_the_commonest() -> None:
    made = with_radii(0.0, 15)
    made.radius[100:110] = -1.0
    made.radius[50] = -3.0
    assert severity(made, "radius_zero") == "unfit"
    assert severity(made, "radius_minus_one") == "doubtful"
    assert severity(made, "radius_negative") == "note"


def test_what_is_said_of_radii_of_zero_or_below() -> None:
    zero = seen(with_radii(0.0, 4), "radius_zero")
    assert zero is not None
    assert zero.sentence == "4 of 200 samples have radius 0 (first at line 199, sample 197)."
    assert (zero.line, zero.sample, zero.count) == (199, 197, 4)
    assert sentence(with_radii(-1.0, 1), "radius_minus_one") == (
        "1 of 200 samples has radius -1, the mark of a radius that was not measured (first at line "
        "202, sample 200)."
    )
    assert sentence(with_radii(-2.5, 3), "radius_negative") == (
        "3 of 200 samples have a negative radius, down to -2.5 µm (first at line 200, sample 198)."
    )


def test_minus_one_is_known_in_any_unit() -> None:
    made = replace(in_unit(healthy(), 1000.0), unit_um=0.001)
    made.radius[9] = -1.0
    assert seen(made, "radius_minus_one") is not None
    assert seen(made, "radius_negative") is None


def test_the_first_place_is_the_first_in_the_file() -> None:
    """Children before parents: the reading reorders, the finding counts lines."""
    made = line_of(30, soma=False)
    made.parent = np.append(np.arange(1, 30), -1)
    made.radius[[10, 20]] = 0.0
    finding = seen(made, "radius_zero")
    assert finding is not None
    assert (finding.line, finding.sample) == (13, 11)


def test_one_radius_for_a_tracing_is_unfit_from_a_size_on() -> None:
    made = branching(60)
    neurites = len(made.radius) - 1
    assert severity(made, "radius_constant", constant_samples=neurites) == "doubtful"
    assert severity(made, "radius_constant", constant_samples=neurites - 1) == "unfit"
    assert sentence(made, "radius_constant") == (
        f"All {neurites} neurite samples have the same radius, 0.5 µm (first at line 4, sample 2)."
    )


def test_one_radius_in_a_straight_cylinder_is_doubtful_and_in_a_few_samples_nothing() -> None:
    assert severity(line_of(200), "radius_constant") == "doubtful"
    assert severity(line_of(21), "radius_constant") == "doubtful"
    assert severity(line_of(20), "radius_constant") is None


def test_one_radius_for_nearly_all() -> None:
    made = branching(400)
    made.radius[1:401:50] = 0.6
    neurites = len(made.radius) - 1
    others = int((made.radius == 0.6).sum())
    share = 1 - others / neurites
    assert sentence(made, "radius_constant", constant_share=share - 1e-9).startswith(
        f"{neurites - others} of {neurites}"
    )
    assert seen(made, "radius_constant", constant_share=share + 1e-9) is None


def with_axon(radius: float, samples: int = 300, varied: int = 0) -> Made:
    """Make a healthy cell and hang an axon with one radius from its soma, `varied` of them excepted."""
    made = healthy(400)
    n = len(made.parent)
    rng = np.random.default_rng(5)
    wander = np.cumsum(rng.normal(loc=(0.0, 0.0, 2.5), size=(samples, 3)), axis=0)
    radii = np.full(samples, radius)
    radii[1 : varied + 1] = radius * (1 + 0.3 * rng.uniform(0.1, 1.0, varied))
    return Made(
        np.append(made.kind, np.full(samples, 2)),
        np.vstack((made.position, np.add(wander, (0.0, 0.0, 8.0)))),
        np.append(made.radius, radii),
        np.append(made.parent, np.append(0, np.arange(n, n + samples - 1))),
    )


def test_a_placeholder_weighs_by_the_membrane_that_rests_on_it() -> None:
    assert severity(with_axon(0.12), "radius_placeholder") == "note"
    assert severity(with_axon(1.0), "radius_placeholder") == "doubtful"
    assert severity(with_axon(1.0), "radius_placeholder", placeholder_membrane=0.99) == "note"


def test_a_placeholder_at_its_limits() -> None:
    assert seen(with_axon(0.3, 100, varied=20), "radius_placeholder") is not None
    assert seen(with_axon(0.3, 100, varied=21), "radius_placeholder") is None
    assert seen(with_axon(0.3, 50), "radius_placeholder") is not None
    assert seen(with_axon(0.3, 49), "radius_placeholder") is None


def test_what_is_said_of_a_placeholder() -> None:
    made = with_axon(0.12)
    line = int(np.argmax(made.kind == 2)) + 3
    said = sentence(made, "radius_placeholder")
    assert said.startswith(
        f"100 % of the axon's samples have radius 0.12 µm (first at line {line}, sample {line - 2}); "
    )
    assert said.endswith(" % of the neurites' membrane rests on that.")


def test_a_placeholder_in_both_parts_is_one_finding() -> None:
    made = with_axon(0.3)
    made.radius[made.kind == 3] = 0.6
    found = [one for one in vet_reconstruction(made.cell()).findings if one.code == "radius_placeholder"]
    assert len(found) == 1
    assert " and 100 % of the dendrite's samples have radius 0.6 µm" in found[0].sentence
    assert "; 100 % of the neurites' membrane rests on that." in found[0].sentence


def test_diameters_below_the_resolution_of_light() -> None:
    """Abbe, λ/(2 NA): 550 nm and NA 1.4 give 0.196 µm (check value LM_limit, formula looked up)."""
    assert Thresholds().optics_diameter_um == pytest.approx(0.550 / (2 * 1.4), abs=5e-4)
    made = line_of(10, step=1.0, radius=0.5)
    made.radius[4] = 0.098
    assert seen(made, "diameter_below_optics") is None
    made.radius[4] = 0.0979
    assert severity(made, "diameter_below_optics") == "note"
    assert sentence(made, "diameter_below_optics").startswith("1 of 9 neurite samples, with ")
    assert "(first at line 7, sample 5); this matters if the cell was traced from light" in sentence(
        made, "diameter_below_optics"
    )
    made.radius[2:] = 0.0979
    assert severity(made, "diameter_below_optics") == "doubtful"
    made.radius[3] = 0.5
    assert severity(made, "diameter_below_optics", optics_membrane=0.95) == "note"
    assert seen(made, "diameter_below_optics", optics_diameter_um=0.01) is None


@pytest.mark.parametrize(("different", "expected"), [(13, None), (12, "note"), (4, "note"), (3, "doubtful")])
def test_few_diameters_in_a_large_tree(different: int, expected: str | None) -> None:
    made = healthy(300)
    made.radius[1:] = 0.2 + 0.05 * (np.arange(len(made.radius) - 1) % different)
    assert severity(made, "diameter_quantised") == expected
    assert seen(made, "diameter_quantised", quantised_samples=len(made.radius)) is None


def test_what_is_said_of_few_diameters() -> None:
    made = healthy(300)
    made.radius[1:] = 0.2 + 0.05 * (np.arange(len(made.radius) - 1) % 5)
    assert sentence(made, "diameter_quantised") == (
        f"{len(made.radius) - 1} neurite samples have only 5 different diameters (0.4, 0.5, 0.6, 0.7, "
        "... µm)."
    )


def test_a_jump_within_a_branch() -> None:
    made = line_of(10, radius=0.5)
    made.radius[5:] = 2.0
    assert seen(made, "diameter_jump") is None
    made.radius[5:] = 2.01
    assert severity(made, "diameter_jump") == "note"
    assert sentence(made, "diameter_jump") == (
        "The diameter changes more than 4-fold from one sample to the next within a branch at 1 place "
        "(first at line 8, sample 6; greatest change 4.02-fold)."
    )


def test_a_thin_daughter_at_a_branch_point_is_no_jump() -> None:
    made = line_of(4, radius=3.0)
    made.parent[3] = 1
    made.position[3] = (2.0, 2.0, 0.0)
    made.radius[3] = 0.2
    assert seen(made, "diameter_jump") is None


def test_jumps_make_a_file_doubtful_by_share_and_count() -> None:
    made = line_of(101, radius=0.5)  # 99 steps between neurite samples
    made.radius[10:20:2] = 2.5  # five beads: ten jumps
    assert severity(made, "diameter_jump") == "doubtful"
    assert severity(made, "diameter_jump", jump_count=11) == "note"
    assert severity(made, "diameter_jump", jump_share=10 / 99) == "note"


# --- soma ---


def test_no_soma() -> None:
    made = healthy()
    made.kind[0] = 3
    assert severity(made, "soma_absent") == "doubtful"
    assert sentence(made, "soma_absent") == (
        "No sample has type 1 (soma); the root at line 3, sample 1 is the reference site."
    )


def test_a_soma_that_is_not_the_root() -> None:
    made = line_of(5, step=10.0)
    made.kind[:2], made.radius[:2] = (3, 1), (0.5, 5.0)
    assert sentence(made, "soma_not_root") == "The soma (line 4, sample 2) is not the root of its tree."
    assert severity(made, "soma_not_root") == "note"


@pytest.mark.parametrize(
    ("radius", "odd"), [(0.0, True), (0.99, True), (1.0, False), (50.0, False), (50.1, True)]
)
def test_a_soma_of_unlikely_size(radius: float, odd: bool) -> None:
    made = healthy()
    made.radius[0] = radius
    assert severity(made, "soma_odd") == ("doubtful" if odd else None)


def test_what_is_said_of_a_soma_s_size() -> None:
    made = healthy()
    made.radius[0] = 0.4
    assert sentence(made, "soma_odd") == (
        "The soma (line 3, sample 1) has the membrane of a sphere of 0.4 µm radius; somata measure 1 "
        "to 50 µm."
    )


def with_soma(position: NDArray[np.float64], radius: float) -> Made:
    """Replace the soma of a straight cell by a chain of samples."""
    n = len(position)
    made = line_of(n + 10, step=3.0)
    made.kind[:n], made.radius[:n], made.position[:n] = 1, radius, position
    made.position[n:, 0] += 20.0
    return made


def test_a_soma_drawn_as_an_outline() -> None:
    angle = np.linspace(0, 2 * np.pi, 12, endpoint=False)
    ring = 6.0 * np.column_stack((np.cos(angle), np.sin(angle), np.zeros(12)))
    assert severity(with_soma(ring, 0.1), "soma_outline") == "note"
    assert sentence(with_soma(ring, 0.1), "soma_outline") == (
        "The soma is drawn as an outline of 12 samples (from line 3, sample 1); it is taken as a "
        "sphere of 6 µm radius."
    )
    assert seen(with_soma(ring, 3.0), "soma_outline") is None


def test_soma_samples_in_one_place() -> None:
    assert sentence(with_soma(np.zeros((2, 3)), 5.0), "soma_coincident") == (
        "1 soma sample lies exactly where another does (first at line 4, sample 2)."
    )
    assert seen(with_soma(np.array([[0, 0, 0], [1e-9, 0, 0]]), 5.0), "soma_coincident") is None


def test_several_somata() -> None:
    made = line_of(10)
    assert seen(made, "soma_several") is None
    made.kind[[5, 8]] = 1
    assert severity(made, "soma_several") == "doubtful"
    assert sentence(made, "soma_several") == (
        "Besides the soma 2 more groups of type-1 samples stand apart from it (first at line 8, sample 6)."
    )


# --- pieces, domains, steps, depth ---


def in_pieces(*samples: int) -> Made:
    """Make straight pieces of steps of 2 µm; the first has the soma, whose radius swallows its stem."""
    made = line_of(sum(samples))
    made.radius[0] = 2.0
    for at in np.cumsum(samples)[:-1]:
        made.parent[at] = -1
        made.position[at:, 1] += 10.0
    return made


@pytest.mark.parametrize(
    ("apart", "expected"),
    [(6, "note"), (7, "doubtful"), (101, "doubtful"), (102, "unfit")],  # 10, 12, 200, 202 µm beside 200 µm
)
def test_pieces_apart_weigh_by_their_cable(apart: int, expected: str) -> None:
    assert severity(in_pieces(102, apart), "piece_apart") == expected


def test_a_connected_cell_has_no_piece_apart() -> None:
    assert seen(in_pieces(50), "piece_apart") is None


def test_what_is_said_of_a_piece_apart() -> None:
    made = in_pieces(40, 6, 9)
    found = [one for one in vet_reconstruction(made.cell()).findings if one.code == "piece_apart"]
    assert [one.sentence for one in found] == [
        "A piece of 9 samples and 16 µm of cable, from line 49, sample 47, is not connected to the soma.",
        "A piece of 6 samples and 10 µm of cable, from line 43, sample 41, is not connected to the soma.",
    ]


def test_without_a_soma_the_piece_with_the_most_cable_is_the_cell() -> None:
    made = in_pieces(6, 40)
    made.kind[0] = 3
    assert sentence(made, "piece_apart") == (
        "A piece of 6 samples and 10 µm of cable, from line 3, sample 1, "
        "is not connected to the longest piece."
    )


def test_the_soma_s_piece_is_the_cell_wherever_it_stands() -> None:
    made = in_pieces(6, 40)
    made.kind[[0, 6]] = 3, 1
    assert sentence(made, "piece_apart").startswith(
        "A piece of 6 samples and 10 µm of cable, from line 3, sample 1,"
    )


def test_many_pieces_are_summed_up() -> None:
    twenty = in_pieces(200, *[3] * 20)
    assert sum(one.code == "piece_apart" for one in vet_reconstruction(twenty.cell()).findings) == 20
    more = in_pieces(200, *[3] * 25)
    found = [one for one in vet_reconstruction(more.cell()).findings if one.code == "piece_apart"]
    assert len(found) == 20
    assert found[-1].sentence == (
        "6 shorter pieces of together 24 µm of cable are not connected to the soma either (first at "
        "line 260, sample 258)."
    )
    assert sum(one.count for one in found) == 25


def test_types_beyond_the_four() -> None:
    made = line_of(10)
    assert seen(made, "domain_unknown") is None
    made.kind[4:7], made.kind[8] = 0, 7
    assert severity(made, "domain_unknown") == "note"
    assert sentence(made, "domain_unknown") == (
        "4 of 10 samples have a type other than soma 1, axon 2, basal 3 and apical 4 (first at line "
        "7, sample 5): 0 (3 samples), 7 (1 sample)."
    )


def test_an_axon_without_dendrites() -> None:
    made = line_of(10)
    made.kind[1:] = 2
    assert severity(made, "axon_only") == "doubtful"
    assert sentence(made, "axon_only") == "All 9 neurite samples are axon (type 2); there is no dendrite."
    made.kind[9] = 3
    assert seen(made, "axon_only") is None


def test_samples_in_one_place() -> None:
    made = healthy()
    assert seen(made, "samples_coincident") is None
    made.position[20] = made.position[made.parent[20]]
    assert severity(made, "samples_coincident") == "note"
    assert sentence(made, "samples_coincident") == (
        "1 neurite sample lies exactly where the parent sample does (first at line 23, sample 21)."
    )


def with_step(length: float, samples: int = 40) -> Made:
    made = line_of(samples, step=1.0)
    made.position[20:, 0] += length - 1.0
    return made


def test_a_long_step_by_length_and_by_ratio() -> None:
    assert seen(with_step(30.0), "step_long") is None
    assert seen(with_step(30.1), "step_long") is not None
    assert seen(with_step(30.1), "step_long", step_ratio=31.0) is None
    assert seen(with_step(20.1), "step_long", step_least_um=0.0) is not None
    assert seen(with_step(30.1, samples=21), "step_long") is None  # 19 steps say nothing


def test_long_steps_weigh_by_their_share_of_the_cable() -> None:
    made = with_step(50.0, samples=1007)  # the rest is 1,000 µm from the soma's surface
    assert severity(made, "step_long") == "note"
    assert severity(with_step(60.0, samples=1007), "step_long") == "doubtful"
    assert sentence(made, "step_long") == (
        "1 step is longer than 30 µm, where the median step is 1 µm (first at line 23, sample 21; "
        "longest 50 µm; 4.7 % of the cable)."
    )


def test_a_flat_tracing() -> None:
    made = healthy()
    made.position[:, 2] = 0.0
    assert severity(made, "flat") == "doubtful"
    assert sentence(made, "flat").endswith(" µm wide and 0 µm deep: the depth was not traced, or was lost.")
    assert seen(made, "flat", flat_samples=len(made.kind) + 1) is None
    width = np.ptp(made.position, axis=0).max()
    made.position[5, 2] = 0.0101 * width
    assert seen(made, "flat") is None


def zigzag(samples: int, every: int, axis: int = 2) -> Made:
    """Make a line that turns back steeply at one sample in `every`."""
    made = line_of(samples, step=1.0)
    made.position[every::every, axis] = 5.0
    return made


@pytest.mark.parametrize(("every", "expected"), [(19, "doubtful"), (21, None)])
def test_a_zigzag_in_depth_at_its_share(every: int, expected: str | None) -> None:
    assert severity(zigzag(1000, every), "depth_zigzag", zigzag_stride=1) == expected


def test_a_zigzag_is_the_depth_s_only_if_x_and_y_do_not_share_it() -> None:
    made = zigzag(400, 4)
    assert severity(made, "depth_zigzag") == "doubtful"
    made.position[2::4, 1] = 5.0
    assert seen(made, "depth_zigzag") is None
    assert seen(zigzag(400, 4, axis=1), "depth_zigzag") is None


def test_a_slow_zigzag_shows_over_several_samples() -> None:
    made = line_of(401, step=0.5)
    made.position[:, 2] = 2.0 * np.abs((np.arange(401) + 4) % 8 - 4)  # up four samples, down four
    assert sentence(made, "depth_zigzag") == (
        "Over 4 samples to either side the depth turns back steeply at 75 % of the samples, against "
        "0 % in x or y."
    )
    assert seen(made, "depth_zigzag", zigzag_stride=1) is not None
    assert seen(made, "depth_zigzag", zigzag_samples=401) is None


# --- the catalogue ---


def raised_by_reading() -> tuple[str, ...]:
    data = b"1;1;0;0;0;5;-1;9\n2;3;10;0;0;1;1;9\n"
    return tuple(one.code for one in reconstruct(data, file="made.swc", cell="made").findings)


def chain_soma() -> Made:
    return with_soma(np.zeros((2, 3)), 5.0)


def outline_soma() -> Made:
    angle = np.linspace(0, 2 * np.pi, 12, endpoint=False)
    return with_soma(6.0 * np.column_stack((np.cos(angle), np.sin(angle), np.zeros(12))), 0.1)


def typed(kind: int, samples: slice) -> Made:
    made = line_of(10)
    made.kind[samples] = kind
    return made


def flattened() -> Made:
    made = healthy()
    made.position[:, 2] = 0.0
    return made


def coarse() -> Made:
    made = healthy(300)
    made.radius[1:] = 0.2 + 0.05 * (np.arange(len(made.radius) - 1) % 5)
    return made


def beaded() -> Made:
    made = line_of(30)
    made.radius[10] = 9.0
    made.position[20] = made.position[19]
    return made


EXAMPLES: tuple[Callable[[], Made], ...] = (
    lambda: with_comments("SCALE 2 2 2", "SHRINKAGE_CORRECTION 2 2 2", "in voxels"),
    lambda: in_unit(healthy(), 1000.0),
    lambda: with_radii(0.0, 1),
    lambda: with_radii(-1.0, 1),
    lambda: with_radii(-2.0, 1),
    lambda: branching(100, 0.05),
    lambda: with_axon(0.3),
    coarse,
    beaded,
    chain_soma,
    outline_soma,
    lambda: typed(3, slice(0, 1)),
    lambda: typed(1, slice(5, 6)),
    lambda: typed(9, slice(5, 6)),
    lambda: typed(2, slice(1, None)),
    lambda: line_of(10, soma=True, radius=0.2),
    lambda: in_pieces(20, 5),
    lambda: with_step(80.0),
    flattened,
    lambda: zigzag(400, 4),
)


def shifted_root() -> Made:
    made = line_of(5, step=10.0)
    made.kind[:2], made.radius[:2] = (3, 1), (0.5, 0.5)
    return made


def test_every_entry_of_the_catalogue_can_be_raised_and_nothing_else_is() -> None:
    raised = set(raised_by_reading())
    for example in (*EXAMPLES, shifted_root):
        raised |= {one.code for one in vet_reconstruction(example().cell()).findings}
    raised |= {one.code for one in mend_radii(with_radii(0.0, 1).cell()).findings}
    assert raised == set(CATALOGUE)


@pytest.mark.parametrize("code", CATALOGUE)
def test_every_entry_says_what_it_does(code: str) -> None:
    kind = CATALOGUE[code]
    assert kind.severity in ("note", "doubtful", "unfit")
    assert kind.effect.endswith(".")
    assert kind.explanation.endswith(".")
    assert len(kind.title) < 60


def test_the_explanations_name_thresholds_that_exist() -> None:
    words = {word.strip("(),.;:=") for kind in CATALOGUE.values() for word in kind.explanation.split()}
    known = set(reasons()) | set(CATALOGUE) | {"unit_um", "soma_rule", "SHRINKAGE_CORRECTION"}
    assert {word for word in words if "_" in word and "[" not in word} <= known
