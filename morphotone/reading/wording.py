"""Numbers as they stand in a finding's sentence."""


def number(value: float) -> str:
    """Return three significant digits below 1000, whole numbers with thousands separated from there on."""
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.3g}"


def percent(share: float) -> str:
    """Return a share as per cent: two digits below 10 %, three above 99 %, so that only all is 100 %."""
    if share > 0.99:
        return "100 %" if share > 1 - 1e-9 else f"{min(100 * share, 99.9):.1f} %"
    return f"{100 * share:.2g} %" if share < 0.1 else f"{100 * share:.0f} %"


def counted(count: int, singular: str, plural: str = "") -> str:
    """Return a count with its noun: ``1 sample``, ``1,204 samples``."""
    return f"{count:,} {singular if count == 1 else plural or singular + 's'}"
