"""One frame's bytes to stored values: decoded, held against the header, colour brought to RGB."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from safecheck.dicom.colour import rgb_from_ybr, spread_422
from safecheck.dicom.decoders import DECODERS, decode, rebuild_jpeg, second_opinion
from safecheck.dicom.jpeg_heads import strip_jp2
from safecheck.dicom.jpegxl_head import holds_jpeg
from safecheck.dicom.pixel_header import PixelHeader
from safecheck.dicom.stored_bits import stored_values
from safecheck.dicom.stream_facts import StreamFacts, coded_length, facts_of_stream, read_jpeg, read_jpegxl
from safecheck.dicom.syntaxes import ROOT, Coding, Syntax, syntax_of
from safecheck.errors import InputRefused
from safecheck.frames import Samples

__all__ = ["FramePixels", "check_syntax", "read_frame_pixels", "second_frame_pixels"]

_JPEG_SYNTAXES = {
    "baseline": f"{ROOT}.4.50",
    "extended": f"{ROOT}.4.51",
    "progressive": f"{ROOT}.4.55",
}
_TRANSFORMED = ("YBR_RCT", "YBR_ICT")


@dataclass(frozen=True, slots=True, eq=False)
class FramePixels:
    """Stored values of one frame, and how they were come by."""

    samples: Samples
    """(rows, columns) or (rows, columns, 3), of the header's format."""
    source_bytes: int
    """Code stream, or uncompressed samples, without padding where that can be told."""
    notes: tuple[str, ...]


def check_syntax(syntax: Syntax, header: PixelHeader) -> None:
    """Refuse what no decoder here reads, and colour that the syntax cannot hold.

    Raises
    ------
    InputRefused
        'syntax' or 'photometric'.
    """
    if syntax.coding is not Coding.NATIVE and syntax.uid not in DECODERS:
        raise InputRefused("syntax", syntax.name)
    if header.photometric in _ALLOWED[syntax.coding] or header.channels == 1:
        return
    raise InputRefused("photometric", f"{header.photometric} in {syntax.name}")


_ALLOWED: dict[Coding, tuple[str, ...]] = {
    Coding.NATIVE: ("RGB", "YBR_FULL", "YBR_FULL_422"),
    Coding.RLE: ("RGB", "YBR_FULL"),
    Coding.JPEG: ("RGB", "YBR_FULL", "YBR_FULL_422"),
    Coding.JPEG_LS: ("RGB", "YBR_FULL"),
    Coding.JPEG_2000: ("RGB", "YBR_FULL", *_TRANSFORMED),
    Coding.JPEG_XL: ("RGB", "XYB", "YBR_FULL", "YBR_FULL_422"),
}


def read_frame_pixels(data: bytes, syntax: Syntax, header: PixelHeader, *, little_endian: bool) -> FramePixels:
    """Bring one frame to stored values.

    Parameters
    ----------
    data
        Samples or code stream, as `FrameBytes.read` gives them.
    syntax, header
        Of the file; `check_syntax` has been called.
    little_endian
        Byte order of uncompressed samples.

    Raises
    ------
    InputRefused
        'decode', 'truncated', 'length', 'syntax', 'sign', 'bits', 'range', 'high-bits' or 'photometric'.
    """
    if syntax.coding is Coding.NATIVE:
        return _native(data, header, little_endian=little_endian)
    if syntax.coding is Coding.JPEG_XL and holds_jpeg(data):
        return _rebuilt_jpeg(data, header)
    code, facts = _checked_stream(data, syntax, header)
    size_bytes = _code_bytes(code, syntax)
    samples, notes = _from_decoded(decode(syntax.uid, code, header, facts), header, syntax, facts)
    if len(code) != len(data):
        notes = ("the code stream was wrapped in a JP2 file; its boxes were left aside", *notes)
    return FramePixels(samples, size_bytes, notes)


def second_frame_pixels(data: bytes, syntax: Syntax, header: PixelHeader) -> Samples | None:
    """Stored values by the second decoder of the syntax; None where there is none.

    Raises
    ------
    InputRefused
        As `read_frame_pixels`.
    """
    if syntax.coding is Coding.NATIVE or DECODERS[syntax.uid].second is None:
        return None
    code, facts = _checked_stream(data, syntax, header)
    decoded = second_opinion(syntax.uid, code, header, facts)
    return None if decoded is None else _from_decoded(decoded, header, syntax, facts)[0]


def _native(data: bytes, header: PixelHeader, *, little_endian: bool) -> FramePixels:
    coded_type = header.container.newbyteorder("<" if little_endian else ">")
    flat = np.frombuffer(data, dtype=coded_type).astype(header.container, copy=False)
    if header.photometric == "YBR_FULL_422":
        if header.planes:
            raise InputRefused("photometric", "uncompressed YBR_FULL_422 in planes")
        container = spread_422(flat, header.rows, header.columns)
    elif header.planes:
        container = np.moveaxis(flat.reshape(3, header.rows, header.columns), 0, -1)
    else:
        container = flat.reshape(header.shape)
    samples, notes = stored_values(container, header, reason="high-bits")
    samples, colour_notes = _to_rgb(samples, header)
    return FramePixels(samples, len(data), notes + colour_notes)


def _rebuilt_jpeg(data: bytes, header: PixelHeader) -> FramePixels:
    """Decode the JPEG stream inside, so that the values are those of the file before it was recompressed."""
    _check_size(read_jpegxl(data), header)
    jpeg = rebuild_jpeg(data)
    syntax = syntax_of(_JPEG_SYNTAXES.get(read_jpeg(jpeg).process, ""))
    if syntax.coding is not Coding.JPEG:
        raise InputRefused("syntax", "JPEG XL around a JPEG process other than baseline, extended or progressive")
    inside = read_frame_pixels(jpeg, syntax, header, little_endian=True)
    return FramePixels(inside.samples, len(data), ("decoded as the JPEG stream it was made from", *inside.notes))


def _checked_stream(data: bytes, syntax: Syntax, header: PixelHeader) -> tuple[bytes, StreamFacts | None]:
    """Bare code stream and its own header, held against the DICOM header before memory is spent on it."""
    code = strip_jp2(data) if syntax.coding is Coding.JPEG_2000 else data
    facts = facts_of_stream(syntax.coding, code)
    if facts is not None:
        _check_facts(facts, syntax, header)
    return code, facts


def _code_bytes(code: bytes, syntax: Syntax) -> int:
    if syntax.coding in (Coding.RLE, Coding.JPEG_XL):
        return len(code)  # neither has an end marker by which an item's padding could be told
    length = coded_length(code)
    if length is None:
        raise InputRefused("truncated", "the code stream has no end marker")
    return length


def _check_facts(facts: StreamFacts, syntax: Syntax, header: PixelHeader) -> None:
    processes = DECODERS[syntax.uid].processes
    if processes and facts.process not in processes:
        raise InputRefused("syntax", f"a code stream of process {facts.process} under {syntax.name}")
    _check_size(facts, header)
    if facts.precision > header.bits_allocated:
        raise InputRefused("bits", f"{facts.precision} bits in the code stream, {header.bits_allocated} allocated")
    _check_sign(facts, syntax, header)
    if facts.channels == 3:
        _check_colour(facts, syntax, header)


def _check_size(facts: StreamFacts, header: PixelHeader) -> None:
    if (facts.rows, facts.columns, facts.channels) != (header.rows, header.columns, header.channels):
        raise InputRefused("length", "the code stream is of other rows, columns or channels than the header declares")


def _check_sign(facts: StreamFacts, syntax: Syntax, header: PixelHeader) -> None:
    if syntax.coding is Coding.JPEG_2000 and facts.signed != header.signed:
        found, declared = ("signed" if each else "unsigned" for each in (facts.signed, header.signed))
        raise InputRefused("sign", f"{found} in the code stream, {declared} in the header")
    if header.signed and (syntax.coding is Coding.JPEG_XL or facts.process in ("baseline", "extended", "progressive")):
        # These have no signed samples, and a lossy code of two's complement wraps around zero.
        raise InputRefused("sign", f"signed samples in {syntax.name}, which has none")


def _check_colour(facts: StreamFacts, syntax: Syntax, header: PixelHeader) -> None:
    declared_rgb = header.photometric == "RGB"
    if syntax.coding is Coding.JPEG and facts.coded_colour:
        if declared_rgb != (facts.coded_colour == "RGB"):
            raise InputRefused("photometric", f"{header.photometric} in the header, {facts.coded_colour} in the stream")
    elif syntax.coding is Coding.JPEG and facts.process == "lossless" and header.photometric == "YBR_FULL_422":
        raise InputRefused("photometric", "YBR_FULL_422 in lossless JPEG")
    elif syntax.coding is Coding.JPEG_XL and header.photometric.startswith("YBR"):
        raise InputRefused("photometric", f"{header.photometric} in {syntax.name} that holds no JPEG stream")
    elif syntax.coding is Coding.JPEG_2000:
        transformed = facts.coded_colour == "YBR"
        if header.photometric != "RGB" and (header.photometric in _TRANSFORMED) != transformed:
            raise InputRefused(
                "photometric", f"{header.photometric} contradicts the transform named in the code stream"
            )


def _from_decoded(
    decoded: npt.NDArray[Any], header: PixelHeader, syntax: Syntax, facts: StreamFacts | None
) -> tuple[Samples, tuple[str, ...]]:
    container = _container(decoded, header)
    reason = "high-bits" if syntax.coding is Coding.RLE else "range"
    samples, notes = stored_values(container, header, reason=reason)
    if facts is not None and facts.precision != header.bits_stored:
        notes = (*notes, f"the code stream declares {facts.precision} bits, the header {header.bits_stored}")
    if header.channels == 1:
        return samples, notes
    if header.photometric in ("YBR_FULL", "YBR_FULL_422") and not _colour_undone(syntax, facts):
        samples, colour_notes = _to_rgb(samples, header)
        return samples, notes + colour_notes
    if header.photometric != "RGB":
        notes = (*notes, f"{header.photometric} was brought to RGB by the decoder")
    elif syntax.coding is Coding.JPEG_2000 and facts is not None and facts.coded_colour == "YBR":
        notes = (*notes, "the header says RGB, the code stream names a colour transform, which was undone")
    return samples, notes


def _container(decoded: npt.NDArray[Any], header: PixelHeader) -> npt.NDArray[Any]:
    """Decoded samples as the unsigned integers that would lie in the allocated bits."""
    if decoded.dtype.kind == "i":
        return decoded.astype(header.format.dtype).view(header.container)
    if int(decoded.max()) >> header.bits_allocated:
        raise InputRefused("range", f"values above {header.bits_allocated} bits allocated")
    return decoded.astype(header.container, copy=False)


def _colour_undone(syntax: Syntax, facts: StreamFacts | None) -> bool:
    """Whether the decoder itself turns luma and colour difference into RGB."""
    return syntax.coding is Coding.JPEG and facts is not None and facts.process != "lossless"


def _to_rgb(samples: Samples, header: PixelHeader) -> tuple[Samples, tuple[str, ...]]:
    if header.photometric not in ("YBR_FULL", "YBR_FULL_422"):
        return samples, ()
    return rgb_from_ybr(samples, header.bits_stored), (
        f"{header.photometric} was brought to RGB and rounded to whole levels",
    )
