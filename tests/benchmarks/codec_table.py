"""Every codec on real frames: sizes met, PSNR, gain over JPEG 2000 at the same size, speed; side by side in one run.

Run as ``python -m tests.benchmarks.codec_table [frame ...]``; the tables go to standard output in Markdown. Times are
of one encode at the asked size (search included, the frame met for the first time) and one decode, medians of three.

The CT has padding, which `tiled` keeps as a mask and other codecs take for an edge of the image. So that a gain tells
of the transform and not of the mask, all PSNR is over pixels that are not padding, and the JPEG 2000 of the gains is
given the frame with its padding filled by the nearest pixel of the image, at no cost for the mask. A code from which
every sample comes back is called exact and has no gain.
"""

from __future__ import annotations

import datetime
import os
import platform
import statistics
import sys
import time
from collections import defaultdict
from collections.abc import Callable, Iterator
from typing import Any, TypeVar

import numpy as np
import numpy.typing as npt
from scipy.ndimage import distance_transform_edt

from safecheck.codecs import registry
from safecheck.codecs.base import Encoded, RatedCodec
from safecheck.errors import CannotEncode
from safecheck.frames import Raster, SizeBasis
from tests.codecs.tile import real_frames

RATIOS = (5, 10, 20, 40)
ROUNDS = 3
REFERENCE = "jpeg2000"
Result = TypeVar("Result")


def say(text: str) -> None:
    """Print at once."""
    print(text, flush=True)  # noqa: T201


def frames() -> Iterator[tuple[str, Raster]]:
    """Yield the frames of the tables."""
    for name in ("ct", "mr-abdomen", "mr-shoulder", "cr-leg", "cr-chest"):
        yield name, real_frames.grey(name)
    yield "us-green", real_frames.ultrasound_green()
    yield "us-colour", real_frames.ultrasound()


def codecs() -> Iterator[tuple[str, RatedCodec]]:
    """Yield every codec that can be asked for a size."""
    for name in registry.rated_names():
        yield name, registry.rated(name)
    yield "tiled adaptive", registry.rated("tiled", size="adaptive")


def filled(raster: Raster) -> Raster:
    """The raster with padding replaced by the nearest pixel that is none."""
    if raster.padding is None:
        return raster
    nearest = distance_transform_edt(raster.padding, return_distances=False, return_indices=True)
    return Raster(np.ascontiguousarray(raster.samples[tuple(nearest)]), raster.format)


def psnr_db(before: Raster, after: npt.NDArray[Any]) -> float:
    """Peak 2^bits - 1, over pixels that are not padding and all channels."""
    inside = np.ones(before.shape, np.bool_) if before.padding is None else ~before.padding
    error = (after.astype(np.float64) - before.samples)[inside]
    return float(10 * np.log10((2.0**before.format.bits_stored - 1) ** 2 / np.mean(error**2)))


def timed(call: Callable[[], Result]) -> tuple[Result, float]:
    """Result and wall time in ms."""
    since = time.perf_counter()
    result = call()
    return result, 1e3 * (time.perf_counter() - since)


def measured(codec: RatedCodec, raster: Raster, target: float) -> tuple[Encoded, npt.NDArray[Any], float, float]:
    """Encoded, decoded, and median times of both in ms."""
    encode_ms, decode_ms = [], []
    for _ in range(ROUNDS):
        # The tiled codec keeps the analysis of the last raster it met.
        fresh = Raster(raster.samples, raster.format, raster.padding)
        encoded, took = timed(lambda one=fresh: codec.encode_to_size(one, target))  # type: ignore[misc]
        encode_ms.append(took)
        decoded, took = timed(lambda code=encoded.code: codec.decode(code, raster.format, raster.shape))  # type: ignore[misc]
        decode_ms.append(took)
    return encoded, decoded, statistics.median(encode_ms), statistics.median(decode_ms)


def table(name: str, raster: Raster, totals: dict[str, list[tuple[float, int, float]]]) -> None:
    """Print the table of one frame."""
    bits = raster.format.bits_stored
    say(f"\n### {name}: {raster.shape[0]} x {raster.shape[1]}, {bits} bits stored, {raster.format.photometric}\n")
    say("| codec | asked | size off by % | reached | encodes | encode ms | decode ms | PSNR dB | over JPEG 2000, dB |")
    say("| --- | --- | --- | --- | --- | --- | --- | --- | --- |")
    reference, whole = registry.rated(REFERENCE), filled(raster)
    for label, codec in codecs():
        for ratio in RATIOS:
            target = raster.size_bytes(SizeBasis.BITS_STORED) / ratio
            try:
                encoded, decoded, encode_ms, decode_ms = measured(codec, raster, target)
            except CannotEncode as error:
                say(f"| {label} | | | {error} | | | | | |")
                break
            beside = reference.encode_to_size(whole, len(encoded.code))
            theirs = reference.decode(beside.code, whole.format, whole.shape)
            off, figures = 100 * (len(encoded.code) / target - 1), "exact | "
            if not np.array_equal(decoded, raster.samples):
                own = psnr_db(raster, decoded)
                gain = own - psnr_db(raster, theirs)
                totals[label].append((off, encoded.encodes, gain))
                figures = f"{own:.2f} | {gain:+.2f}"
            say(
                f"| {label} | {ratio}:1 | {off:+.2f} | {encoded.reached} | {encoded.encodes} | {encode_ms:.1f} "
                f"| {decode_ms:.1f} | {figures} |"
            )


def main(wanted: list[str]) -> None:
    """Print machine and versions, the table of each frame, and one over all."""
    say(
        f"{datetime.datetime.now(datetime.UTC):%Y-%m-%d}, {os.cpu_count()} cores, {platform.system()} "
        f"{platform.machine()}, Python {platform.python_version()}, NumPy {np.__version__}"
    )
    for label, codec in codecs():
        say(f"- {label}: {codec.version}")
    totals: dict[str, list[tuple[float, int, float]]] = defaultdict(list)
    for name, raster in frames():
        if not wanted or name in wanted:
            table(name, raster, totals)
    say("\n| codec | codes | within 1 % | encodes, median | largest | gain over JPEG 2000 dB, mean | least |")
    say("| --- | --- | --- | --- | --- | --- | --- |")
    for label, rows in totals.items():
        off, encodes, gains = zip(*rows, strict=True)
        say(
            f"| {label} | {len(rows)} | {sum(abs(part) <= 1 for part in off)} | {statistics.median(encodes):g} "
            f"| {max(encodes)} | {statistics.fmean(gains):+.2f} | {min(gains):+.2f} |"
        )


if __name__ == "__main__":
    main(sys.argv[1:])
