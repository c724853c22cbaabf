"""The parts of docs/ that are written from the code: tables between two marks, and the JSON Schemas.

A part stands between ``<!-- written from the code: NAME -->`` and ``<!-- end: NAME -->``; the rest of the document is
written by hand. `tests/test_documents.py` holds them equal; `tests/document_examples.py --write` writes them.
"""

from __future__ import annotations

import datetime
import enum
import json
import types
import typing
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Literal, Union

from annotated_types import Ge, Gt, Le, Lt, MaxLen, MinLen
from pydantic import AwareDatetime
from pydantic.fields import FieldInfo

from safecheck.codecs import registry
from safecheck.documents import Document
from safecheck.jobs.plans import setting_range
from safecheck.measures.catalogue import MEASURES, Measure
from safecheck.policy.plan import Plan
from safecheck.record.crops import CropDocument
from safecheck.record.document import RecordDocument
from safecheck.record.rows import IMAGE_UNIT, TABLES, TreatedFrame, columns_of
from safecheck.record.run import RunFacts
from safecheck.regions.file import RegionFile
from safecheck.report.seal import Seal
from tests.field_texts import PLAN_UNITS, text_of

__all__ = ["DOCS", "PARTS", "SCHEMAS", "column_rows", "models_of", "parts_of", "replaced", "schema_text", "write_all"]

DOCS = Path(__file__).parents[1] / "docs"

SCHEMAS: dict[str, type[Document]] = {
    "plan.schema.json": Plan,
    "record.schema.json": RecordDocument,
    "regions.schema.json": RegionFile,
    "run.schema.json": RunFacts,
}
"""File in docs/schemas -> the document that it describes."""

_SHARED = "measures, regions, windows"


@dataclass(frozen=True, slots=True)
class Part:
    """One part of one document."""

    document: str
    name: str
    write: Callable[[], str]


def table(head: tuple[str, ...], rows: Iterable[tuple[str, ...]]) -> str:
    """A table in Markdown."""
    lines = [head, ("---",) * len(head), *rows]
    return "".join("| " + " | ".join(cell.replace("|", "\\|") for cell in line) + " |\n" for line in lines)


# Columns of the tables


def column_rows() -> list[tuple[str, str, str, str, str]]:
    """(column, tables, kind, unit, meaning) of every column of the four tables."""
    shared = columns_of(TreatedFrame)
    rows = [(text.name, _SHARED, text.kind, text.unit, text.meaning) for text in shared]
    for name, row in TABLES.items():
        own = columns_of(row)
        if issubclass(row, TreatedFrame):
            own = own[len(shared) :]
        rows += [(text.name, name, text.kind, text.unit, text.meaning) for text in own]
    return rows


def _columns() -> str:
    rows = [(f"`{name}`", where, kind, unit or "–", meaning) for name, where, kind, unit, meaning in column_rows()]
    return table(("column", "table", "kind", "unit", "meaning"), rows)


# Measures


def _bound(measure: Measure) -> str:
    """How a limit on a measure is written."""
    if not measure.limitable:
        return "none"
    if measure.signed:
        return "`at_most`, on the size without its sign"
    return "`at_least`" if measure.worse == "lower" else "`at_most`"


def _measures() -> str:
    rows = [
        (f"`{measure.name}`", measure.table, f"`{measure.unit}`", _bound(measure), measure.text)
        if measure.unit != IMAGE_UNIT
        else (f"`{measure.name}`", measure.table, measure.unit, _bound(measure), measure.text)
        for measure in MEASURES.values()
        if measure.limitable
    ]
    return table(("measure", "table", "unit", "bound", "what it is"), rows)


def _no_limit() -> str:
    rows = [(f"`{item.name}`", item.table, item.why_not) for item in MEASURES.values() if not item.limitable]
    return table(("measure", "table", "why no limit may rest on it"), rows)


# Fields of documents


def parts_of(annotation: Any) -> Iterator[Any]:
    """Yield the members of a union, the type itself where it is none."""
    if typing.get_origin(annotation) in (Union, types.UnionType):
        for member in typing.get_args(annotation):
            yield from parts_of(member)
    else:
        yield annotation


def _kind(annotation: Any) -> str:
    """A type in words."""
    return " or ".join(dict.fromkeys(_one_kind(member) for member in parts_of(annotation)))


_KINDS: dict[Any, str] = {
    str: "text",
    int: "whole number",
    float: "number",
    bool: "true or false",
    datetime.date: "date",
    type(None): "null",
    AwareDatetime: "time with zone",
    Any: "any",
}


def _one_kind(annotation: Any) -> str:
    """One type in words."""
    if annotation in _KINDS:
        return _KINDS[annotation]
    origin, arguments = typing.get_origin(annotation), typing.get_args(annotation)
    if origin is typing.Annotated:
        return _kind(arguments[0])
    if origin is Literal:
        return ", ".join(f"`{value}`" for value in arguments)
    if origin is tuple:
        return f"list of {_many(arguments[0])}"
    if origin is dict:
        return f"table of {_many(arguments[1])}"
    if isinstance(annotation, type) and issubclass(annotation, enum.Enum):
        return ", ".join(f"`{member.value}`" for member in annotation)
    if isinstance(annotation, type) and issubclass(annotation, Document):
        return f"[{annotation.__name__}](#{annotation.__name__.lower()})"
    raise TypeError(f"no words for {annotation!r}")


def _many(annotation: Any) -> str:
    """Several of a type in words."""
    return " or ".join(
        f"{kind}s" if kind.endswith(("text", "number")) else kind for kind in _kind(annotation).split(" or ")
    )


def _range(field: FieldInfo) -> str:
    """What a field's checks allow, in words."""
    words = {Gt: "above", Ge: "from", Lt: "below", Le: "to"}
    said = [f"{words[type(check)]} {_limit(check):g}" for check in field.metadata if type(check) in words]
    least = next((check.min_length for check in field.metadata if isinstance(check, MinLen)), None)
    most = next((check.max_length for check in field.metadata if isinstance(check, MaxLen)), None)
    if least is not None:
        said.append(f"at least {least}" if most is None else f"{least} to {most} characters")
    return " ".join(said)


def _limit(check: Any) -> float:
    """The number in a check."""
    return float(getattr(check, type(check).__name__.lower()))


def _default(field: FieldInfo) -> str:
    """What stands where a key is left out."""
    if field.is_required():
        return "must be given"
    value = field.get_default(call_default_factory=True, validated_data={})
    if isinstance(value, enum.Enum):
        value = value.value
    if value is None or isinstance(value, Document):
        return "none" if value is None else "its own defaults"
    return "empty" if value in ("", (), {}) else f"`{json.dumps(value)}`"


def models_of(root: type[Document]) -> list[type[Document]]:
    """The document's own model and those inside it, in the order in which they are met."""
    found = [root]
    for model in found:
        for field in model.model_fields.values():
            found += [inner for inner in _inside(field.annotation) if inner not in found]
    return found


def _inside(annotation: Any) -> Iterator[type[Document]]:
    """Yield the models that a type names."""
    if isinstance(annotation, type) and issubclass(annotation, Document):
        yield annotation
    for argument in typing.get_args(annotation):
        yield from _inside(argument)


def _plan_kind(name: str, field: FieldInfo) -> str:
    """Kind of a key in TOML, which has no null; tables lead to their own section."""
    if any(True for _ in _inside(field.annotation)):
        many = typing.get_origin(field.annotation) is tuple
        return f"{'list of tables' if many else 'table'} [`{name}`](#{name})"
    return _kind(field.annotation).removesuffix(" or null")


def plan_table(model: type[Document]) -> str:
    """The keys of one table of the plan."""
    rows = [
        (
            f"`{name}`",
            _plan_kind(name, field),
            PLAN_UNITS.get(f"{model.__name__}.{name}", "–"),
            _default(field),
            _range(field) or "–",
            text_of(model, name),
        )
        for name, field in model.model_fields.items()
    ]
    return table(("key", "kind", "unit", "default", "allowed", "meaning"), rows)


def fields_table(model: type[Document]) -> str:
    """The fields of one object of a document in JSON."""
    rows = [(f"`{name}`", _kind(field.annotation), text_of(model, name)) for name, field in model.model_fields.items()]
    return table(("field", "kind", "meaning"), rows)


def objects(root: type[Document]) -> str:
    """All objects of a document in JSON."""
    parts = []
    for model in models_of(root):
        said = (model.__doc__ or "").strip()
        parts.append(f"#### {model.__name__}\n\n{said}\n\n{fields_table(model)}")
    return "\n".join(parts)


def _plan_parts() -> Iterator[Part]:
    for model in models_of(Plan):
        name = f"plan {model.__name__}"
        yield Part("plans_and_limits.md", name, lambda model=model: plan_table(model))  # type: ignore[misc]


def _codecs() -> str:
    """The codecs that a candidate may name, with what their classes say of their settings."""
    rows = []
    for name in registry.rated_names():
        dial = registry.entry(name).dial
        others = [
            f"`{key}`: {setting_range(name, key)} (default `{json.dumps(value)}`)"
            for key, value in sorted(registry.codec(name).settings.items())
            if key != dial
        ]
        writes = "yes" if registry.entry(name).archive_can_write else "no"
        rows.append((f"`{name}`", f"`{dial}`", setting_range(name, dial), "; ".join(others) or "–", writes))
    return table(("codec", "its dial", "expected of the dial", "other settings", "an archive can write it"), rows)


PARTS: tuple[Part, ...] = (
    Part("columns.md", "columns", _columns),
    Part("plans_and_limits.md", "measures", _measures),
    Part("plans_and_limits.md", "measures without limits", _no_limit),
    *_plan_parts(),
    Part("plans_and_limits.md", "codecs", _codecs),
    Part("record_format.md", "record", lambda: objects(RecordDocument)),
    Part("record_format.md", "run", lambda: fields_table(RunFacts)),
    Part("record_format.md", "seal", lambda: objects(Seal)),
    Part("record_format.md", "crop", lambda: fields_table(CropDocument)),
)


# Schemas


def schema_text(model: type[Document]) -> str:
    """JSON Schema of a document, with the meaning of each field."""
    schema = model.model_json_schema()
    places = {inner.__name__: inner for inner in models_of(model)}
    for name, described in [(model.__name__, schema), *schema.get("$defs", {}).items()]:
        for key, said in described.get("properties", {}).items():
            said.pop("title", None)
            if name in places and "description" not in said:
                said["description"] = text_of(places[name], key)
    head = {"$schema": "https://json-schema.org/draft/2020-12/schema"}
    return json.dumps(head | schema, indent=2, ensure_ascii=False, sort_keys=True) + "\n"


# Writing


def _marks(part: Part) -> tuple[str, str]:
    return f"<!-- written from the code: {part.name} -->\n", f"<!-- end: {part.name} -->\n"


def replaced(text: str, part: Part) -> str:
    """The document with one of its parts written anew.

    Raises
    ------
    ValueError
        If the part's marks are missing.
    """
    begin, end = _marks(part)
    if begin not in text or end not in text:
        raise ValueError(f"{part.document} lacks the marks of {part.name!r}")
    head, rest = text.split(begin, 1)
    return f"{head}{begin}{part.write()}{end}{rest.split(end, 1)[1]}"


def write_all() -> None:
    """Write every part and schema."""
    for name, model in SCHEMAS.items():
        (DOCS / "schemas" / name).write_text(schema_text(model), encoding="utf-8")
    for part in PARTS:
        path = DOCS / part.document
        path.write_text(replaced(path.read_text(encoding="utf-8"), part), encoding="utf-8")
