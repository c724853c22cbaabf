"""The never-list, held over every string of the package that could reach a user."""

from __future__ import annotations

import ast
from pathlib import Path

import pytest

import safecheck
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, REASONS, SHORT_CAUTION, lint

ROOT = Path(safecheck.__file__).parent
TEXT_FILES = {".html", ".js", ".css", ".toml", ".txt", ".json"}


def _docstrings(tree: ast.AST) -> set[int]:
    """Ids of string nodes that document code: they are for engineers and reach no user."""
    found = set()
    for node in ast.walk(tree):
        body = getattr(node, "body", None)
        for statement in body if isinstance(body, list) else ():
            if isinstance(statement, ast.Expr) and isinstance(statement.value, ast.Constant):
                found.add(id(statement.value))
    return found


def _strings(path: Path) -> list[tuple[int, str]]:
    tree = ast.parse(path.read_text(encoding="utf-8"))
    docstrings = set() if path.name == "cli.py" else _docstrings(tree)  # its docstrings are the help
    return [
        (node.lineno, node.value)
        for node in ast.walk(tree)
        if isinstance(node, ast.Constant) and isinstance(node.value, str) and id(node) not in docstrings
    ]


@pytest.mark.parametrize("path", sorted(ROOT.rglob("*.py")), ids=lambda path: str(path.relative_to(ROOT)))
def test_no_string_of_the_package_holds_a_forbidden_word(path: Path) -> None:
    # The patterns themselves are the one exception: they stand in wording.py as regular expressions.
    strings = [(line, text) for line, text in _strings(path) if not (path.name == "wording.py" and "\\b" in text)]
    if path.name == "wording.py":
        strings = [(line, text) for line, text in strings if not text.startswith("[\u2713")]
    found = [(line, word.word) for line, text in strings for word in lint(text)]
    assert not found


@pytest.mark.parametrize(
    "path",
    sorted(path for path in ROOT.rglob("*") if path.suffix in TEXT_FILES and "LICENSE" not in path.name),
    ids=lambda path: str(path.relative_to(ROOT)),
)
def test_no_template_holds_a_forbidden_word(path: Path) -> None:
    assert not [word.word for word in lint(path.read_text(encoding="utf-8"))]


@pytest.mark.parametrize(
    "text",
    [
        "this ratio is safe",
        "an acceptable loss",
        "approved by",
        "of diagnostic quality",
        "diagnostically lossless",
        "visually lossless at 10:1",
        "no clinical impact",
        "GDPR compliant",
        "validated encoder",
        "a certified record",
        "the recommended ratio",
        "all images passed",
        "3 images failed",
        "quality improved",
        "\u2713 10:1",
        "\u274c 20:1",
    ],
)
def test_the_lint_finds_each_forbidden_word(text: str) -> None:
    assert list(lint(text))


@pytest.mark.parametrize(
    "text",
    [
        *CAUTIONS,
        *CAUTIONS_WHEN.values(),
        *(reason.sentence for reason in REASONS.values()),
        SHORT_CAUTION,
        "safecheck assess",
        "no study failed the declared limits",
    ],
)
def test_the_lint_lets_the_products_own_words_through(text: str) -> None:
    assert not list(lint(text))
