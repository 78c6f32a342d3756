"""The assumptions file as text: every key with its meaning, unit, published range, reason of the default."""

import textwrap
from collections.abc import Iterator, Mapping, Sequence
from itertools import groupby
from typing import Any

from morphotone.cable.kinds import Number
from morphotone.cable.ranges import RANGES
from morphotone.cable.settings import LAYOUT, MEMBRANE, VETTING, Setting

_WIDTH = 100

_HEAD = (
    "What this run assumes. None of it was measured in the files; results hold under the passive model and "
    "these values, for research use.",
    "A key left out keeps its default. An unknown key, a wrong type or sign is refused; a value outside its "
    "published range is used, with a warning.",
)

_DOMAINS = (
    "A domain with constants of its own has its own table, such as [membrane.axon], with any of the keys "
    "above: soma, axon, basal, apical, or type_N for any other SWC code N. Keys left out there come from "
    "[membrane]."
)


Tables = Mapping[str, Mapping[str, Any]]


def commented_toml(tree: Tables, defaults: Tables) -> str:
    """Return nested tables as commented TOML.

    Parameters
    ----------
    tree : mapping
        Tables by name, as ``Assumptions.to_dict`` gives them; domains are tables inside ``membrane``.
    defaults : mapping
        The same tables of the defaults, which the comments name.

    Returns
    -------
    str
        The file's text, ending in a line feed.
    """
    lines = [line for sentence in _HEAD for line in _comment(sentence, hanging=0)]
    lines += _table(tree, defaults, MEMBRANE)
    lines += ["", *_comment(_DOMAINS, hanging=0)]
    for name, values in tree["membrane"].items():
        if isinstance(values, dict):
            lines += [
                "",
                f"[membrane.{name}]",
                *(f"{key} = {_literal(value)}" for key, value in values.items()),
            ]
    for _, settings in groupby((*LAYOUT, *VETTING), key=lambda setting: setting.table):
        lines += _table(tree, defaults, tuple(settings))
    return "\n".join(lines) + "\n"


def _table(tree: Tables, defaults: Tables, settings: Sequence[Setting]) -> list[str]:
    """Return the lines of one table; a key that is not set stands as a commented example."""
    table = settings[0].table
    lines = ["", f"[{table}]"]
    for place, setting in enumerate(settings):
        lines += [""] if place else []
        phrases = _phrases(setting, defaults[table].get(setting.key))
        lines += [line for phrase in phrases for line in _comment(phrase)]
        if setting.key in tree[table]:
            lines.append(f"{setting.key} = {_literal(tree[table][setting.key])}")
        elif isinstance(setting.kind, Number):
            lines.append(f"# {setting.key} = {setting.kind.example!r}")
    return lines


def _phrases(setting: Setting, default: object) -> Iterator[str]:
    """Yield what is said above a key."""
    yield f"{setting.key}: {setting.meaning}"
    for name, known in RANGES.items():
        if name in (setting.field, f"soma.{setting.field}"):
            yield f"  {known.standing}{' for the soma' if name != setting.field else ''}: {known.in_words}"
        elif name in (f"{setting.field}_xy", f"{setting.field}_z"):
            yield f"  {known.standing} for {name.removeprefix(f'{setting.field}_')}: {known.in_words}"
    if setting.reason:
        yield f"  default {_literal(default)}: {setting.reason}"


def _comment(sentence: str, hanging: int = 2) -> list[str]:
    """Return a sentence as comment lines, its own indent kept, its further lines hanging."""
    text = sentence.lstrip()
    first = "# " + " " * (len(sentence) - len(text))
    return textwrap.wrap(text, _WIDTH, initial_indent=first, subsequent_indent=first + " " * hanging)


def _literal(value: Any) -> str:
    """Return a value as TOML; the words among them need no escapes."""
    if isinstance(value, str):
        return f'"{value}"'
    if isinstance(value, list | tuple):
        return f"[{', '.join(map(_literal, value))}]"
    return repr(value)
