"""Published ranges of what has to be assumed, each with its source; a value outside earns a warning.

Sources marked "looked up" stand in the design's check values; a range nobody looked up is called usual,
not published.
"""

from dataclasses import dataclass


@dataclass(frozen=True)
class PublishedRange:
    """Where published values of one quantity lie.

    Attributes
    ----------
    low, high : float
        Ends of the range, both inside it, in ``unit``.
    unit : str
        Unit of the ends; empty for a ratio.
    source : str
        Who gave the two ends.
    provenance : str
        ``"looked up"`` in that source, ``"from memory"`` or chosen here.
    other_units : tuple of (str, float)
        Units people also write the quantity in, and what a value in them is multiplied with.
    hint : str
        What a value outside usually means.
    """

    low: float
    high: float
    unit: str
    source: str
    provenance: str
    other_units: tuple[tuple[str, float], ...] = ()
    hint: str = ""

    @property
    def standing(self) -> str:
        """``"published"`` if the range was looked up, otherwise ``"usual"``."""
        return "published" if "looked up" in self.provenance else "usual"

    @property
    def in_words(self) -> str:
        """The range, its unit, source and provenance, in one phrase."""
        unit = f" {self.unit}" if self.unit else ""
        return f"{self.low:g} to {self.high:g}{unit} ({self.source}; {self.provenance})"

    def warning(self, where: str, value: float) -> str | None:
        """Return the sentence for a value outside the range, None for one inside.

        Parameters
        ----------
        where : str
            Table and key the value was given under.
        value : float
            The value, in ``unit``.
        """
        if self.low <= value <= self.high:
            return None
        advice = [f"it would lie inside if it was meant in {unit}" for unit in self._meant_in(value)]
        advice += [self.hint] if self.hint else []
        tail = "".join(f"; {words}" for words in advice)
        return f"{where} = {value!r} lies outside the {self.standing} {self.in_words}{tail}."

    def _meant_in(self, value: float) -> list[str]:
        return [
            f"{unit} ({value * factor:g} {self.unit})"
            for unit, factor in self.other_units
            if self.low <= value * factor <= self.high
        ]


_R_M_UNITS = (("kohm cm2", 1e3), ("ohm m2", 1e4))
_R_M_HIGH = "highest: rat Purkinje cell, Roth & Häusser 2001 J Physiol 535:445-472"

# Keyed by field name; a domain with a range of its own has "domain.field".
RANGES = {
    "R_m_ohm_cm2": PublishedRange(
        2500.0,
        141000.0,
        "ohm cm2",
        "lowest: set assumed for cat retinal ganglion cells, Koch, Poggio & Torre 1982 "
        f"Phil Trans R Soc B 298:227-264; {_R_M_HIGH}",
        "looked up",
        _R_M_UNITS,
    ),
    # An impaled soma leaks: its fitted R_m is one to two orders below its dendrites'.
    "soma.R_m_ohm_cm2": PublishedRange(
        100.0,
        141000.0,
        "ohm cm2",
        "lowest: somata of cat motoneurones, Clements & Redman 1989 J Physiol 409:63-87; " + _R_M_HIGH,
        "looked up",
        _R_M_UNITS,
    ),
    "R_i_ohm_cm": PublishedRange(
        70.0,
        250.0,
        "ohm cm",
        "lowest: cat motoneurones, Fleshman, Segev & Burke 1988 J Neurophysiol 60:60-85; highest: "
        "guinea-pig Purkinje cells, Rapp, Segev & Yarom 1994 J Physiol 474:101-118",
        "looked up",
        (("ohm m", 1e2), ("kohm cm", 1e3)),
    ),
    "C_m_uF_cm2": PublishedRange(
        0.5,
        2.4,
        "uF/cm2",
        "lowest: human L2/3 pyramidal cells, Eyal et al. 2016 eLife 5:e16553; highest: rat ventral-horn "
        "neurons, J Neurophysiol 1998;79:2485-2502",
        "looked up",
        (("F/m2", 1e2), ("fF/um2", 0.1)),
    ),
    "spine_factor": PublishedRange(
        1.0,
        4.2,
        "",
        "whole guinea-pig Purkinje cell 3, and 4.2 computed for a shaft of 1 um with 10 spines per um of "
        "1 um2 each, areas and spines of Rapp, Segev & Yarom 1994 J Physiol 474:101-118",
        "areas and spines looked up",
        hint="the factor is (shaft + spines)/shaft area, not spines per um",
    ),
    "unit_um": PublishedRange(
        0.001,
        1000.0,
        "um",
        "a nanometre to a millimetre; the SWC standard says micrometres, 1",
        "ends chosen here",
        hint="the key says how many um one unit of the file is",
    ),
    "shrinkage_xy": PublishedRange(
        1.0,
        1.25,
        "",
        "sections shrink by 0 to 20 % in x and y",
        "from memory",
        hint="the factor multiplies coordinates, so give 1/(fraction that remained)",
    ),
    "shrinkage_z": PublishedRange(
        1.0,
        4.0,
        "",
        "mounted sections keep 25 to 100 % of their thickness",
        "from memory",
        hint="the factor multiplies coordinates, so give 1/(fraction that remained)",
    ),
    "diameter_factor": PublishedRange(
        0.5,
        2.0,
        "",
        "diameters of one cell traced twice may differ, by less than a factor of two",
        "from memory",
        hint="the factor multiplies diameters and is no percentage",
    ),
    "diameter_offset_um": PublishedRange(
        -0.2,
        0.2,
        "um",
        "one resolution width lambda/(2 NA) of a light microscope, 0.196 um at 550 nm and NA 1.4",
        "formula looked up",
        (("nm", 1e-3),),
    ),
    "soma_shunt_nS": PublishedRange(
        0.0,
        18.4,
        "nS",
        "no more than the whole membrane conductance of a rat L2/3 pyramidal cell, 7.2 to 18.4 nS, "
        "Trevelyan & Jack 2002 J Physiol 539:623-636",
        "looked up",
        (("pS", 1e-3),),
    ),
    "hz": PublishedRange(
        0.0,
        10000.0,
        "Hz",
        "a membrane of R_m and C_m alone has been compared with recordings up to about 10 kHz",
        "from memory",
    ),
}


def range_of(field: str, domain: str = "") -> PublishedRange:
    """Return the published range of a field, the domain's own where it has one."""
    return RANGES.get(f"{domain}.{field}", RANGES[field])
