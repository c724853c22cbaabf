"""Time the measures of one CT candidate against a plain script with scikit-image, side by side in one process.

Run ``python -m tests.benchmarks.measures_speed``. Both sides get the same two frames and the same two windows; the
rounds alternate, so that other load on the machine meets both. Not a test: timings are no law.
"""

from __future__ import annotations

import resource
import statistics
import sys
import time
from collections.abc import Callable

import numpy as np
import pydicom
from pydicom.data import get_testdata_file
from skimage.metrics import peak_signal_noise_ratio, structural_similarity

from safecheck.measures.baseline import Baseline, load_kernels, measure_frame, prepare_baseline
from safecheck.measures.content import find_content
from safecheck.measures.display import Rendering
from safecheck.measures.planes import Mask, Plane
from safecheck.measures.structural import measure_window

ROUNDS = 31
CANDIDATES = 5
WINDOWS = ((40.0, 80.0), (40.0, 400.0))
SPACING_MM = (0.478516, 0.478516)


def plain(before: Plane, after: Plane) -> tuple[float, ...]:
    """What a script would do: SSIM at two windows, PSNR, RMSE, largest error, over the frame."""
    figures = []
    for centre, width in WINDOWS:
        shown = [np.clip((x - (centre - 0.5)) / (width - 1) + 0.5, 0, 1) * 255 for x in (before, after)]
        figures.append(
            structural_similarity(*shown, gaussian_weights=True, sigma=1.5, use_sample_covariance=False, data_range=255)
        )
    error = after - before
    figures.append(peak_signal_noise_ratio(before, after, data_range=16383))
    figures.append(float(np.sqrt(np.mean(error**2))))
    figures.append(float(np.abs(error).max()))
    return tuple(figures)


def prepare(before: Plane, padding: Mask) -> Baseline:
    """What is done once a frame, the content rule included."""
    content = find_content(before, modality="CT", unit="HU", padding=padding)
    return prepare_baseline(
        before,
        content.mask,
        peak_bits=16383.0,
        stored_unit=1.0,
        padding=padding,
        spacing_mm=SPACING_MM,
        renderings=[Rendering("LINEAR", centre, width) for centre, width in WINDOWS],
    )


def measure(baseline: Baseline, after: Plane) -> None:
    """All measures of one candidate."""
    measure_frame(baseline, after)
    for window in baseline.windows:
        measure_window(window, after)


def real_head() -> tuple[Plane, Mask]:
    """A CT head of pydicom-data in HU, and its padding."""
    path = get_testdata_file("693_UNCR.dcm", download=False)
    if not isinstance(path, str):
        raise SystemExit("pydicom-data is not installed")
    samples = pydicom.dcmread(path).pixel_array
    return samples.astype(np.float64) - 1024, samples == -2000


def full_body() -> tuple[Plane, Mask]:
    """A frame that is content all over and clipped nowhere: the slowest case."""
    rng = np.random.default_rng(1)
    return np.round(rng.normal(40, 10, (512, 512))), np.zeros((512, 512), np.bool_)


def time_of(call: Callable[[], object]) -> float:
    """Milliseconds of processor time of one call: other load on the machine lengthens it least."""
    start = time.process_time()
    call()
    return (time.process_time() - start) * 1e3


def say(line: str) -> None:
    """Write one line of the result."""
    sys.stdout.write(line + "\n")


def compare(name: str, before: Plane, padding: Mask) -> None:
    """Print medians and ratios for one frame."""
    after = before + np.round(np.random.default_rng(0).normal(0, 5, before.shape))
    baseline = prepare(before, padding)
    measure(baseline, after)
    times: dict[str, list[float]] = {"plain": [], "measure": [], "prepare": []}
    for _ in range(ROUNDS):
        times["plain"].append(time_of(lambda: plain(before, after)))
        times["prepare"].append(time_of(lambda: prepare(before, padding)))
        times["measure"].append(time_of(lambda: measure(baseline, after)))
    script, prepared, measured = (statistics.median(times[key]) for key in ("plain", "prepare", "measure"))
    say(f"{name}: {before.shape[0]}x{before.shape[1]}, content {100 * baseline.content.mean():.0f} %")
    say(f"  plain script            {script:8.2f} ms a candidate")
    say(f"  measures                {measured:8.2f} ms a candidate  ({script / measured:.1f} times faster)")
    say(f"  prepared once a frame   {prepared:8.2f} ms")
    share = measured + prepared / CANDIDATES
    say(f"  with {CANDIDATES} candidates       {share:8.2f} ms a candidate  ({script / share:.1f} times faster)")


def large_frame() -> None:
    """Print time and peak memory of a radiograph of 2000x2500."""
    rng = np.random.default_rng(2)
    before = np.round(rng.normal(2000, 300, (2000, 2500)))
    start = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    windows = [Rendering("LINEAR", 2000, 1500), Rendering("LINEAR", 2000, 4000)]
    content = np.ones(before.shape, np.bool_)
    prepared = time.process_time()
    baseline = prepare_baseline(
        before, content, peak_bits=4095.0, stored_unit=1.0, spacing_mm=(0.15, 0.15), renderings=windows
    )
    prepared = (time.process_time() - prepared) * 1e3
    after = before + 1
    measured = time_of(lambda: measure(baseline, after))
    unit = 1024 * (1024 if sys.platform == "darwin" else 1)
    grown = (resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - start) / unit
    say(f"2000x2500, two windows: prepared {prepared:.0f} ms, a candidate {measured:.0f} ms, memory +{grown:.0f} MB")


def main() -> None:
    """Run all."""
    load_kernels()
    large_frame()
    compare("CT head", *real_head())
    compare("content all over", *full_body())


if __name__ == "__main__":
    main()
