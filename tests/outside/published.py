"""How a value from outside is written down, and the sources that several tests cite.

Every row carries what was published or computed, its tolerance and how it is known. Rows whose source
nobody looked up say "from memory" in the name of the test.
"""

from dataclasses import dataclass

import pytest

LOOKED_UP_VALUE = "looked up: value"
LOOKED_UP_FORMULA = "looked up: formula; number computed from it"
MEMORY = "from memory: attribution of the formula; number computed from it"
MEMORY_VALUE = "from memory: value, not verified"
DERIVED = "derived; checked by an independent finite-difference solution"

ERMENTROUT = (
    "G. B. Ermentrout, Univ. Pittsburgh class notes 'Passive cell models' (1998), eq. 14: "
    "R_inf = 2 sqrt(R_m R_a)/(pi d^1.5), lambda = sqrt(d R_m/(4 R_a))"
)
RALL_1959 = "Rall 1959 Exp Neurol 1:491-527; Rall 1977 Handbook of Physiology (Nervous System I) 39-97"
GABBIANI_COX = (
    "Gabbiani & Cox, Mathematics for Neuroscientists: R_in along a sealed cable, "
    "1/(2 pi a lambda g_L [tanh(x/lambda) + tanh((l-x)/lambda)]), parameters of the book's plotting script"
)
AC_CABLE = "AC cable theory: Rall & Rinzel 1973 Biophys J 13:648-688; Koch 1999, ch. 2-3"
RALL_RINZEL = (
    "Rall & Rinzel 1973, Branch input resistance and steady attenuation for input to one branch of a "
    "dendritic neuron model, Biophys J 13:648-688"
)
YOUNG_FREEDMAN = (
    "Young & Freedman, University Physics, Challenge Problem 26.93 'Attenuator chains and axons' "
    "and its worked solution"
)
ASHCROFT = "Ashcroft 1980 J Exp Biol 86:249, stick-insect muscle fibres, abstract"
DATA_HANDBOOK = "Mechanical Engineer's Data Handbook p. 130: insulated-tip fin, tanh(mL)/(mL)"
CONICAL_PIN = "Gardner 1945 Trans ASME 67:621; Incropera Table 3.5: conical pin fin"
ABRAMOWITZ_98 = "Abramowitz & Stegun 1964 (AMS 55) Table 9.8, excerpt reproduced in a test source"
ABRAMOWITZ_911 = "Abramowitz & Stegun 1964 (AMS 55) Table 9.11, excerpt in the same place"


@dataclass(frozen=True)
class Published:
    """One value from outside."""

    id: str
    given: tuple
    expected: float
    rel_tol: float
    source: str
    known: str


def rows(source, known, rel_tol, *values):
    """Return test parameters for rows (id, given, expected) that share source and tolerance."""
    return [
        pytest.param(
            Published(name, given, expected, rel_tol, source, known),
            id=name if "memory" not in known else f"{name} (from memory)",
        )
        for name, given, expected in values
    ]


def assert_published(got, row):
    """Compare with the row's value within its tolerance; the message cites the source."""
    assert abs(got - row.expected) <= row.rel_tol * abs(row.expected), (
        f"{row.id}: {got!r}, published {row.expected!r} ± {row.rel_tol:g} ({row.source}; {row.known})"
    )
