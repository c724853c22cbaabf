"""The arrows between rooms, held as data: any other import fails, wherever in a file it stands."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest

import safecheck

ROOT = Path(safecheck.__file__).parent

ALWAYS = frozenset({"errors", "documents", "wording"})
"""Rooms that every other may import."""

ARROWS: dict[str, frozenset[str]] = {
    "errors": frozenset(),
    "wording": frozenset(),
    "documents": frozenset(),
    "frames": frozenset(),
    "measures": frozenset(),
    "regions": frozenset(),
    "codecs": frozenset({"frames"}),
    "dicom": frozenset({"frames", "regions"}),
    "policy": frozenset({"frames", "measures"}),
    "record": frozenset({"frames", "policy"}),
    "evaluation": frozenset({"frames", "codecs", "measures", "regions", "policy", "record"}),
    "study": frozenset({"frames", "codecs", "measures", "regions", "record", "evaluation"}),
    "statistics": frozenset({"frames", "measures", "policy", "record"}),
    "report": frozenset({"measures", "policy", "record", "statistics"}),
    "runner": frozenset({"frames", "dicom", "codecs", "regions", "policy", "record", "evaluation"}),
    "jobs": frozenset(
        {
            "frames",
            "dicom",
            "codecs",
            "measures",
            "regions",
            "policy",
            "record",
            "evaluation",
            "study",
            "statistics",
            "report",
            "runner",
        }
    ),
    "screen": frozenset(),
    "options": frozenset(),
    "main_job": frozenset({"jobs", "record", "runner", "screen"}),
    "cli": frozenset({"jobs", "main_job", "options", "policy", "screen"}),
    "__main__": frozenset({"cli"}),
    "__init__": frozenset(),
}
"""What each room may import besides `ALWAYS`."""

LIBRARIES: dict[str, frozenset[str]] = {
    "pydicom": frozenset({"dicom"}),
    "imagecodecs": frozenset({"codecs", "dicom"}),
    "openjpeg": frozenset({"codecs", "dicom"}),
    "reportlab": frozenset({"report"}),
    "pypdf": frozenset({"report"}),
    "typer": frozenset({"cli", "main_job", "options", "screen"}),
    "rich": frozenset({"cli"}),
    "click": frozenset({"cli"}),
    "pyarrow": frozenset({"record", "runner"}),
    "rfc8785": frozenset({"policy", "record"}),
    "pydantic": frozenset({"documents", "policy", "record", "regions"}),
    "numba": frozenset({"codecs", "measures", "regions", "study"}),
    "skimage": frozenset({"measures", "regions"}),
    "scipy": frozenset({"measures", "regions", "statistics", "codecs"}),
    "synthetic_studies": frozenset({"jobs"}),
}
"""Outside libraries, and the rooms that may import them."""


def _modules() -> dict[str, Path]:
    """Every module of the package by its dotted name."""
    found = {}
    for path in sorted(ROOT.rglob("*.py")):
        parts = path.relative_to(ROOT.parent).with_suffix("").parts
        found[".".join(parts[:-1] if parts[-1] == "__init__" and len(parts) > 2 else parts)] = path
    return found


def _imports(path: Path) -> Iterator[tuple[int, int, str]]:
    """Yield (line, level, dotted name) of each import, at the top, in functions and under TYPE_CHECKING alike."""
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            for alias in node.names:
                yield node.lineno, 0, alias.name
        elif isinstance(node, ast.ImportFrom):
            yield node.lineno, node.level, node.module or ""
            for alias in node.names:
                yield node.lineno, node.level, f"{node.module}.{alias.name}"


def _room(module: str) -> str:
    return module.split(".")[1]


MODULES = _modules()


@pytest.mark.parametrize("module", MODULES, ids=str)
def test_a_module_imports_only_along_the_arrows(module: str) -> None:
    room = _room(module)
    assert room in ARROWS, f"the room {room} has no arrows; draw them in ARROWS and in DEVELOPERS.md"
    wrong = []
    for line, level, name in _imports(MODULES[module]):
        assert level == 0, f"{module}:{line} imports relatively"
        top = name.split(".")[0]
        if top == "safecheck" and "." in name:
            target = name.split(".")[1]
            if target not in ARROWS or target == room or target in ALWAYS or target in ARROWS[room]:
                continue
            wrong.append(f"line {line}: {room} -> {target}")
        elif room not in LIBRARIES.get(top, {room}):
            wrong.append(f"line {line}: {room} -> library {top}")
    assert not wrong, f"{module}: {sorted(set(wrong))}"


def test_no_room_has_an_import_cycle_inside() -> None:
    graph = {
        module: {
            name for _, _, name in _imports(path) if name in MODULES and name != module and _room(name) == _room(module)
        }
        for module, path in MODULES.items()
    }
    done: set[str] = set()

    def visit(module: str, trail: tuple[str, ...]) -> None:
        assert module not in trail, f"cycle: {' -> '.join((*trail, module))}"
        if module not in done:
            for name in sorted(graph[module]):
                visit(name, (*trail, module))
            done.add(module)

    for module in graph:
        visit(module, ())


def test_the_synthetic_studies_know_nothing_of_the_package() -> None:
    for path in sorted((ROOT.parent / "synthetic_studies").rglob("*.py")):
        for line, _, name in _imports(path):
            top = name.split(".")[0]
            assert top not in {"safecheck", "scipy", "skimage", "numba"}, f"{path.name}:{line} imports {name}"
