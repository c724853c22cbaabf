"""Where a planted string turned up: every byte of files, of what they hold packed, and in several encodings."""

from __future__ import annotations

import base64
import io
import zipfile
from collections.abc import Iterable, Iterator
from pathlib import Path

import pyarrow.parquet as parquet
import pypdf

__all__ = ["contents_of", "encodings_of", "find"]


def encodings_of(needle: str) -> Iterator[bytes]:
    """The needle as it may stand in bytes."""
    plain = needle.encode()
    yield plain
    yield needle.encode("utf-16-le")
    yield needle.encode("utf-16-be")
    yield plain.hex().encode()
    yield plain.hex().upper().encode()
    for shift in range(3):
        # Of base 64 the middle, which does not depend on what stands before and after.
        coded = base64.b64encode(b"\0" * shift + plain)
        yield coded[4 if shift else 0 : (shift + len(plain)) // 3 * 4]


def find(needles: Iterable[str], places: Iterable[tuple[str, bytes]]) -> list[tuple[str, str]]:
    """(needle, place) of each that turned up."""
    wanted = [(needle, form) for needle in needles for form in encodings_of(needle)]
    return sorted({(needle, place) for place, content in places for needle, form in wanted if form in content})


def contents_of(folder: Path) -> Iterator[tuple[str, bytes]]:
    """Names and bytes of all files below a folder, with what PDF, Parquet and zip files hold packed."""
    for path in sorted(folder.rglob("*")):
        name = path.relative_to(folder).as_posix()
        yield f"name of {name}", name.encode()
        if path.is_symlink():
            yield f"target of {name}", str(path.readlink()).encode()
        elif path.is_file():
            content = path.read_bytes()
            yield name, content
            yield from _unpacked(name, content)


def _unpacked(name: str, content: bytes) -> Iterator[tuple[str, bytes]]:
    if content.startswith(b"%PDF"):
        yield from _of_pdf(name, content)
    elif content.startswith(b"PAR1"):
        yield from _of_parquet(name, content)
    elif content.startswith(b"PK\x03\x04"):
        with zipfile.ZipFile(io.BytesIO(content)) as archive:
            for member in archive.namelist():
                yield f"{name}/{member}", member.encode() + archive.read(member)


def _of_pdf(name: str, content: bytes) -> Iterator[tuple[str, bytes]]:
    """Every object, streams unpacked; the text of each page; metadata."""
    reader = pypdf.PdfReader(io.BytesIO(content))
    yield f"{name}, metadata", repr(reader.metadata).encode() + repr(reader.xmp_metadata).encode()
    for number, page in enumerate(reader.pages, start=1):
        yield f"{name}, page {number}", page.extract_text().encode()
    for number in reader.xref[0]:
        found = reader.get_object(pypdf.generic.IndirectObject(number, 0, reader))
        yield f"{name}, object {number}", repr(found).encode()
        if isinstance(found, pypdf.generic.StreamObject):
            yield f"{name}, stream {number}", found.get_data()


def _of_parquet(name: str, content: bytes) -> Iterator[tuple[str, bytes]]:
    file = parquet.ParquetFile(io.BytesIO(content))
    yield f"{name}, schema", repr(file.schema_arrow).encode() + repr(file.metadata.metadata).encode()
    for column in file.read().to_pydict().items():
        yield f"{name}, {column[0]}", repr(column).encode()
