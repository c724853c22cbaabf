"""From a DICOM file to the first candidate's figures, in a process whose kernels are loaded.

Run as ``python -m tests.benchmarks.first_figure``; the table goes to standard output. Every round opens a file and
meets its frame for the first time; the codecs take turns. Wall times; only the file's bytes may be in the system's
cache. Not a test: timings are no law.
"""

from __future__ import annotations

import statistics
import tempfile
import time
from itertools import pairwise
from pathlib import Path

from pydicom.data import get_testdata_file

from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.reader import open_instance
from safecheck.evaluation import Assignment, Candidate, load_kernels
from safecheck.evaluation.original import prepare
from safecheck.evaluation.rows import measure_row, window_rows
from safecheck.evaluation.treatment import recompress
from safecheck.frames import SizeBasis
from synthetic_studies import ct_body
from tests.benchmarks.assess_speed import say

ROUNDS = 9
CANDIDATES = tuple(Candidate(f"{codec} 10", codec, 10.0, SizeBasis.BITS_STORED) for codec in ("tiled", "jpeg2000"))
STEPS = ("found and read", "prepared", "recompressed", "measured")
PSEUDONYMS = Pseudonyms(bytes(32))


def steps_ms(path: Path, candidate: Candidate) -> list[float]:
    """Milliseconds of each step from a file to the figures of its first frame."""
    marks = [time.perf_counter()]
    (instance,) = gather([path], pseudonyms=PSEUDONYMS).instances
    with open_instance(instance) as reader:
        frame = reader.frame(1)
    marks.append(time.perf_counter())
    original = prepare(frame, Assignment((candidate,)))
    marks.append(time.perf_counter())
    treated = recompress(original, candidate)[0]
    marks.append(time.perf_counter())
    measure_row(original, treated)
    window_rows(original, treated)
    marks.append(time.perf_counter())
    return [1e3 * (end - start) for start, end in pairwise(marks)]


def row(name: str, candidate: Candidate, rounds: list[list[float]]) -> str:
    """Medians over the rounds, and the slowest round."""
    totals = [sum(steps) for steps in rounds]
    medians = [statistics.median(step) for step in zip(*rounds, strict=True)]
    figures = " | ".join(f"{value:.0f}" for value in (statistics.median(totals), max(totals), *medians))
    return f"| {name} | {candidate.codec} | {figures} |"


def compare(name: str, paths: list[Path]) -> None:
    """Print the rows of one kind of file; each codec and round takes the next file, from the first again at the end."""
    rounds: dict[str, list[list[float]]] = {candidate.codec: [] for candidate in CANDIDATES}
    for number in range(ROUNDS):
        for place, candidate in enumerate(CANDIDATES):
            path = paths[(number * len(CANDIDATES) + place) % len(paths)]
            rounds[candidate.codec].append(steps_ms(path, candidate))
    for candidate in CANDIDATES:
        say(row(name, candidate, rounds[candidate.codec]))


def main() -> None:
    """Print the table."""
    head = get_testdata_file("693_UNCR.dcm", download=False)
    if not isinstance(head, str):
        raise SystemExit("pydicom-data is not installed")
    with tempfile.TemporaryDirectory() as folder:
        files = len(CANDIDATES) * (ROUNDS + 1)
        first, second, *slices = ct_body(Path(folder), seed=6, slices=files).files
        load_kernels()
        say(f"| 512x512, 10:1 | codec | total ms, median of {ROUNDS} | slowest | {' | '.join(STEPS)} |")
        say("| --- " * (4 + len(STEPS)) + "|")
        for path, candidate in zip((first, second), CANDIDATES, strict=True):
            say(row("the first of the process", candidate, [steps_ms(path, candidate)]))
        compare("CT body, synthetic", slices)
        compare("CT head of pydicom-data", [Path(head)])


if __name__ == "__main__":
    main()
