"""Names that look like markup stay names."""

import re

import pytest
from hypothesis import given
from hypothesis import strategies as st

from morphotone.showing.markup import latex, markdown

NASTY = st.text(st.sampled_from("ab \\`*_{}[]()#+-.!|<>&%$^~@'\"\n‹›λΩ²µ"), max_size=12)


@pytest.mark.parametrize(
    ("text", "in_markdown", "in_latex"),
    [
        ("layer_2/3", "layer_2/3", r"layer\_2/3"),
        ("_all_", r"\_all\_", r"\_all\_"),
        ("C*D | 50 % & $5", r"C\*D \| 50 % \& \$5", r"C{*}D \textbar{} 50 \% \& \$5"),
        ("<b>x</b>", r"\<b\>x\</b\>", r"\textless{}b\textgreater{}x\textless{}/b\textgreater{}"),
        ("p < 0.05", "p < 0.05", r"p \textless{} 0.05"),
        (r"\input{x}", r"\\input\{x\}", r"\textbackslash{}input\{x\}"),
        (
            "[*] #1 ~^ @a `b`",
            r"\[\*\] \#1 \~\^ \@a \`b\`",
            r"{[}{*}{]} \#1 \textasciitilde{}\textasciicircum{} @a `b`",
        ),
        ("λ² ± 2 µm", "λ² ± 2 µm", r"$\lambda ^2$ $\pm$ 2 \textmu{}m"),
        ("‹R_m›/‹F› in ‹λ›", "R_m/F in λ", r"$R_{\mathrm{m}}$/$F$ in $\lambda$"),
        ("‹C_m›·‹F›", "C_m·F", r"$C_{\mathrm{m}} \cdot F$"),
        ("a\nb\x00c\u2028d", "a b c d", "a b c d"),
        ("$λ", r"\$λ", r"\$$\lambda$"),
    ],
)
def test_text(text, in_markdown, in_latex):
    assert markdown(text) == in_markdown
    assert latex(text) == in_latex


@given(NASTY)
def test_latex_is_balanced_and_has_no_bare_special(text):
    shown = latex(text)
    bare = re.sub(r"\\[{}$&#_%]", "", shown)  # without what is escaped
    depth = 0
    for character in bare:
        depth += (character == "{") - (character == "}")
        assert depth >= 0
    assert depth == 0
    assert bare.count("$") % 2 == 0
    outside = "".join(bare.split("$")[::2])
    assert not re.search(r"[&#_%^~]", outside)
    assert not re.search(r"\\(?!text|ldots)", outside)


@given(NASTY)
def test_markdown_read_back_is_the_text(text):
    """A backslash before ASCII punctuation stands for the punctuation (CommonMark 0.31, section 2.4)."""
    shown = markdown(text)
    assert not re.search(r"(?<!\\)(\\\\)*[|*`\[\]]", re.sub(r"\\.", "", shown))
    plain = re.sub("‹([^‹›]*)›", r"\1", re.sub("\n+", " ", text))
    assert re.sub(r"\\([!-/:-@\[-`{-~])", r"\1", shown) == plain
