"""Text to Markdown and LaTeX, so that a name that looks like markup is only a name.

What stands between ‹ and › is a symbol of the trade: LaTeX sets it in math, Markdown as it is.
"""

import re

#: A "<" before a space, a ">" behind one and an underscore within a word mean nothing to Markdown.
_MARKDOWN = re.compile(r"[\\`*{}\[\]|$~^@&#]|<(?=\S)|(?<=\S)>|(?<![^\W_])_|_(?![^\W_])")
_SYMBOL = re.compile("‹([^‹›]*)›")
_CONTROL = re.compile(r"[\x00-\x1f\x7f\x85\u2028\u2029]+")
_NAMES = (
    *("alpha", "beta", "gamma", "delta", "varepsilon", "zeta", "eta", "theta", "iota", "kappa", "lambda"),
    *("nu", "xi", "pi", "rho", "sigma", "tau", "upsilon", "varphi", "chi", "psi", "omega"),
    *("Gamma", "Delta", "Theta", "Lambda", "Xi", "Pi", "Sigma", "Upsilon", "Phi", "Psi", "Omega"),
)
_GREEK = dict(zip("αβγδεζηθικλνξπρστυφχψωΓΔΘΛΞΠΣΥΦΨΩ", _NAMES, strict=True))
_LATEX = {
    "\\": r"\textbackslash{}",
    **{character: f"\\{character}" for character in "{}$&#_%"},
    "^": r"\textasciicircum{}",
    "~": r"\textasciitilde{}",
    "<": r"\textless{}",
    ">": r"\textgreater{}",
    "|": r"\textbar{}",
    # After \\ an asterisk or a bracket would be an option of the line break.
    "[": "{[}",
    "]": "{]}",
    "*": "{*}",
    "µ": r"\textmu{}",
    "μ": r"\textmu{}",
    **{letter: f"$\\{name}$" for letter, name in _GREEK.items()},
    "Ω": r"$\Omega$",  # the ohm sign, beside the Greek letter above
    "²": "$^2$",
    "³": "$^3$",
    "±": r"$\pm$",
    "×": r"$\times$",
    "·": r"$\cdot$",
    "−": "$-$",
    "≤": r"$\leq$",
    "≥": r"$\geq$",
    "∞": r"$\infty$",
    "°": r"\textdegree{}",
    "–": "--",
    "—": "---",
    "…": r"\ldots{}",
    "’": "'",
    "‘": "`",
    "“": "``",
    "”": "''",
    "\u00a0": "~",
}
_IN_MATH = {letter: f"\\{name} " for letter, name in _GREEK.items()} | {"∞": r"\infty "}


def one_line(text: str) -> str:
    """Return text with control characters and line ends as single spaces."""
    return _CONTROL.sub(" ", text)


def markdown(text: str) -> str:
    """Return text for Markdown, in a table or out of one: punctuation that means something is escaped."""
    shown = _SYMBOL.sub(r"\1", one_line(text))
    return _MARKDOWN.sub(r"\\\g<0>", shown)


def latex(text: str) -> str:
    """Return text for LaTeX; letters beyond Latin and Greek are left, for an engine that knows them."""
    done: list[str] = []
    for odd, part in enumerate(_SYMBOL.split(one_line(text))):  # symbols at the odd places
        for new in [_math(part)] if odd % 2 else [_LATEX.get(character, character) for character in part]:
            if new[0] == "$" and done and done[-1][0] == "$":  # one formula, so that λ² keeps its exponent
                done.append(f"{done.pop()[:-1]} {new[1:]}")  # the space ends the name of a letter
            else:
                done.append(new)
    return "".join(done)


def _math(symbol: str) -> str:
    """Return a symbol as a formula; what follows an underscore is its subscript, upright if a word."""
    letter, _, below = symbol.partition("_")
    body = _letters(letter)
    if below:
        upright = below.isalpha() and below.isascii()
        body += f"_{{\\mathrm{{{below}}}}}" if upright else f"_{{{_letters(below)}}}"
    return f"${body}$"


def _letters(text: str) -> str:
    return "".join(_IN_MATH.get(c, c if c.isalnum() else _LATEX.get(c, c)) for c in text).strip()
