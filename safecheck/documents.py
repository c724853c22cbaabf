"""TOML and JSON documents -> frozen models, or the wrong key named by its dotted path."""

from __future__ import annotations

import datetime
import json
import tomllib
from typing import TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError
from pydantic_core import ErrorDetails

from safecheck.errors import DocumentError

__all__ = ["Document", "from_json", "from_mapping", "from_toml"]


class Document(BaseModel):
    """Base of every model read from or written to a document: frozen, no unknown keys, no silent conversion."""

    model_config = ConfigDict(frozen=True, extra="forbid", allow_inf_nan=False, ser_json_inf_nan="null")


D = TypeVar("D", bound=Document)


def from_toml(model: type[D], text: str) -> D:
    """Read a TOML text into ``model``.

    Raises
    ------
    DocumentError
        If the text is not TOML, or a key is unknown, missing or of the wrong kind.
    """
    try:
        table = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise DocumentError("", f"not a TOML document: {error}") from error
    return from_mapping(model, table)


def from_json(model: type[D], text: str | bytes) -> D:
    """Read a JSON text into ``model``.

    Raises
    ------
    DocumentError
        If the text is not JSON, or a key is unknown, missing or of the wrong kind.
    """
    try:
        table = json.loads(text)
    except (json.JSONDecodeError, UnicodeDecodeError) as error:
        raise DocumentError("", f"not a JSON document: {error}") from error
    return from_mapping(model, table)


def from_mapping(model: type[D], table: object) -> D:
    """Check a table already read against ``model``; the first wrong key is named, with how many more there are.

    Raises
    ------
    DocumentError
        If a key is unknown, missing or of the wrong kind.
    """
    try:
        # Strict, and by way of JSON: there a list may stand for a tuple and a text for a date, but "10" for no number.
        return model.model_validate_json(json.dumps(table, default=_as_text), strict=True)
    except ValidationError as error:
        found = _causes(error.errors(include_url=False, include_context=False))
        # A misspelt key gives two findings, one missing and one unknown: the unknown one shows the slip.
        first = min(found, key=lambda item: item["type"] != "extra_forbidden")
        more = f" (and {len(found) - 1} more)" if len(found) > 1 else ""
        raise DocumentError(_dotted(first["loc"]), _sentence(first["type"], first["msg"]) + more) from error


def _causes(found: list[ErrorDetails]) -> list[ErrorDetails]:
    """Leave out what is said of a whole only because of its parts: a list is too short once its one item is wrong."""
    places = [item["loc"] for item in found]
    return [item for item in found if not any(_lies_inside(place, item["loc"]) for place in places)]


def _lies_inside(place: tuple[int | str, ...], whole: tuple[int | str, ...]) -> bool:
    """Whether a key lies below another."""
    return len(place) > len(whole) and place[: len(whole)] == whole


def _as_text(value: object) -> str:
    """TOML's dates and times as ISO 8601."""
    if isinstance(value, datetime.date | datetime.time):
        return value.isoformat()
    raise DocumentError("", f"a value of kind {type(value).__name__} has no place in a document")


def _dotted(location: tuple[int | str, ...]) -> str:
    """('limits', 0, 'unit') -> 'limits[0].unit'."""
    path = ""
    for part in location:
        path += f"[{part}]" if isinstance(part, int) else (f".{part}" if path else str(part))
    return path


def _sentence(kind: str, message: str) -> str:
    """Say the commonest faults in our words; leave the validator's own for the rest."""
    if kind == "missing":
        return "this key is missing"
    if kind == "extra_forbidden":
        return "this key is unknown"
    return message.removeprefix("Value error, ")
