"""What the methods cite, as BibTeX."""

import re

import pytest

from morphotone.showing.references import KEYS, bibtex, cited, split_citations, without_citations


def test_every_entry_is_balanced_and_says_that_nobody_looked_it_up():
    for key in KEYS - {"Morphotone"}:
        entry = bibtex([key], "1.2")
        assert entry.startswith(f"@article{{{key},\n")
        assert entry.count("{") == entry.count("}")
        assert "from memory: check before printing" in entry
        year = re.search(r"year = \{(\d{4})\}", entry)
        assert year is not None
        assert key.endswith(year[1])
        for name in ("author", "title", "journal", "volume", "pages"):
            assert re.search(rf"^  {name} = \{{.+\}},$", entry, re.MULTILINE), name


def test_the_program_is_cited_with_its_version():
    entry = bibtex(["Morphotone"], "1.2")
    assert entry.startswith("@misc{Morphotone,")
    assert "note = {Version 1.2}" in entry


def test_citations_are_collected_in_order_and_once():
    assert cited(["a ⟨Holm1979 Rall1959⟩", "b ⟨Holm1979⟩ c", "d"]) == ("Holm1979", "Rall1959")


def test_an_unknown_key_is_an_error():
    with pytest.raises(KeyError, match="no reference Nobody1900"):
        cited(["⟨Nobody1900⟩"])


def test_a_text_is_split_at_its_citations():
    assert split_citations("a ⟨Holm1979 Rall1959⟩ b") == [("a ", ("Holm1979", "Rall1959")), (" b", ())]
    assert split_citations("a") == [("a", ())]


def test_names_of_a_users_hold_no_citation():
    assert without_citations("x ⟨Holm1979⟩ ‹R_in›") == "x Holm1979 R_in"
