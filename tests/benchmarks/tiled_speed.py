"""The tiled codec, fixed 8x8 and adaptive, against OpenJPEG, JPEG XL and JPEG: PSNR at equal sizes, and time.

Run as ``python -m tests.benchmarks.tiled_speed [rounds]``; tables go to standard output, all of one run.

PSNR counts pixels that are not padding, peak 2**bits - 1. The tiled codec and JPEG XL are asked for the size that
OpenJPEG achieved, fixed 8x8 and JPEG meet at JPEG's size. The CT's padding goes to `tiled` as a mask; the others are
given the frame with its padding filled by the median of the content's border, which is best for OpenJPEG of what was
tried (as it is, the border's median, the nearest content, -1024). Times are medians of processor time of one thread,
the codecs taking turns, of one encode at the asked size (rate search included) and one decode.
"""

from __future__ import annotations

import statistics
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from openjpeg.utils import decode, encode_array
from scipy import ndimage

from safecheck.codecs import registry
from safecheck.codecs.base import RatedCodec
from safecheck.codecs.reversible import best_reversible
from safecheck.codecs.tile.codec import Tiled
from safecheck.frames import Raster, Samples, SizeBasis
from tests.codecs.tile import real_frames

RATIOS = (5, 10, 20, 40)
FIVE = (5, 10, 20, 40, 80)
FIXED, ADAPTIVE = Tiled(), Tiled("adaptive")


@dataclass(frozen=True, slots=True)
class Bench:
    """A frame, and the same as other codecs are given it."""

    name: str
    raster: Raster
    filled: Raster

    def psnr_db(self, after: Samples) -> float:
        """Peak 2**bits - 1, over pixels that are not padding."""
        error = after.astype(np.float64) - self.raster.samples
        inside = error if self.raster.padding is None else error[~self.raster.padding]
        return float(10 * np.log10((2.0**self.raster.format.bits_stored - 1) ** 2 / np.mean(inside**2)))

    def stored_bytes(self, ratio: float) -> float:
        """Size at a ratio on the bits-stored basis."""
        return self.raster.size_bytes(SizeBasis.BITS_STORED) / ratio


def frames() -> Iterator[Bench]:
    """Yield the frames of the tables."""
    for name in ("ct", "mr-abdomen", "mr-shoulder", "cr-leg", "cr-chest"):
        raster = real_frames.grey(name)
        yield Bench(name, raster, _filled(raster))
    yield Bench("us-green", real_frames.ultrasound_green(), real_frames.ultrasound_green())


def _filled(raster: Raster) -> Raster:
    if raster.padding is None:
        return raster
    samples = raster.samples.copy()
    border = ~raster.padding & ndimage.binary_dilation(raster.padding, np.ones((3, 3)))
    samples[raster.padding] = np.median(raster.samples[border])
    return Raster(samples, raster.format)


def openjpeg_encode(raster: Raster, ratio: float) -> bytes:
    """Write with the library alone, told the bits stored."""
    return bytes(encode_array(raster.samples, bits_stored=raster.format.bits_stored, compression_ratios=[ratio]))


def at_size_db(codec: RatedCodec, bench: Bench, raster: Raster, size_bytes: float) -> tuple[float, int]:
    """PSNR and bytes of a codec asked for a size."""
    code = codec.encode_to_size(raster, size_bytes).code
    return bench.psnr_db(codec.decode(code, raster.format, raster.shape)), len(code)


def quality_table() -> list[str]:
    """PSNR at OpenJPEG's achieved size."""
    lines = ["frame, ratio, bytes, best reversible, OpenJPEG dB | gain dB: fixed 8x8, adaptive | JPEG XL dB, bytes"]
    gains: dict[str, list[float]] = {"fixed": [], "adaptive": []}
    jpegxl = registry.rated("jpegxl")
    for bench in frames():
        reversible = bench.stored_bytes(1) / best_reversible(bench.filled).size_bytes
        for ratio in RATIOS:
            theirs = openjpeg_encode(bench.filled, ratio)
            db = bench.psnr_db(decode(theirs))
            fixed, _ = at_size_db(FIXED, bench, bench.raster, len(theirs))
            chosen, _ = at_size_db(ADAPTIVE, bench, bench.raster, len(theirs))
            other, size = at_size_db(jpegxl, bench, bench.filled, len(theirs))
            gains["fixed"].append(fixed - db)
            gains["adaptive"].append(chosen - db)
            lines.append(
                f"{bench.name:12} {ratio:5} {len(theirs):7} {reversible:6.2f} {db:7.2f} | {fixed - db:+6.2f} "
                f"{chosen - db:+6.2f} | {other:6.2f} {size} ({chosen - other:+.2f})"
            )
    lines += [f"{name}: mean {np.mean(all_):+.2f} dB, least {np.min(all_):+.2f} dB" for name, all_ in gains.items()]
    return lines


def jpeg_table() -> list[str]:
    """PSNR of fixed 8x8 at the size that JPEG achieved, on the frames that it can take."""
    lines = ["frame        ratio asked  quality  bytes  JPEG dB  fixed 8x8 dB  gain"]
    jpeg = registry.rated("jpeg")
    for bench in frames():
        if jpeg.refuses(bench.raster.format, bench.raster.shape):
            continue
        for ratio in RATIOS:
            made = jpeg.encode_to_size(bench.raster, bench.stored_bytes(ratio))
            db = bench.psnr_db(jpeg.decode(made.code, bench.raster.format, bench.raster.shape))
            fixed, _ = at_size_db(FIXED, bench, bench.raster, len(made.code))
            lines.append(
                f"{bench.name:12} {ratio:5} {made.settings['quality']:8} {len(made.code):8} {db:8.2f} {fixed:8.2f} "
                f"{fixed - db:+6.2f}"
            )
    return lines


def seconds(work: Callable[[], object]) -> float:
    """Processor time of one call."""
    began = time.process_time()
    work()
    return time.process_time() - began


def fresh(raster: Raster) -> Raster:
    """The frame as if met for the first time: the codec keeps the analysis of the last one."""
    return Raster(raster.samples, raster.format, raster.padding)


def medians_ms(bench: Bench, ratio: float, rounds: int) -> npt.NDArray[np.float64]:
    """Encode and decode of fixed, adaptive and OpenJPEG: (3, 2)."""
    times: list[list[list[float]]] = [[[], []] for _ in range(3)]
    target = bench.stored_bytes(ratio)
    for _ in range(rounds):
        for k, codec in enumerate((FIXED, ADAPTIVE)):
            raster = fresh(bench.raster)
            times[k][0].append(seconds(lambda one=raster, by=codec: by.encode_to_size(one, target)))  # type: ignore[misc]
            code = codec.encode_to_size(raster, target).code
            times[k][1].append(seconds(lambda one=raster, c=code: FIXED.decode(c, one.format, one.shape)))  # type: ignore[misc]
        theirs = openjpeg_encode(bench.raster, ratio)
        times[2][0].append(seconds(lambda: openjpeg_encode(bench.raster, ratio)))
        times[2][1].append(seconds(lambda c=theirs: decode(c)))  # type: ignore[misc]
    return np.array([[statistics.median(part) * 1e3 for part in codec] for codec in times])


def speed_table(rounds: int) -> list[str]:
    """Times, and their shares of OpenJPEG's."""
    lines = ["frame, ratio | encode, decode ms: fixed; adaptive; OpenJPEG | shares of OpenJPEG's time | encodes"]
    for bench in frames():
        for ratio in RATIOS:
            found = medians_ms(bench, ratio, rounds if bench.raster.pixels < 300_000 else max(rounds // 3, 1))
            sums = found.sum(axis=1)
            target = bench.stored_bytes(ratio)
            tries = [codec.encode_to_size(bench.raster, target).encodes for codec in (FIXED, ADAPTIVE)]

            cells = "; ".join(f"{encode:6.1f} {back:6.1f}" for encode, back in found)
            lines.append(
                f"{bench.name:12} {ratio:5} | {cells} | {sums[0] / sums[2]:5.2f} {sums[1] / sums[2]:5.2f} | {tries}"
            )
    return lines


def five_ratios(rounds: int) -> str:
    """Encoding at five ratios against each of them alone."""
    bench = next(frames())
    together, alone = [], []
    targets = [bench.stored_bytes(ratio) for ratio in FIVE]
    for _ in range(rounds):
        one = fresh(bench.raster)
        together.append(seconds(lambda o=one: [ADAPTIVE.encode_to_size(o, target) for target in targets]))  # type: ignore[misc]
        each = [(fresh(bench.raster), target) for target in targets]
        alone.append([seconds(lambda o=o, t=t: ADAPTIVE.encode_to_size(o, t)) for o, t in each])  # type: ignore[misc]
    ms = np.median(alone, axis=0) * 1e3
    found = statistics.median(together) * 1e3
    return (
        f"adaptive, ct, encode at {FIVE}: {found:.1f} ms together, alone {np.round(ms, 1).tolist()} ms: "
        f"{found / ms[1]:.2f} times one at 10:1, {found / ms.mean():.2f} times the mean of one, {found / ms[0]:.2f} "
        "times one at 5:1"
    )


def main(rounds: int = 15) -> None:
    """Print the tables."""
    began = time.perf_counter()
    ADAPTIVE.encode_to_size(real_frames.grey("ct-small"), 3000)
    lines = [f"first adaptive encode in this process {time.perf_counter() - began:.2f} s", *quality_table()]
    lines += ["", *jpeg_table(), "", *speed_table(rounds), "", five_ratios(rounds)]
    sys.stdout.write("\n".join(lines) + "\n")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 15)
