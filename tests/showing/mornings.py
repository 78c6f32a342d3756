"""Invented results for pages: any number of cells, named and spread as a test wants them."""

from html.parser import HTMLParser

import numpy as np
import pandas as pd

from morphotone.cable.assumptions import Assumptions
from morphotone.showing.page import Morning, page

VOID = {"meta", "input", "br", "img", "path", "circle"}
FINDING = {"severity": "note", "code": "columns_extra", "count": 3, "sentence": "More than seven columns."}


def cells_of(count, names=None, **columns):
    """Return a table of cells as a survey writes it, as far as a page needs it."""
    draw = np.random.default_rng(count)
    names = names or [f"night/cell_{number:04}" for number in range(count)]
    table = {
        "file": [f"{name}.swc" for name in names],
        "cell": names,
        "grade": ["sound"] * count,
        "R_in_MOhm": 200 * np.exp(draw.normal(0, 0.2, count)),
        "lambda_um": 400 * np.exp(draw.normal(0, 0.1, count)),
        "X_tips_mean": 0.6 * np.exp(draw.normal(0, 0.1, count)),
        "attenuation_to_soma_farthest": np.exp(np.exp(draw.normal(0.5, 0.3, count))),
        "attenuation_from_soma_farthest": 1.2 * np.exp(draw.normal(0, 0.03, count)),
    }
    return pd.DataFrame({**table, **columns})


def findings_of(rows):
    """Return a table of findings from what differs from a note about columns."""
    columns = ["file", *FINDING, "effect"]
    return pd.DataFrame([{**FINDING, "effect": "None.", **row} for row in rows], columns=columns)


def away_of(rows):
    return pd.DataFrame(rows, columns=["file", "reason", "sentence"])


def record_of(**changes):
    return {
        "started": "2026-03-01T20:00:00+00:00",
        "ended": "2026-03-02T05:30:10+00:00",
        "command": ["morphotone", "survey", "field"],
        "folder": "field",
        "morphotone": "0.1.0",
        "counts": {"found": 0, "samples": 12345},
        "machine": {"host": "bench", "platform": "Linux"},
        "python": "3.12.1",
        "packages": {"numpy": "2.4.0"},
        **changes,
    }


def morning_of(cells, findings=(), away=(), **more):
    return Morning(
        record=more.pop("record", record_of()),
        assumptions=more.pop("assumptions", Assumptions()),
        cells=cells,
        findings=findings_of(findings),
        turned_away=away_of(away),
        **more,
    )


class Parsed(HTMLParser):
    """A page taken apart: elements in order, ids, links, text; what is not closed is a fault."""

    def __init__(self, html):
        super().__init__()
        self.open, self.faults = [], []
        self.elements, self.texts = [], []
        self.feed(html)
        self.close()
        self.faults += [f"<{tag}> is never closed" for tag in self.open]

    def handle_starttag(self, tag, attributes):
        self.elements.append((tag, dict(attributes)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attributes):
        self.elements.append((tag, dict(attributes)))

    def handle_endtag(self, tag):
        if not self.open or self.open[-1] != tag:
            self.faults.append(f"</{tag}> closes {self.open[-1:]}, line {self.getpos()[0]}")
        else:
            self.open.pop()

    def handle_data(self, data):
        self.texts.append((self.open[-1] if self.open else "", data))

    def all(self, tag):
        return [attributes for name, attributes in self.elements if name == tag]

    @property
    def ids(self):
        return [attributes["id"] for _, attributes in self.elements if "id" in attributes]

    def text_of(self, tag):
        return "".join(data for name, data in self.texts if name == tag)

    @property
    def words(self):
        """All text a reader sees, white space as one space."""
        seen = (data for name, data in self.texts if name not in ("script", "style"))
        return " ".join(" ".join(seen).split())


def parsed(morning):
    return Parsed(page(morning))
