"""Codecs of a few lines whose sizes and errors follow from their definition, registered for one test at a time."""

from __future__ import annotations

import dataclasses
import zlib
from dataclasses import dataclass
from types import MappingProxyType
from typing import ClassVar

import numpy as np
import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Carriage, Encoded, Reached, Settings, admit
from safecheck.errors import CorruptCode
from safecheck.frames import PixelFormat, Raster, Samples

__all__ = ["MOST", "Liar", "Near", "register"]

MOST = 255
"""Largest value of the dial."""


@dataclass(frozen=True, slots=True)
class Near:
    """Samples in steps of 2 near + 1, so that none is moved by more than near; the rest is DEFLATE."""

    near: int = 1

    name: ClassVar[str] = "near"
    archive_can_write: ClassVar[bool] = True
    reversible: ClassVar[bool] = False
    dial: ClassVar[str] = "near"
    moved: ClassVar[int] = 0

    def __post_init__(self) -> None:
        """Check the range."""
        if not 0 <= self.near <= MOST:
            raise ValueError(f"near is {self.near}, expected 0 to {MOST}")

    @property
    def settings(self) -> Settings:
        """The largest error."""
        return {"near": self.near}

    @property
    def version(self) -> str:
        """Of this definition."""
        return "1"

    @property
    def error_bound(self) -> int | None:
        """The promise."""
        return self.near

    def carriage(self, format: PixelFormat) -> Carriage:  # noqa: A002
        """Unsigned, in 16 bits."""
        return Carriage(16, -format.lowest, clipped_on_reading=True)

    def refuses(self, format: PixelFormat, shape: tuple[int, int]) -> str | None:  # noqa: A002, ARG002
        """Refuse colour."""
        return "colour, expected grey" if format.channels != 1 else None

    def encode(self, raster: Raster) -> bytes:
        """Write the steps, and which they are."""
        admit(self, raster)
        steps = (raster.samples.astype(np.int64) - raster.format.lowest + self.near) // (2 * self.near + 1)
        return bytes([self.near]) + zlib.compress(steps.astype("<u2").tobytes(), 9)

    def decode(self, code: bytes, format: PixelFormat, shape: tuple[int, int]) -> Samples:  # noqa: A002
        """Read the steps back."""
        try:
            steps = np.frombuffer(zlib.decompress(code[1:]), "<u2").reshape(shape).astype(np.int64)
        except (zlib.error, ValueError) as error:
            raise CorruptCode("near: no such code") from error
        values = steps * (2 * code[0] + 1) + format.lowest + self.moved
        return np.clip(values, format.lowest, format.highest).astype(format.dtype)

    def encode_to_size(self, raster: Raster, target_bytes: float) -> Encoded:
        """Turn the dial up until the code is small enough."""
        before: Encoded | None = None
        for near in range(MOST + 1):
            kind = dataclasses.replace(self, near=near)
            code = kind.encode(raster)
            if len(code) <= target_bytes:
                reached = Reached.BRACKET if before else Reached.CODEC_CEILING
                return Encoded(code, kind.settings, reached, near + 1, before)
            before = Encoded(code, kind.settings, Reached.BRACKET, near + 1)
        return Encoded(code, kind.settings, Reached.CODEC_FLOOR, MOST + 1)


@dataclass(frozen=True, slots=True)
class Liar(Near):
    """The same, off by more than it promises."""

    name: ClassVar[str] = "liar"
    moved: ClassVar[int] = 300


def register(monkeypatch: pytest.MonkeyPatch) -> None:
    """Add both to the registry."""
    like = dataclasses.replace(
        registry.ENTRIES["jpeg2000"],
        module=__name__,
        dial="near",
        library="this test",
        needs="zlib",
        reversible_form=("jpegls-reversible", {}),
    )
    fakes = {kind.name: dataclasses.replace(like, kind=kind.__name__) for kind in (Near, Liar)}
    monkeypatch.setattr(registry, "ENTRIES", MappingProxyType({**registry.ENTRIES, **fakes}))
