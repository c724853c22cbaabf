"""A frame under one candidate or control: the code that was written, and the samples read back from it."""

from __future__ import annotations

import zlib
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from safecheck.codecs.base import Codec, Encoded, Reached
from safecheck.codecs.registry import rated, settings_text
from safecheck.evaluation.assignment import Candidate
from safecheck.evaluation.original import Original
from safecheck.frames import Frame, PixelFormat, Raster, Samples, Values
from safecheck.wording import DELIVERED_COPIES

__all__ = [
    "OVER_COMPRESSION",
    "Role",
    "Treated",
    "decode",
    "deliver",
    "over_compress",
    "recompress",
    "reverse",
]

Role = Literal["candidate", "delivered", "reversible", "repeat", "over-compressed", "planted"]

OVER_COMPRESSION = 8.0
"""How many times smaller than a codec's smallest candidate the over-compressed control is."""


@dataclass(frozen=True, slots=True, eq=False)
class Treated:
    """What was done to a frame, and what came back."""

    role: Role
    candidate: str
    samples: Samples
    """Stored values decoded from the code and nothing else."""
    values: Values
    """The same in the frame's unit."""
    code_bytes: int
    code_crc32: int | None
    """None for a delivered copy, whose code stays in its file."""
    codec: str
    codec_version: str
    settings: str
    """As canonical JSON."""
    archive_can_write: bool
    reached: Reached
    encodes: int = 1
    ratio_asked: float | None = None
    basis: str = ""
    flattened_max: float | None = None
    """Largest change made to what lies outside before coding, in the frame's unit; None where it was kept."""


def decode(codec: Codec, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
    """Read a code back; the one place where decoded samples enter the measures."""
    return codec.decode(code, format, shape)


def recompress(original: Original, candidate: Candidate, role: Role = "candidate") -> Treated:
    """Write a frame at a candidate's ratio and read it back.

    Raises
    ------
    CannotEncode
        If the codec does not take such a frame.
    """
    target = original.size_bytes(candidate.basis) / candidate.ratio
    treated = _to_size(original, candidate, role, target)
    return replace(treated, ratio_asked=candidate.ratio, basis=str(candidate.basis))


def over_compress(original: Original, candidate: Candidate, smallest_bytes: int) -> Treated:
    """Write a frame far below the smallest code that the candidates of one codec gave.

    Raises
    ------
    CannotEncode
        If the codec does not take such a frame.
    """
    return _to_size(original, candidate, "over-compressed", max(1.0, smallest_bytes / OVER_COMPRESSION))


def _to_size(original: Original, candidate: Candidate, role: Role, target: float) -> Treated:
    """Write a frame with a candidate's codec and settings at a size in bytes, and read it back."""
    codec = rated(candidate.codec, **dict(candidate.settings))
    raster = _flattened(original) if candidate.flatten_outside else original.frame.raster
    encoded = codec.encode_to_size(raster, target)
    if encoded.reached is not Reached.ASKED and original.smallest.size_bytes <= target:
        encoded = replace(encoded, reached=Reached.REVERSIBLE_SMALLER)
    name = candidate.name if role == "candidate" else f"{role}, {candidate.codec}"
    treated = _treated(original, codec, encoded, role, name)
    if not candidate.flatten_outside:
        return treated
    moved = np.abs(original.frame.values(raster.samples) - original.values)
    return replace(treated, flattened_max=float(moved.max()))


def _flattened(original: Original) -> Raster:
    """The raster with all that is neither content nor padding set to its median, channel by channel."""
    raster = original.frame.raster
    outside = ~original.content.mask
    if raster.padding is not None:
        outside &= ~raster.padding
    samples = raster.samples.copy()
    if outside.any():
        samples[outside] = np.rint(np.median(samples[outside], axis=0)).astype(samples.dtype)
    return Raster(samples, raster.format, raster.padding)


def reverse(original: Original, codec: Codec, code: bytes | None = None) -> Treated:
    """Write a frame reversibly and read it back; `code` where it is written already."""
    written = codec.encode(original.frame.raster) if code is None else code
    encoded = Encoded(written, codec.settings, Reached.SETTING)
    name = "reversible" if code is not None else f"reversible, {codec.name}"
    return _treated(original, codec, encoded, "reversible", name)


def deliver(delivered: Frame) -> Treated:
    """Take the copy that an archive returned, with its own modality transform."""
    return Treated(
        role="delivered",
        candidate=DELIVERED_COPIES,
        samples=delivered.raster.samples,
        values=delivered.values(delivered.raster.samples),
        code_bytes=delivered.origin.source_bytes,
        code_crc32=None,
        codec="delivered",
        codec_version=delivered.origin.source_syntax,
        settings="{}",
        archive_can_write=True,
        reached=Reached.SETTING,
    )


def _treated(original: Original, codec: Codec, encoded: Encoded, role: Role, name: str) -> Treated:
    """Read the code back and say what wrote it."""
    frame = original.frame
    samples = decode(codec, encoded.code, frame.raster.format, frame.raster.shape)
    return Treated(
        role=role,
        candidate=name,
        samples=samples,
        values=frame.values(samples),
        code_bytes=len(encoded.code),
        code_crc32=zlib.crc32(encoded.code),
        codec=codec.name,
        codec_version=codec.version,
        settings=settings_text(encoded.settings),
        archive_can_write=codec.archive_can_write,
        reached=encoded.reached,
        encodes=encoded.encodes,
    )
