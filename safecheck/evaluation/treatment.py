"""A frame under one candidate or control: the code that was written, and the samples read back from it."""

from __future__ import annotations

import zlib
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np

from safecheck.codecs.base import Carriage, Codec, Encoded, Reached
from safecheck.codecs.registry import entry, rated, settings_text
from safecheck.errors import CannotEncode
from safecheck.evaluation.assignment import Candidate, SeriesDial
from safecheck.evaluation.original import Original
from safecheck.frames import Frame, PixelFormat, Raster, Samples, Values
from safecheck.policy.plan import Asked
from safecheck.wording import DELIVERED_COPIES, ON_REFERENCE

__all__ = [
    "OVER_COMPRESSION",
    "Role",
    "Treated",
    "decode",
    "deliver",
    "find_dial",
    "over_compress",
    "recompress",
    "reverse",
]

Role = Literal["candidate", "bracket", "delivered", "reversible", "repeat", "over-compressed", "planted"]

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
    asked: Asked | Literal[""] = ""
    ratio_asked: float | None = None
    basis: str = ""
    dial: str = ""
    """Name of the setting that sets the size; '' where there is none."""
    dial_value: float | None = None
    carriage: Carriage | None = None
    """How samples were brought into the code; None without a code of our own."""
    error_bound: int | None = None
    """Largest error in stored values that the codec promises; None without promise."""
    coding_error: int | None = None
    """Largest error in stored values against what was coded, where there is a promise."""
    flattened_max: float | None = None
    """Largest change made to what lies outside before coding, in the frame's unit; None where it was kept."""


def decode(codec: Codec, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
    """Read a code back; the one place where decoded samples enter the measures."""
    return codec.decode(code, format, shape)


def recompress(original: Original, candidate: Candidate, role: Role = "candidate") -> tuple[Treated, ...]:
    """Write a frame as a candidate asks and read it back; a second time where two settings bracket the ratio.

    Returns
    -------
    tuple of Treated
        The candidate's own, which comes first, and with a bracket the one of the neighbouring setting.

    Raises
    ------
    CannotEncode
        If the codec does not take such a frame, or no setting was found for its series.
    """
    raster = _coded(original, candidate)
    if candidate.asked == "ratio per frame":
        encoded = _to_size(original, candidate, raster, _target_bytes(original, candidate))
    else:
        codec = rated(candidate.codec, **_fixed(candidate))
        encoded = Encoded(codec.encode(raster), codec.settings, Reached.SETTING)
    own = _treated(original, candidate, raster, encoded, role)
    if encoded.neighbour is None or role != "candidate":
        return (own,)
    return own, _treated(original, candidate, raster, encoded.neighbour, "bracket")


def find_dial(original: Original, candidate: Candidate) -> SeriesDial:
    """Find the setting at which a candidate's ratio is met on the reference frame of a series.

    Raises
    ------
    CannotEncode
        If the codec does not take the frame.
    """
    target = _target_bytes(original, candidate)
    encoded = _to_size(original, candidate, _coded(original, candidate), target)
    if encoded.reached in (Reached.ASKED, Reached.BRACKET):
        return SeriesDial(encoded.settings)
    return SeriesDial(encoded.settings, f"{candidate.name}: {encoded.reached} {ON_REFERENCE}")


def over_compress(original: Original, candidate: Candidate, smallest_bytes: int) -> Treated:
    """Write a frame far below the smallest code that the candidates of one codec gave.

    Raises
    ------
    CannotEncode
        If the codec does not take such a frame.
    """
    raster = _coded(original, candidate)
    encoded = _to_size(original, candidate, raster, max(1.0, smallest_bytes / OVER_COMPRESSION))
    return _treated(original, candidate, raster, encoded, "over-compressed")


def _target_bytes(original: Original, candidate: Candidate) -> float:
    """Size that a candidate's ratio asks for."""
    if candidate.ratio is None:
        raise ValueError(f"{candidate.name} asks for no ratio")
    return original.size_bytes(candidate.basis) / candidate.ratio


def _fixed(candidate: Candidate) -> dict[str, str | int | float | bool]:
    """Settings of a candidate that is no search, its dial among them."""
    if candidate.asked == "setting":
        return dict(candidate.settings)
    if candidate.dial is None or candidate.dial.settings is None:
        raise CannotEncode(candidate.dial.note if candidate.dial else "no setting was sought for its series")
    return dict(candidate.dial.settings)


def _to_size(original: Original, candidate: Candidate, raster: Raster, target: float) -> Encoded:
    """Write a raster with a candidate's codec and settings at a size in bytes."""
    encoded = rated(candidate.codec, **dict(candidate.settings)).encode_to_size(raster, target)
    if encoded.reached not in (Reached.ASKED, Reached.BRACKET) and original.smallest.size_bytes <= target:
        return replace(encoded, reached=Reached.REVERSIBLE_SMALLER)
    return encoded


def _coded(original: Original, candidate: Candidate) -> Raster:
    """What a candidate codes: the frame, or the frame with its outside flattened."""
    return _flattened(original) if candidate.flatten_outside else original.frame.raster


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
    raster = original.frame.raster
    written = codec.encode(raster) if code is None else code
    name = "reversible" if code is not None else f"reversible, {codec.name}"
    return _read_back(original, codec, raster, Encoded(written, codec.settings, Reached.SETTING), "reversible", name)


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


def _treated(original: Original, candidate: Candidate, raster: Raster, encoded: Encoded, role: Role) -> Treated:
    """Read a candidate's code back, and say what was asked."""
    own = role in ("candidate", "bracket")
    name = candidate.name if own else f"{role}, {candidate.codec}"
    codec = rated(candidate.codec, **dict(encoded.settings))
    treated = _read_back(original, codec, raster, encoded, role, name)
    if role != "over-compressed":
        basis = "" if candidate.ratio is None else str(candidate.basis)
        treated = replace(treated, asked=candidate.asked, ratio_asked=candidate.ratio, basis=basis)
    if not candidate.flatten_outside:
        return treated
    moved = np.abs(original.frame.values(raster.samples) - original.values)
    return replace(treated, flattened_max=float(moved.max()))


def _read_back(original: Original, codec: Codec, raster: Raster, encoded: Encoded, role: Role, name: str) -> Treated:
    """Read the code back and say what wrote it."""
    samples = decode(codec, encoded.code, raster.format, raster.shape)
    bound = 0 if role == "reversible" else codec.error_bound
    dial = entry(codec.name).dial
    value = encoded.settings.get(dial)
    return Treated(
        role=role,
        candidate=name,
        samples=samples,
        values=original.frame.values(samples),
        code_bytes=len(encoded.code),
        code_crc32=zlib.crc32(encoded.code),
        codec=codec.name,
        codec_version=codec.version,
        settings=settings_text(encoded.settings),
        archive_can_write=codec.archive_can_write,
        reached=encoded.reached,
        encodes=encoded.encodes,
        dial=dial,
        dial_value=float(value) if isinstance(value, int | float) else None,
        carriage=codec.carriage(raster.format),
        error_bound=bound,
        coding_error=None if bound is None else _largest_error(samples, raster.samples),
    )


def _largest_error(samples: Samples, coded: Samples) -> int:
    """Largest difference in stored values, of which none has more than 16 bits."""
    if np.array_equal(samples, coded):
        return 0
    return int(np.abs(np.subtract(samples, coded, dtype=np.int32)).max())
