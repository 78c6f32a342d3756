"""How the methods are cited: BibTeX entries by key, and citations in a text.

A citation stands between ⟨ and ⟩, keys separated by spaces: a steady current ⟨Rall1959⟩.
"""

import re
from collections.abc import Iterable
from typing import NamedTuple

_CITED = re.compile("⟨([^⟨⟩]*)⟩")
#: Nobody looked titles, volumes and pages up, and the entries say so.
_NOTE = "Bibliographic data from memory: check before printing"


class _Article(NamedTuple):
    author: str
    year: int
    title: str
    journal: str
    volume: str
    pages: str


_ARTICLES = {
    "AgmonSnirSegev1993": _Article(
        "Agmon-Snir, Hagai and Segev, Idan",
        1993,
        "Signal delay and input synchronization in passive dendritic structures",
        "Journal of Neurophysiology",
        "70",
        "2066--2085",
    ),
    "Andrews1954": _Article(
        "Andrews, Fred C.",
        1954,
        "Asymptotic behavior of some rank tests for analysis of variance",
        "The Annals of Mathematical Statistics",
        "25",
        "724--736",
    ),
    "Cannon1998": _Article(
        "Cannon, R. C. and Turner, D. A. and Pyapali, G. K. and Wheal, H. V.",
        1998,
        "An on-line archive of reconstructed hippocampal neurons",
        "Journal of Neuroscience Methods",
        "84",
        "49--54",
    ),
    "Cliff1993": _Article(
        "Cliff, Norman",
        1993,
        "Dominance statistics: ordinal analyses to answer ordinal questions",
        "Psychological Bulletin",
        "114",
        "494--509",
    ),
    "Efron1987": _Article(
        "Efron, Bradley",
        1987,
        "Better bootstrap confidence intervals",
        "Journal of the American Statistical Association",
        "82",
        "171--185",
    ),
    "Harris2020": _Article(
        "Harris, Charles R. and others",
        2020,
        "Array programming with {NumPy}",
        "Nature",
        "585",
        "357--362",
    ),
    "Holm1979": _Article(
        "Holm, Sture",
        1979,
        "A simple sequentially rejective multiple test procedure",
        "Scandinavian Journal of Statistics",
        "6",
        "65--70",
    ),
    "Holmes1989": _Article(
        "Holmes, William R.",
        1989,
        "The role of dendritic diameters in maximizing the effectiveness of synaptic inputs",
        "Brain Research",
        "478",
        "127--137",
    ),
    "HyndmanFan1996": _Article(
        "Hyndman, Rob J. and Fan, Yanan",
        1996,
        "Sample quantiles in statistical packages",
        "The American Statistician",
        "50",
        "361--365",
    ),
    "KruskalWallis1952": _Article(
        "Kruskal, William H. and Wallis, W. Allen",
        1952,
        "Use of ranks in one-criterion variance analysis",
        "Journal of the American Statistical Association",
        "47",
        "583--621",
    ),
    "Lazic2010": _Article(
        "Lazic, Stanley E.",
        2010,
        "The problem of pseudoreplication in neuroscientific studies: is it affecting your analysis?",
        "BMC Neuroscience",
        "11",
        "5",
    ),
    "MannWhitney1947": _Article(
        "Mann, Henry B. and Whitney, Donald R.",
        1947,
        "On a test of whether one of two random variables is stochastically larger than the other",
        "The Annals of Mathematical Statistics",
        "18",
        "50--60",
    ),
    "Newcombe2006": _Article(
        "Newcombe, Robert G.",
        2006,
        "Confidence intervals for an effect size measure based on the {Mann--Whitney} statistic. {Part} 2: "
        "asymptotic methods and evaluation",
        "Statistics in Medicine",
        "25",
        "559--573",
    ),
    "Rall1959": _Article(
        "Rall, Wilfrid",
        1959,
        "Branching dendritic trees and motoneuron membrane resistivity",
        "Experimental Neurology",
        "1",
        "491--527",
    ),
    "Rall1969": _Article(
        "Rall, Wilfrid",
        1969,
        "Time constants and electrotonic length of membrane cylinders and neurons",
        "Biophysical Journal",
        "9",
        "1483--1508",
    ),
    "RallRinzel1973": _Article(
        "Rall, Wilfrid and Rinzel, John",
        1973,
        "Branch input resistance and steady attenuation for input to one branch of a dendritic neuron model",
        "Biophysical Journal",
        "13",
        "648--687",
    ),
    "RappYaromSegev1992": _Article(
        "Rapp, Moshe and Yarom, Yosef and Segev, Idan",
        1992,
        "The impact of parallel fiber background activity on the cable properties of cerebellar "
        "{Purkinje} cells",
        "Neural Computation",
        "4",
        "518--533",
    ),
    "Steiger2004": _Article(
        "Steiger, James H.",
        2004,
        "Beyond the {F} test: effect size confidence intervals and tests of close fit in the analysis of "
        "variance and contrast analysis",
        "Psychological Methods",
        "9",
        "164--182",
    ),
    "TomczakTomczak2014": _Article(
        "Tomczak, Maciej and Tomczak, Ewa",
        2014,
        "The need to report effect size estimates revisited",
        "Trends in Sport Sciences",
        "21",
        "19--25",
    ),
    "Virtanen2020": _Article(
        "Virtanen, Pauli and others",
        2020,
        "{SciPy} 1.0: fundamental algorithms for scientific computing in {Python}",
        "Nature Methods",
        "17",
        "261--272",
    ),
    "WeidemanTrefethen2007": _Article(
        "Weideman, J. A. C. and Trefethen, L. N.",
        2007,
        "Parabolic and hyperbolic contours for computing the {Bromwich} integral",
        "Mathematics of Computation",
        "76",
        "1341--1356",
    ),
}
_SOFTWARE = "Morphotone"
KEYS = frozenset({*_ARTICLES, _SOFTWARE})


def cited(texts: Iterable[str]) -> tuple[str, ...]:
    """Return the keys that texts cite, in the alphabet's order.

    Raises
    ------
    KeyError
        A text cites what is not among `KEYS`.
    """
    keys = {key for text in texts for found in _CITED.findall(text) for key in found.split()}
    unknown = sorted(keys - KEYS)
    if unknown:
        raise KeyError(f"no reference {unknown[0]}")
    return tuple(sorted(keys))


def without_citations(text: str) -> str:
    """Return text with nothing in it that could be taken for a citation or a symbol."""
    return text.translate(dict.fromkeys(map(ord, "⟨⟩‹›")))


def split_citations(text: str) -> list[tuple[str, tuple[str, ...]]]:
    """Return a text as pieces, each with the keys of the citation that follows it (none after the last)."""
    parts = _CITED.split(text)
    return [
        (parts[i], tuple(parts[i + 1].split()) if i + 1 < len(parts) else ()) for i in range(0, len(parts), 2)
    ]


def bibtex(keys: Iterable[str], version: str) -> str:
    """Return a BibTeX file with these entries.

    Parameters
    ----------
    keys : iterable of str
        Among `KEYS`.
    version : str
        Of Morphotone, as the record has it.
    """
    return "\n".join(
        _entry("misc", key, _software(version)) if key == _SOFTWARE else _entry("article", key, _fields(key))
        for key in keys
    )


def _fields(key: str) -> dict[str, str]:
    return {name: str(value) for name, value in _ARTICLES[key]._asdict().items()} | {"note": _NOTE}


def _software(version: str) -> dict[str, str]:
    return {
        "author": "{The Morphotone developers}",
        "year": "2026",
        "title": "Morphotone: electrotonic structure of folders of reconstructed neurons",
        "note": f"Version {version}",
    }


def _entry(kind: str, key: str, fields: dict[str, str]) -> str:
    lines = "".join(f"  {name} = {{{value}}},\n" for name, value in fields.items())
    return f"@{kind}{{{key},\n{lines}}}\n"
