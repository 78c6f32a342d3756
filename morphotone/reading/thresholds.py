"""Every number the vetting compares with, each with its reason; an assumptions file may set any of them."""

from dataclasses import dataclass, field, fields


def _because(reason: str) -> dict[str, str]:
    """Return the metadata that carry a threshold's reason."""
    return {"reason": reason}


@dataclass(frozen=True)
class Thresholds:
    """Limits of the vetting: lengths in µm, shares from 0 to 1, the rest counts and ratios.

    Each field's metadata hold the reason of its default; `reasons` lists them. A default that rests on a
    published number names it; the others are common practice, or were set so that careful tracings pass.
    """

    few_samples: int = field(
        default=20,
        metadata=_because(
            "fewer samples than this do not show what is typical of a file, so nothing is concluded"
        ),
    )
    drawn_winding: float = field(
        default=1.02,
        metadata=_because(
            "cable no longer than the box's diagonal is a cylinder drawn straight, which may be of any size"
        ),
    )
    branched_tips: int = field(
        default=3,
        metadata=_because(
            "with three tips there is a branch point; models drawn as plain cylinders have fewer, "
            "and may be of any size"
        ),
    )
    unit_extent_um: float = field(
        default=5000.0,
        metadata=_because(
            "dendrites reach 1 to 2 mm; only axons span 5 mm or more (about 1 cm in a mouse brain, "
            "up to metres in large animals), so beyond it the steps and the radii must bear the size "
            "out (from memory)"
        ),
    )
    unit_step_um: float = field(
        default=100.0,
        metadata=_because(
            "tracers click or sample every 0.1 to 30 µm, even along axons of 1 cm; half of all steps "
            "above 100 µm over more than 5 mm is what nanometres read as micrometres look like "
            "(common practice)"
        ),
    )
    unit_largest_radius_um: float = field(
        default=600.0,
        metadata=_because(
            "the squid's giant axon and the largest molluscan somata measure about 1 mm across; "
            "nothing is thicker (from memory)"
        ),
    )
    unit_typical_radius_um: float = field(
        default=5.0,
        metadata=_because(
            "stem dendrites of the largest motoneurons are about 10 µm thick; no branched cell has "
            "half of its samples thicker than that, but voxels of 4 to 10 nm read as micrometres "
            "give it (from memory)"
        ),
    )
    unit_thinnest_radius_um: float = field(
        default=0.01,
        metadata=_because(
            "the thinnest neurites are about 50 nm thick and one microtubule 25 nm; half of all "
            "samples thinner than 20 nm is what millimetres or metres read as micrometres give (from "
            "memory)"
        ),
    )
    mended_share: float = field(
        default=0.1,
        metadata=_because(
            "up to a tenth of the radii can be borrowed from neighbours without the result becoming "
            "the neighbours'"
        ),
    )
    mended_few: float = field(
        default=0.01,
        metadata=_because(
            "one radius in a hundred borrowed from its neighbour changes no result that matters"
        ),
    )
    constant_share: float = field(
        default=0.98,
        metadata=_because("one radius for 98 % of all neurite samples was typed in, not measured"),
    )
    constant_samples: int = field(
        default=50,
        metadata=_because(
            "hand-made models with one radius have a few samples; a branched tracing of more than 50 "
            "has measured none, and λ, X and every attenuation then follow from the value typed in"
        ),
    )
    placeholder_share: float = field(
        default=0.8,
        metadata=_because(
            "tracings by eye give one diameter class up to about half of a domain's samples; four "
            "fifths were not measured one by one"
        ),
    )
    placeholder_samples: int = field(
        default=50, metadata=_because("a short axon stump or a single stem may well have one diameter")
    )
    placeholder_membrane: float = field(
        default=0.25,
        metadata=_because(
            "below a quarter of the neurites' membrane a wrong diameter moves R_in by a few per cent"
        ),
    )
    optics_diameter_um: float = field(
        default=0.196,
        metadata=_because("lateral resolution λ/(2 NA) after Abbe: 550 nm, NA 1.4 (formula looked up)"),
    )
    optics_membrane: float = field(
        default=0.5,
        metadata=_because("with half of the membrane on unresolved diameters the cell's result is a guess"),
    )
    quantised_diameters: int = field(
        default=12,
        metadata=_because("a dozen diameters or fewer are steps of a scale, not measurements of their own"),
    )
    quantised_classes: int = field(
        default=3, metadata=_because("three diameters or fewer are classes such as thick and thin")
    )
    quantised_samples: int = field(
        default=200,
        metadata=_because("a small tree may have a dozen diameters because it has a dozen branches"),
    )
    apart_share: float = field(
        default=0.05,
        metadata=_because(
            "less than a twentieth of the cable missing moves R_in by less than other unknowns do"
        ),
    )
    apart_most: float = field(
        default=0.5, metadata=_because("with half of the cable elsewhere the analysed piece is not the cell")
    )
    apart_listed: int = field(
        default=20,
        metadata=_because("a list of twenty pieces can be read; the rest is summed up in its last line"),
    )
    soma_least_um: float = field(
        default=1.0,
        metadata=_because("the smallest somata, of insects, are 3 to 4 µm across (from memory)"),
    )
    soma_most_um: float = field(
        default=50.0,
        metadata=_because(
            "somata of the largest motoneurons and pyramidal cells are 60 to 100 µm across (from "
            "memory); giant molluscan somata need a higher limit"
        ),
    )
    jump_ratio: float = field(
        default=4.0,
        metadata=_because(
            "within a branch a neurite does not change its diameter fourfold from one sample to the next"
        ),
    )
    jump_share: float = field(
        default=0.02,
        metadata=_because("a bouton or varicosity here and there is real; one sample in fifty is noise"),
    )
    jump_count: int = field(
        default=10, metadata=_because("fewer places than this are slips of the pen, in a small file too")
    )
    step_ratio: float = field(
        default=20.0, metadata=_because("twenty times the file's own median step stands out in any tracing")
    )
    step_least_um: float = field(
        default=30.0, metadata=_because("shorter steps are usual along axons, however dense the rest is")
    )
    step_share: float = field(
        default=0.05,
        metadata=_because("a twentieth of the cable drawn as straight lines shortens it noticeably"),
    )
    flat_ratio: float = field(
        default=0.01,
        metadata=_because("even ganglion cells of the retina are deeper than a hundredth of their width"),
    )
    flat_samples: int = field(default=50, metadata=_because("small drawn models are flat on purpose"))
    zigzag_samples: int = field(
        default=100, metadata=_because("in a few dozen steps two or three chance turns make a share")
    )
    zigzag_stride: int = field(
        default=4,
        metadata=_because(
            "four samples to either side see drifts of the focus as well as single-sample jitter"
        ),
    )
    zigzag_share: float = field(
        default=0.05,
        metadata=_because("careful tracings turn back steeply in depth at fewer than one sample in fifty"),
    )
    zigzag_ratio: float = field(
        default=3.0,
        metadata=_because("a neurite that winds in all directions is no artefact of the depth axis"),
    )


DEFAULTS = Thresholds()


def reasons() -> dict[str, str]:
    """Return the reason of every threshold, by its name, in the order of the fields."""
    return {entry.name: entry.metadata["reason"] for entry in fields(Thresholds)}
