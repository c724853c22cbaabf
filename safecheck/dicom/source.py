"""Bytes of a source: a file opened, or an archive member inflated in memory within bounds."""

from __future__ import annotations

import functools
import io
import zipfile
import zlib
from pathlib import Path
from typing import BinaryIO

from safecheck.dicom.instance import Source
from safecheck.errors import InputRefused

__all__ = ["BOMB_FLOOR_BYTES", "BOMB_RATIO", "WHOLE_LIMIT_BYTES", "inflate", "open_source", "read_member"]

WHOLE_LIMIT_BYTES = 512 * 1024 * 1024
"""What must be taken in whole (archive members, deflated files) may be this large, not larger."""
BOMB_RATIO = 200
"""Inflating beyond this ratio, and beyond the floor, is taken for an attack; deflate itself ends at 1032."""
BOMB_FLOOR_BYTES = 16 * 1024 * 1024
_CHUNK_BYTES = 1 << 20


def open_source(source: Source) -> BinaryIO:
    """Open a source for reading; an archive member is inflated whole into memory.

    Parameters
    ----------
    source
        A regular file, or a member of a zip archive.

    Returns
    -------
    BinaryIO
        Seekable, at position 0. The caller closes it.

    Raises
    ------
    InputRefused
        'unreadable' if it is gone, locked or damaged; for a member beyond bounds 'too-large' or 'archive-bomb'.
    """
    try:
        if not source.member:
            return source.path.open("rb")
        found = source.path.stat()
        archive = _archive(source.path, found.st_mtime_ns, found.st_size)
        return io.BytesIO(read_member(archive, archive.getinfo(source.member)))
    except (OSError, KeyError, zipfile.BadZipFile) as error:
        raise InputRefused("unreadable", f"{type(error).__name__} when opened") from None


@functools.lru_cache(maxsize=1)
def _archive(path: Path, _changed_ns: int, _size_bytes: int) -> zipfile.ZipFile:
    """Open an archive, or take the one last opened if it is the same still: reading its directory takes 5 us a member.

    It is closed when another takes its place.
    """
    return zipfile.ZipFile(path)


def read_member(archive: zipfile.ZipFile, member: zipfile.ZipInfo) -> bytes:
    """Inflate a member, never beyond the bounds and never beyond what its directory entry declares.

    Raises
    ------
    InputRefused
        'too-large', 'archive-bomb', or 'unreadable' (encrypted, unknown method, damaged).
    """
    _check_sizes(member.compress_size, member.file_size)
    if member.flag_bits & 0x1:
        raise InputRefused("unreadable", "an encrypted archive member")
    try:
        with archive.open(member) as stream:
            content = stream.read(member.file_size + 1)
    except (OSError, EOFError, RuntimeError, NotImplementedError, ValueError) as error:
        raise InputRefused("unreadable", f"{type(error).__name__} in an archive member") from None
    except (zipfile.BadZipFile, zlib.error) as error:
        raise InputRefused("unreadable", f"{type(error).__name__} in an archive member") from None
    if len(content) != member.file_size:
        raise InputRefused("archive-bomb", "the member's size is not the size that the archive declares")
    return content


def _check_sizes(packed_bytes: int, whole_bytes: int) -> None:
    """Refuse by size and ratio, the ratio first: a bomb is named as one."""
    if whole_bytes > BOMB_FLOOR_BYTES and whole_bytes > BOMB_RATIO * max(packed_bytes, 1):
        raise InputRefused("archive-bomb", f"over {BOMB_RATIO} times its packed size")
    if whole_bytes > WHOLE_LIMIT_BYTES:
        raise InputRefused("too-large", "an archive member over 512 MB")


def inflate(packed: bytes) -> bytes:
    """Inflate a raw deflate stream (PS3.5 A.5) within the bounds for what is taken in whole.

    Raises
    ------
    InputRefused
        'too-large', 'archive-bomb', or 'unreadable' for a damaged stream.
    """
    engine = zlib.decompressobj(-zlib.MAX_WBITS)
    parts: list[bytes] = []
    total, rest = 0, packed
    try:
        while rest and not engine.eof:
            parts.append(engine.decompress(rest, _CHUNK_BYTES))
            total += len(parts[-1])
            if total > BOMB_FLOOR_BYTES and total > BOMB_RATIO * len(packed):
                raise InputRefused("archive-bomb", f"over {BOMB_RATIO} times its packed size")
            if total > WHOLE_LIMIT_BYTES:
                raise InputRefused("too-large", "a deflated file over 512 MB when inflated")
            rest = engine.unconsumed_tail
        parts.append(engine.flush())
    except zlib.error:
        raise InputRefused("unreadable", "a damaged deflate stream") from None
    return b"".join(parts)
