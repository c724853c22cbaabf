"""The tiled codec against OpenJPEG: time and PSNR at the same ratios, one thread each, side by side in one run.

Run as ``python -m tests.benchmarks.tiled_speed [rounds]``; the table goes to standard output. Times are medians over
the rounds of one encode at the asked size (rate search included) plus one decode; the two codecs take turns.
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable, Iterator

import numpy as np
from openjpeg.utils import decode, encode_array

from safecheck.codecs import registry
from safecheck.frames import Raster, SizeBasis
from tests.codecs.tile import real_frames

RATIOS = (5, 10, 20, 40)


def frames() -> Iterator[tuple[str, Raster]]:
    """Yield the frames of the table."""
    for name in ("ct", "mr-abdomen", "mr-shoulder", "cr-leg", "cr-chest"):
        yield name, real_frames.grey(name)
    yield "us-green", real_frames.ultrasound_green()


def seconds(work: Callable[[], object]) -> float:
    """Wall time of one call."""
    began = time.perf_counter()
    work()
    return time.perf_counter() - began


def psnr_inside_db(before: Raster, after: np.ndarray) -> float:
    """Peak 2**bits - 1, over pixels that are not padding."""
    inside = np.ones(before.shape, np.bool_) if before.padding is None else ~before.padding
    error = (after.astype(np.float64) - before.samples)[inside]
    return float(10 * np.log10((2.0**before.format.bits_stored - 1) ** 2 / np.mean(error**2)))


def openjpeg_encode(raster: Raster, ratio: float) -> bytes:
    """Write with the library alone, told the bits stored."""
    return bytes(encode_array(raster.samples, bits_stored=raster.format.bits_stored, compression_ratios=[ratio]))


def row(name: str, raster: Raster, ratio: float, rounds: int) -> str:
    """Measure one frame at one ratio."""
    target = raster.size_bytes(SizeBasis.BITS_STORED) / ratio
    tiled = registry.rated("tiled")
    times: list[list[float]] = [[], [], [], []]
    for _ in range(rounds):
        ours, theirs = tiled.encode_to_size(raster, target), openjpeg_encode(raster, ratio)
        # A frame met for the first time: the codec keeps the analysis of the last one.
        fresh = Raster(raster.samples, raster.format, raster.padding)
        times[0].append(seconds(lambda one=fresh: tiled.encode_to_size(one, target)))  # type: ignore[misc]
        times[1].append(seconds(lambda code=ours.code: tiled.decode(code, raster.format, raster.shape)))  # type: ignore[misc]
        times[2].append(seconds(lambda: openjpeg_encode(raster, ratio)))
        times[3].append(seconds(lambda code=theirs: decode(code)))  # type: ignore[misc]
    median = [statistics.median(values) * 1e3 for values in times]
    after = [tiled.decode(ours.code, raster.format, raster.shape), decode(theirs)]
    return (
        f"{name:12} {ratio:4.0f} {100 * (len(ours.code) / target - 1):+7.2f} {ours.encodes:3} "
        f"{median[0]:8.1f} {median[1]:8.1f} {median[2]:8.1f} {median[3]:8.1f} "
        f"{(median[0] + median[1]) / (median[2] + median[3]):6.2f} "
        f"{real_frames.psnr_db(raster, after[0]):7.2f} {real_frames.psnr_db(raster, after[1]):7.2f} "
        f"{psnr_inside_db(raster, after[0]):7.2f} {psnr_inside_db(raster, after[1]):7.2f}"
    )


def main(rounds: int = 15) -> None:
    """Print the table."""
    first = real_frames.grey("ct-small")
    began = time.perf_counter()
    registry.rated("tiled").encode_to_size(first, 3000)
    lines = [f"first encode in this process {time.perf_counter() - began:.2f} s"]
    lines.append(
        "frame       ratio size % n   tiled ms   decode OpenJPEG   decode  share "
        "PSNR dB tiled, OpenJPEG; the same without padding"
    )
    for name, raster in frames():
        lines += [row(name, raster, ratio, rounds if raster.pixels < 300_000 else 5) for ratio in RATIOS]
    sys.stdout.write("\n".join(lines) + "\n")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 15)
