"""The house keeps its order: one-way stairs, no knots, a pure numerical core, short rooms.

Each rule is a function from rooms to a list of faults. It is put to the package, which must have none,
and to a small made-up house that breaks it, so that a rule which sees nothing is itself seen.
"""

import ast
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from graphlib import CycleError, TopologicalSorter
from pathlib import Path

import pytest

CHECKOUT = Path(__file__).resolve().parent.parent
PACKAGE = CHECKOUT / "morphotone"
#: Top to bottom as data flows; a room may import from its own floor and from those before it.
FLOORS = {
    "errors": 0,
    "units": 0,
    "stages": 0,
    "reading": 1,
    "cable": 2,
    "questions": 3,
    "night": 4,
    "showing": 5,
    "commands": 6,
}
#: Where the map (`morphotone/__init__.py`) and the entry (`__main__.py`) stand.
BELOW_ALL = 7
#: The map and the edges, which load a floor only when it is asked for.
MAY_IMPORT_LATE = {"morphotone", "morphotone.__main__", "morphotone.commands"}
NOT_FOR_CABLE = {
    *("pandas", "pathlib", "io", "os", "shutil", "tempfile", "glob", "sqlite3", "csv", "gzip"),
    *("joblib", "tqdm", "subprocess", "multiprocessing", "logging"),
}
OPENS_FILES = {"open", "read_text", "read_bytes", "write_text", "write_bytes", "mkdir", "touch", "unlink"}
LONGEST_FUNCTION = 60
LONGEST_MODULE = 450


@dataclass(frozen=True)
class Room:
    """One module, parsed."""

    name: str
    text: str
    tree: ast.Module
    is_package: bool

    @property
    def floor(self) -> int:
        """Number in FLOORS, or BELOW_ALL."""
        return floor_of(self.name)


@dataclass(frozen=True)
class Import:
    target: str
    line: int


def floor_of(name: str) -> int:
    parts = name.split(".")
    if len(parts) == 1 or parts[1] == "__main__":
        return BELOW_ALL
    if parts[1] not in FLOORS:
        raise AssertionError(f"{name} stands on no floor: {', '.join(FLOORS)}")
    return FLOORS[parts[1]]


def rooms_in(package: Path) -> dict[str, Room]:
    rooms = {}
    for path in sorted(package.rglob("*.py")):
        parts = path.relative_to(package.parent).with_suffix("").parts
        is_package = parts[-1] == "__init__"
        name = ".".join(parts[:-1] if is_package else parts)
        text = path.read_text(encoding="utf-8")
        rooms[name] = Room(name, text, ast.parse(text), is_package)
    return rooms


def imports_in(root: ast.AST, room: Room, rooms: dict[str, Room]) -> Iterator[Import]:
    """Yield what is imported anywhere below `root`: modules, by full name."""
    for node in ast.walk(root):
        if isinstance(node, ast.Import):
            yield from (Import(alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            source = source_of(node, room)
            for alias in node.names:
                module = f"{source}.{alias.name}"
                yield Import(module if module in rooms else source, node.lineno)


def source_of(node: ast.ImportFrom, room: Room) -> str:
    if not node.level:
        return node.module or ""
    parts = room.name.split(".")
    above = parts[: len(parts) - node.level + room.is_package]
    return ".".join([*above, *([node.module] if node.module else [])])


def inner_imports(room: Room, rooms: dict[str, Room]) -> Iterator[Import]:
    top = room.name.split(".")[0]
    for found in imports_in(room.tree, room, rooms):
        if found.target.split(".")[0] == top:
            yield found


def functions_in(room: Room) -> Iterator[ast.FunctionDef | ast.AsyncFunctionDef]:
    for node in ast.walk(room.tree):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            yield node


def upward_imports(rooms: dict[str, Room]) -> list[str]:
    return [
        f"{room.name}:{found.line} imports {found.target}, which stands on a lower floor"
        for room in rooms.values()
        for found in inner_imports(room, rooms)
        if floor_of(found.target) > room.floor
    ]


def cycles(rooms: dict[str, Room]) -> list[str]:
    arrows = {
        room.name: {found.target for found in inner_imports(room, rooms)}
        for room in rooms.values()
        if room.floor < BELOW_ALL
    }
    try:
        TopologicalSorter(arrows).prepare()
    except CycleError as knot:
        return [" -> ".join(reversed(knot.args[1]))]
    return []


def late_imports(rooms: dict[str, Room]) -> list[str]:
    return sorted(
        {
            f"{room.name}:{found.line} imports {found.target} inside a function"
            for room in rooms.values()
            if room.name not in MAY_IMPORT_LATE
            for function in functions_in(room)
            for found in imports_in(function, room, rooms)
        }
    )


def on_floor(rooms: dict[str, Room], *floors: str) -> list[Room]:
    return [room for room in rooms.values() if room.floor in map(FLOORS.get, floors)]


def impure_cable(rooms: dict[str, Room]) -> list[str]:
    return [
        f"{room.name}:{found.line} imports {found.target}; cable is arrays only"
        for room in on_floor(rooms, "cable")
        for found in imports_in(room.tree, room, rooms)
        if found.target.split(".")[0] in NOT_FOR_CABLE
    ]


def opened_files(rooms: dict[str, Room]) -> list[str]:
    return [
        f"{room.name}:{node.lineno} calls {called_name(node)}; files are reading's, night's and the commands'"
        for room in on_floor(rooms, "cable", "questions")
        for node in ast.walk(room.tree)
        if isinstance(node, ast.Call) and called_name(node) in OPENS_FILES
    ]


def called_name(call: ast.Call) -> str:
    if isinstance(call.func, ast.Attribute):
        return call.func.attr
    return call.func.id if isinstance(call.func, ast.Name) else ""


def nameless_rooms(rooms: dict[str, Room]) -> list[str]:
    return [name for name in rooms if name.split(".")[-1] in {"utils", "util", "helpers", "misc", "common"}]


def long_functions(rooms: dict[str, Room]) -> list[str]:
    return [
        f"{room.name}:{function.lineno} {function.name} has {lines_of_code(function)} lines of code"
        for room in rooms.values()
        for function in functions_in(room)
        if lines_of_code(function) > LONGEST_FUNCTION
    ]


def lines_of_code(function: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    """Lines from `def` to the end, less the docstring's."""
    assert function.end_lineno is not None
    lines = function.end_lineno - function.lineno + 1
    if ast.get_docstring(function) is None:
        return lines
    docstring = function.body[0]
    assert docstring.end_lineno is not None
    return lines - (docstring.end_lineno - docstring.lineno + 1)


def long_modules(rooms: dict[str, Room]) -> list[str]:
    return [
        f"{room.name} has {len(room.text.splitlines())} lines"
        for room in rooms.values()
        if len(room.text.splitlines()) > LONGEST_MODULE
    ]


RULES = (
    upward_imports,
    cycles,
    late_imports,
    impure_cable,
    opened_files,
    nameless_rooms,
    long_functions,
    long_modules,
)


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.__name__)
def test_the_package_keeps_the_rule(rule: Callable[[dict[str, Room]], list[str]]) -> None:
    assert rule(rooms_in(PACKAGE)) == []


def test_every_floor_of_the_list_is_there() -> None:
    standing = {room.floor for room in rooms_in(PACKAGE).values()}
    assert standing == {*FLOORS.values(), BELOW_ALL}


@pytest.mark.parametrize("rule", [long_functions, long_modules], ids=lambda rule: rule.__name__)
def test_scripts_are_short_too(rule: Callable[[dict[str, Room]], list[str]]) -> None:
    scripts = {
        path.stem: Room(path.stem, text, ast.parse(text), False)
        for path in (CHECKOUT / "scripts").glob("*.py")
        for text in [path.read_text(encoding="utf-8")]
    }
    assert "make_samples" in scripts
    assert rule(scripts) == []


# --- the rules themselves, on houses that break them


def build(folder: Path, rooms: dict[str, str]) -> dict[str, Room]:
    """Return a made-up house; `{"cable/tree": "…"}` is the room morphotone/cable/tree.py."""
    for name, text in rooms.items():
        path = folder / "morphotone" / f"{name}.py"
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
        for package in (folder / "morphotone", path.parent):
            (package / "__init__.py").touch()
    return rooms_in(folder / "morphotone")


@pytest.mark.parametrize(
    ("name", "text"),
    [
        ("reading/swc", "from morphotone.cable.tree import sweep"),
        ("reading/swc", "from morphotone.cable import tree"),
        ("reading/swc", "from ..cable import tree"),
        ("reading/swc", "import morphotone.cable.tree"),
        ("reading/swc", "def f():\n    import morphotone.night.runner"),
        ("cable/tree", "from morphotone import read"),
        ("errors", "from .units import um\nfrom .reading.swc import parse"),
        ("showing/page", "from morphotone.commands import survey"),
    ],
)
def test_an_import_from_a_lower_floor_is_seen(tmp_path: Path, name: str, text: str) -> None:
    house = {"cable/tree": "", "night/runner": "", "units": "um = 1", "commands/survey": ""} | {name: text}
    (fault,) = upward_imports(build(tmp_path, house))
    assert fault.startswith("morphotone." + name.replace("/", "."))


def test_imports_from_the_same_and_earlier_floors_pass(tmp_path: Path) -> None:
    rooms = build(
        tmp_path,
        {
            "errors": "",
            "reading/swc": "from morphotone.errors import ReadingError\nimport numpy as np",
            "reading/soma": "from . import swc",
            "cable/tree": "from morphotone.reading.soma import find_soma\nfrom .sweeps import sweep",
            "cable/sweeps": "",
            "__main__": "from morphotone import commands",
        },
    )
    assert [rule(rooms) for rule in RULES] == [[]] * len(RULES)


@pytest.mark.parametrize(
    "house",
    [
        {"cable/tree": "from .sweeps import a", "cable/sweeps": "from .tree import b"},
        {"cable/tree": "from morphotone.cable import sweep", "cable/__init__": "from .tree import sweep"},
        {"cable/a": "from . import b", "cable/b": "from . import c", "cable/c": "from . import a"},
    ],
)
def test_a_knot_within_a_floor_is_seen(tmp_path: Path, house: dict[str, str]) -> None:
    (fault,) = cycles(build(tmp_path, house))
    assert " -> " in fault


def test_late_imports_are_seen_but_at_the_edges(tmp_path: Path) -> None:
    late = "class A:\n    def f(self):\n        def g():\n            import numpy\n        return g\n"
    rooms = build(
        tmp_path, {"reading/swc": late, "commands/__init__": late, "__main__": late, "commands/survey": late}
    )
    assert late_imports(rooms) == [
        "morphotone.commands.survey:4 imports numpy inside a function",
        "morphotone.reading.swc:4 imports numpy inside a function",
    ]


def test_cable_importing_pandas_or_the_disk_is_seen(tmp_path: Path) -> None:
    rooms = build(tmp_path, {"cable/tree": "import os.path\nfrom pandas import DataFrame\nimport numpy"})
    assert impure_cable(rooms) == [
        "morphotone.cable.tree:1 imports os.path; cable is arrays only",
        "morphotone.cable.tree:2 imports pandas; cable is arrays only",
    ]


@pytest.mark.parametrize("call", ["open('a')", "path.open()", "path.read_text()", "path.write_bytes(b'')"])
@pytest.mark.parametrize("floor", ["cable", "questions"])
def test_an_opened_file_is_seen(tmp_path: Path, floor: str, call: str) -> None:
    (fault,) = opened_files(build(tmp_path, {f"{floor}/tree": call, "reading/swc": call}))
    assert fault.startswith(f"morphotone.{floor}.tree:1 calls ")


def test_a_room_without_a_name_of_its_own_is_seen(tmp_path: Path) -> None:
    assert nameless_rooms(build(tmp_path, {"cable/utils": "", "cable/tree": ""})) == [
        "morphotone.cable.utils"
    ]


def test_a_room_on_no_floor_is_seen(tmp_path: Path) -> None:
    rooms = build(tmp_path, {"cellar/wine": "import morphotone.errors", "errors": ""})
    with pytest.raises(AssertionError, match=r"morphotone\.cellar.* stands on no floor"):
        upward_imports(rooms)


def function_of(lines: int, docstring: int) -> str:
    doc = f'    """{"word" + chr(10) * (docstring - 1)}    """\n' if docstring else ""
    return "def f():\n" + doc + "    x = 1\n" * (lines - 1)


@pytest.mark.parametrize("docstring", [0, 1, 40])
def test_function_lengths_count_code_not_docstrings(tmp_path: Path, docstring: int) -> None:
    rooms = build(tmp_path, {"errors": function_of(60, docstring), "units": function_of(61, docstring)})
    assert long_functions(rooms) == ["morphotone.units:1 f has 61 lines of code"]


def test_module_lengths_count_every_line(tmp_path: Path) -> None:
    rooms = build(tmp_path, {"errors": "\n" * 450, "units": "\n" * 451})
    assert long_modules(rooms) == ["morphotone.units has 451 lines"]
