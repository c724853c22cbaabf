"""The documents: parts written from the code equal the code, links lead somewhere, words keep to the never-list.

That examples run is shown by `tests/document_examples.py`, which takes longer.
"""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from safecheck.measures.catalogue import MEASURES
from safecheck.policy.conditions import CONDITION_TEXTS
from safecheck.policy.plan import Plan
from safecheck.record.rows import TABLES, columns_of
from safecheck.wording import lint
from tests.document_examples import Block, blocks_of, commands_of, is_run
from tests.generated_documents import DOCS, PARTS, SCHEMAS, Part, column_rows, models_of, replaced, schema_text

ROOT = DOCS.parent
DOCUMENTS = sorted(DOCS.glob("*.md"))
ALL = [*DOCUMENTS, *(path for path in (ROOT / "README.md", ROOT / "DEVELOPERS.md") if path.exists())]


def _name(path: Path) -> str:
    return str(path.relative_to(ROOT))


_LINK = re.compile(r"(?<!!)\[[^\]]*\]\(([^)\s]+)\)")
_FENCED = re.compile(r"^```.*?^```$", re.MULTILINE | re.DOTALL)
_HEADING = re.compile(r"^#{1,6} (.+)$", re.MULTILINE)


@pytest.mark.parametrize("part", PARTS, ids=lambda part: f"{part.document}, {part.name}")
def test_a_part_written_from_the_code_equals_the_code(part: Part) -> None:
    text = (DOCS / part.document).read_text(encoding="utf-8")
    assert text == replaced(text, part), "run: python tests/document_examples.py --write"


@pytest.mark.parametrize("name", SCHEMAS)
def test_a_schema_equals_the_model(name: str) -> None:
    text = (DOCS / "schemas" / name).read_text(encoding="utf-8")
    assert text == schema_text(SCHEMAS[name]), "run: python tests/document_examples.py --write"


@pytest.mark.parametrize("name", SCHEMAS)
def test_every_key_of_a_schema_says_what_it_means(name: str) -> None:
    schema = json.loads((DOCS / "schemas" / name).read_text(encoding="utf-8"))
    silent = [
        key
        for model in (schema, *schema.get("$defs", {}).values())
        for key, said in model.get("properties", {}).items()
        if "description" not in said
    ]
    assert not silent


@pytest.mark.parametrize("table", TABLES)
def test_the_document_lists_the_columns_of_a_table_in_order(table: str) -> None:
    text = (DOCS / "columns.md").read_text(encoding="utf-8")
    listed = re.findall(r"^\| `(\w+)` \| ([\w, ]+) \|", text.split("written from the code: columns")[1], re.MULTILINE)
    assert [name for name, where in listed if table in where.split(", ")] == [
        column.name for column in columns_of(TABLES[table])
    ]
    assert len(listed) == len(column_rows())


def test_every_measure_stands_in_one_of_the_two_tables_of_measures() -> None:
    text = (DOCS / "plans_and_limits.md").read_text(encoding="utf-8")
    for name in MEASURES:
        assert len(re.findall(rf"^\| `{name}` \| (?:measures|windows|regions) \|", text, re.MULTILINE)) == 1


def test_the_examples_of_the_plan_show_every_key() -> None:
    shown: set[str] = set()
    for block in blocks_of((DOCS / "plans_and_limits.md").read_text(encoding="utf-8")):
        if block.language == "toml":
            shown |= set(_keys(tomllib.loads(block.text)))
    assert {key for model in models_of(Plan) for key in model.model_fields} <= shown


def _keys(value: Any) -> Iterator[str]:
    """Yield the keys of tables at any depth."""
    if isinstance(value, dict):
        yield from value
    for inner in value.values() if isinstance(value, dict) else value if isinstance(value, list) else ():
        yield from _keys(inner)


def test_every_exit_code_is_explained() -> None:
    text = (DOCS / "first_study.md").read_text(encoding="utf-8")
    for code, words in CONDITION_TEXTS.items():
        assert f"| {int(code)} | {words} |" in text


def _anchors(path: Path) -> set[str]:
    """Anchors that a document's headings make, as the usual renderers form them."""
    text = _FENCED.sub("", path.read_text(encoding="utf-8"))
    return {re.sub(r"[^\w\- ]", "", heading.lower()).strip().replace(" ", "-") for heading in _HEADING.findall(text)}


@pytest.mark.parametrize("path", ALL, ids=_name)
def test_links_lead_to_what_is_there(path: Path) -> None:
    lost = []
    for target in _LINK.findall(_FENCED.sub("", path.read_text(encoding="utf-8"))):
        if re.match(r"https?://|mailto:", target):
            continue
        file, _, anchor = target.partition("#")
        there = (path.parent / file).resolve() if file else path
        if not there.exists() or (anchor and there.suffix == ".md" and anchor not in _anchors(there)):
            lost.append(target)
    assert not lost


@pytest.mark.parametrize("path", [path for path in ALL if path.name != "DEVELOPERS.md"], ids=_name)
def test_documents_keep_to_the_never_list(path: Path) -> None:
    text = path.read_text(encoding="utf-8")
    found = [(word.word, text[: word.position].count("\n") + 1) for word in lint(text)]
    assert not found


@pytest.mark.parametrize("path", DOCUMENTS, ids=_name)
def test_documents_hold_no_path_of_one_machine(path: Path) -> None:
    assert not re.search(r"(?<![\w.])/(?:tmp|work|home|root|Users)/", path.read_text(encoding="utf-8"))


def test_every_document_stands_in_the_index() -> None:
    index = (DOCS / "README.md").read_text(encoding="utf-8")
    assert {path.name for path in DOCUMENTS} - {"README.md"} <= set(_LINK.findall(index))


@pytest.mark.parametrize("path", DOCUMENTS, ids=_name)
def test_a_block_that_calls_the_program_is_run_or_marked_as_text(path: Path) -> None:
    unmarked = [
        block.line
        for block in blocks_of(path.read_text(encoding="utf-8"))
        if not block.language or ("safecheck " in block.text and block.language == "sh" and not is_run(block))
    ]
    assert not unmarked


def test_commands_are_joined_over_lines_and_carry_the_exit_code_that_they_name() -> None:
    block = Block("sh", "# a note\nsafecheck a \\\n  --b\nsafecheck c # exit 10\n", 1)
    assert commands_of(block) == [("safecheck a    --b", 0), ("safecheck c", 10)]
