"""The region file: JSON, versioned, readable and diffable, without identifiers."""

from __future__ import annotations

import hashlib
import json
from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from safecheck.documents import Document, from_json
from safecheck.regions.region import Part, Region, RegionSet, Role

__all__ = ["RegionEntry", "RegionFile", "file_text", "json_schema", "read_regions"]


class RegionEntry(Document):
    """One region as the file holds it."""

    name: Annotated[str, Field(min_length=1, max_length=64)]
    label: Annotated[str, Field(min_length=1, max_length=64)]
    role: Role
    background: str = ""
    """Name of the region that CNR is taken against, or ''."""
    parts: Annotated[tuple[Part, ...], Field(min_length=1)]


class RegionFile(Document):
    """The whole file."""

    version: Literal[1]
    regions: Annotated[tuple[RegionEntry, ...], Field(min_length=1)]

    @model_validator(mode="after")
    def _names_hold_together(self) -> RegionFile:
        """Names differ, and every background is one of them."""
        names = [region.name for region in self.regions]
        twice = sorted({name for name in names if names.count(name) > 1})
        if twice:
            raise ValueError(f"regions need different names, found {twice[0]!r} twice")
        for region in self.regions:
            if region.background and (region.background not in names or region.background == region.name):
                raise ValueError(f"the background of region {region.name!r} is expected to be another region's name")
        return self


def read_regions(content: bytes) -> RegionSet:
    """Read a region file.

    Raises
    ------
    DocumentError
        With the dotted path of the key at fault.
    """
    document = from_json(RegionFile, content)
    regions = tuple(
        Region(entry.name, entry.label, entry.role, entry.parts, entry.background) for entry in document.regions
    )
    return RegionSet(regions, hashlib.sha256(content).hexdigest())


def file_text(document: RegionFile) -> str:
    """Write a region file, one key a line."""
    return json.dumps(document.model_dump(mode="json"), indent=2, ensure_ascii=False) + "\n"


def json_schema() -> dict[str, Any]:
    """JSON Schema of the region file."""
    return RegionFile.model_json_schema()
