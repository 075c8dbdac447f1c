"""Imports run downward through the rooms of DESIGN section 3, wherever in a file they stand.

Read by `ast`: imports at the top, inside functions and under TYPE_CHECKING, relative ones, and texts that name a module
of speclib (commands that load on demand).
"""

from __future__ import annotations

import ast
import re
import sys
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path

import pytest

import speclib

PACKAGE = Path(speclib.__file__).parent

BASE = ("errors", "units", "clock", "progress")
ENGINES = ("cleaning", "similarity", "retention", "formats", "store")
JOINED = ("search", "annotation", "calibration")
JUDGEMENT = ("curation", "reports")
FACES = ("cli", "web")
LEVELS: tuple[tuple[str, ...], ...] = (
    BASE,
    ("chemistry",),
    ("model",),
    ENGINES,
    JOINED,
    JUDGEMENT,
    ("workflows",),
    (*FACES, "__main__"),
)
RANK = {room: rank for rank, rooms in enumerate(LEVELS) for room in rooms}
WITHOUT_STORE = (*JOINED, *JUDGEMENT)
"""They are handed rows and records; only workflows bring store and engines together, faces only open the library."""
RDKIT_DOORS = ("speclib.chemistry.molecule", "speclib.chemistry.mechanisms")
LATE = ("rdkit", "matchms", "matplotlib", "pyteomics", "sklearn", "sqlite_utils", "pandas", "numba", "scipy", "rich")
"""Heavy packages: loaded inside the function that needs them, never with the module."""
_MODULE_TEXT = re.compile(r"(speclib(?:\.\w+)+)(?::\w+)?")


@dataclass(frozen=True)
class Import:
    """One imported module; `late` when it stands inside a function or under TYPE_CHECKING."""

    module: str
    line: int
    late: bool


def imports_of(name: str, source: str, is_package: bool = False) -> Iterator[Import]:
    """Everything a module imports; `from speclib import x` counts as `speclib.x`."""

    def visit(node: ast.AST, late: bool) -> Iterator[Import]:
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield Import(alias.name, node.lineno, late)
        elif isinstance(node, ast.ImportFrom):
            module = node.module or ""
            if node.level:
                package = name.split(".") if is_package else name.split(".")[:-1]
                parts = package[: len(package) - node.level + 1]
                module = ".".join([*parts, module] if module else parts)
            for alias in node.names:
                yield Import(f"{module}.{alias.name}" if module == "speclib" else module, node.lineno, late)
        elif isinstance(node, ast.Constant) and isinstance(node.value, str):
            text = _MODULE_TEXT.fullmatch(node.value)
            if text is not None:
                yield Import(text[1], node.lineno, True)
        inside = (
            late
            or isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef, ast.Lambda))
            or (isinstance(node, ast.If) and "TYPE_CHECKING" in ast.dump(node.test))
        )
        for child in ast.iter_child_nodes(node):
            yield from visit(child, inside)

    yield from visit(ast.parse(source), False)


def room_of(module: str) -> str:
    """Second part of the dotted name; empty for the package itself."""
    return module.split(".")[1] if "." in module else ""


def is_package_attribute(module: str) -> bool:
    """`from speclib import __version__`."""
    return module == "speclib" or room_of(module).startswith("__version")


def violations(sources: Mapping[str, tuple[str, bool]]) -> list[str]:
    """What breaks the rules, as readable lines. `sources`: module name -> (source, whether it is a package)."""
    found: list[str] = []
    among_joined: set[tuple[str, str]] = set()
    for name, (source, is_package) in sources.items():
        room = room_of(name)
        if room and room not in RANK:
            found.append(f"{name}: the room {room!r} is not in DESIGN section 3")
            continue
        for item in imports_of(name, source, is_package):
            where = f"{name}:{item.line} imports {item.module}"
            top = item.module.split(".")[0]
            if top == "rdkit" and not any(name == door or name.startswith(door + ".") for door in RDKIT_DOORS):
                found.append(f"{where}: chemistry/molecule.py is the one door to RDKit")
            if top in LATE and not item.late:
                found.append(f"{where}: heavy packages load inside the function that needs them")
            if (room in BASE or not room) and top != "speclib" and top not in sys.stdlib_module_names:
                found.append(f"{where}: the base needs the standard library only")
            if top == "speclib" and not is_package_attribute(item.module):
                found.extend(f"{where}: {why}" for why in _direction(room, room_of(item.module), among_joined))
    found.extend(f"{a} and {b} import each other" for a, b in sorted(among_joined) if a < b and (b, a) in among_joined)
    return found


def _direction(source: str, target: str, among_joined: set[tuple[str, str]]) -> Iterator[str]:
    if target not in RANK:
        yield f"the room {target!r} is not in DESIGN section 3"
    elif not source:
        yield "the package itself imports no room"
    elif target == source or (source in BASE and target in BASE):
        return
    elif RANK[target] > RANK[source]:
        yield "imports run downward only"
    elif target == "store" and source in WITHOUT_STORE:
        yield f"{source} never opens the library"
    elif RANK[target] == RANK[source]:
        if source in JOINED:
            among_joined.add((source, target))
        else:
            yield "rooms of one level do not import each other"


def real_sources() -> dict[str, tuple[str, bool]]:
    sources = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = list(path.relative_to(PACKAGE.parent).with_suffix("").parts)
        is_package = parts[-1] == "__init__"
        sources[".".join(parts[:-1] if is_package else parts)] = (path.read_text(encoding="utf-8"), is_package)
    return sources


def test_imports_of_speclib_run_downward() -> None:
    sources = real_sources()
    assert len(sources) > 40
    assert violations(sources) == []


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("speclib.chemistry.x", "from speclib.model.spectrum import Spectrum"),
        ("speclib.chemistry.x", "import speclib.model.spectrum as s"),
        ("speclib.chemistry.x", "def f():\n    from speclib.store import library"),
        (
            "speclib.units",
            "from typing import TYPE_CHECKING\nif TYPE_CHECKING:\n    from speclib.chemistry.formula import Formula",
        ),
        ("speclib.units", "import numpy"),
        ("speclib.formats.x", "from speclib.store.library import Library"),
        ("speclib.store.x", "from speclib.similarity.scores import Peaks"),
        ("speclib.retention", "from speclib.cleaning import nominal"),
        ("speclib.cleaning.x", "from ..similarity import scores"),
        ("speclib.cleaning.x", "from .. import similarity"),
        ("speclib.search.x", "from speclib.store.library import Library"),
        ("speclib.search.x", "class A:\n    def f(self):\n        import speclib.store.library"),
        ("speclib.reports.x", "from speclib import store"),
        ("speclib.curation.x", "from speclib.reports import figures"),
        ("speclib.model.x", "from speclib.workflows.search import search_library"),
        ("speclib.workflows.x", "from speclib.cli.output import plain"),
        ("speclib.web.x", "from speclib.cli.output import plain"),
        ("speclib.search.x", "COMMANDS = {'x': 'speclib.workflows.search:run'}"),
        ("speclib.similarity.x", "def f():\n    from rdkit import Chem"),
        ("speclib.chemistry.formula", "def f():\n    import rdkit.Chem"),
        ("speclib.chemistry.molecule", "from rdkit import Chem"),
        ("speclib.store.x", "import sqlite_utils"),
        ("speclib.shelves.x", ""),
        ("speclib.cli.x", "from speclib.shelves import x"),
        ("speclib", "from speclib.model import spectrum"),
        ("speclib", "import numpy"),
    ],
)
def test_a_planted_violation_is_caught(module: str, source: str) -> None:
    assert violations({module: (source, module == "speclib")}), source


def test_two_joined_rooms_that_import_each_other_are_caught() -> None:
    one_way = {"speclib.annotation.x": ("from speclib.search.exact import search_rows", False)}
    assert violations(one_way) == []
    back = {"speclib.search.x": ("from speclib.annotation.carry import carry", False)}
    assert violations({**one_way, **back}) == ["annotation and search import each other"]


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("speclib.cli.x", "from speclib import __version__\nfrom speclib.workflows.search import run"),
        ("speclib.model.x", "import numpy as np\nfrom speclib.errors import SpeclibError"),
        ("speclib.formats.x", "from .reading import read\nfrom speclib.model.spectrum import Spectrum"),
        ("speclib.chemistry.molecule", "def f():\n    from rdkit import Chem"),
        ("speclib.chemistry.mechanisms.alpha", "def f():\n    from rdkit import Chem"),
        ("speclib.units", "from speclib.errors import InvalidValueError\nimport math"),
        (
            "speclib.workflows.x",
            "from speclib.store.library import Library\nfrom speclib.search.exact import search_rows",
        ),
        ("speclib.store.x", "def f():\n    import sqlite_utils"),
        ("speclib.search.x", "'speclib: a text that names no module'"),
    ],
)
def test_what_is_allowed_passes(module: str, source: str) -> None:
    assert violations({module: (source, False)}) == []
