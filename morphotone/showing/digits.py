"""Numbers as a paper prints them: as many digits as the spread bears out, the same for mean and SD."""

import math

_OF_SPREAD = 2  # significant digits of an SD
_ALONE = 3  # significant digits of a number without a spread
_LEAST_P = 1e-4
MINUS = "−"


def decimals(spread: float, size: float, least: int = 0) -> int:
    """Return with how many decimals a value is shown beside its spread; negative for tens, hundreds, ….

    The spread keeps two significant digits. Where there is none (one value, or all equal) the value keeps
    three, or all if it is whole.

    Parameters
    ----------
    spread : float
        SD or distance of the quartiles; NaN or 0 for none.
    size : float
        The value.
    least : int
        Significant digits the value keeps however wide the spread; 0 for as few as may be.
    """
    if math.isfinite(spread) and spread > 0:
        of_spread = _OF_SPREAD - 1 - _exponent(spread, _OF_SPREAD)
        return max(of_spread, least - 1 - _exponent(size, least)) if least and size else of_spread
    if not math.isfinite(size) or size == round(size):
        return 0
    return _ALONE - 1 - _exponent(size, _ALONE)


def fixed(value: float, places: int) -> str:
    """Return a number with so many decimals, rounded to tens or hundreds where they are negative.

    Empty for NaN; the minus is a minus sign, and zero has none.
    """
    if math.isnan(value):
        return ""
    text = f"{round(value, places):.{max(places, 0)}f}"
    text = text.removeprefix("-") if float(text) == 0 else text
    return text.replace("-", MINUS)


def p_value(p: float) -> str:
    """Return a p value with two significant digits and two to four decimals; a dash for NaN."""
    if math.isnan(p):
        return "–"
    if p < _LEAST_P:
        return "< 0.0001"
    return f"{p:.{min(max(1 - _exponent(p, 2), 2), 4)}f}"


def _exponent(value: float, digits: int) -> int:
    """Return the power of ten of a number's first digit once it is rounded to so many digits."""
    return int(f"{value:.{digits - 1}e}".partition("e")[2])
