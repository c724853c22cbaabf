"""Canonical JSON (RFC 8785) and hashes of files."""

from __future__ import annotations

import hashlib
from pathlib import Path
from typing import Any

import rfc8785

from safecheck.documents import Document

__all__ = ["canonical_bytes", "document_bytes", "sha256_of_file"]


def canonical_bytes(value: Any) -> bytes:  # noqa: ANN401
    """Write JSON values in the one form that RFC 8785 allows.

    Raises
    ------
    rfc8785.CanonicalizationError
        For values that JSON cannot hold, such as infinity.
    """
    return rfc8785.dumps(value)


def document_bytes(document: Document) -> bytes:
    """Write a document in canonical form."""
    return canonical_bytes(document.model_dump(mode="json"))


def sha256_of_file(path: Path) -> str:
    """SHA-256 of a file's bytes, as lower-case hexadecimal."""
    with path.open("rb") as file:
        return hashlib.file_digest(file, "sha256").hexdigest()
