"""Resident memory of every process while `assess` is at one large multi-frame file.

Run as ``python -m tests.benchmarks.big_file_memory [frames [workers]]`` on Linux; the table goes to standard output.
Without numbers: 716 frames of 1024x1024, 1.50 GB uncompressed, and a worker per core. The system's own high-water marks
are read (VmHWM of proc_pid_status(5)), so no peak falls between two looks; the sum takes what processes share once.
"""

from __future__ import annotations

import sys
import tempfile
import time
from pathlib import Path

import psutil

from synthetic_studies import big_multiframe
from tests.benchmarks.assess_speed import begin, say

SIDE = 1024
FRAMES = 716
LOOK_EVERY_S = 0.2


def look(process: psutil.Process) -> tuple[float, float] | None:
    """Highest resident memory of a process so far, and its memory now with shared pages shared out; None if gone."""
    try:
        lines = Path(f"/proc/{process.pid}/status").read_text(encoding="utf-8").splitlines()
        proportional = process.memory_full_info().pss
    except (OSError, psutil.Error):
        return None
    marks = [int(line.split()[1]) for line in lines if line.startswith("VmHWM:")]
    return (marks[0] / 2**10, proportional / 2**20) if marks else None


def tree(pid: int) -> list[psutil.Process]:
    """A process and all below it; none when it is gone."""
    try:
        first = psutil.Process(pid)
        return [first, *first.children(recursive=True)]
    except psutil.Error:
        return []


def main(frames: int = FRAMES, workers: int | None = None) -> None:
    """Print the table."""
    peaks: dict[int, float] = {}
    together = 0.0
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        path = folder / "run.dcm"
        big_multiframe(path, frames, SIDE, SIDE)
        size_bytes = path.stat().st_size
        words: list[str | Path] = ["assess", path, "--codecs", "tiled", "--ratios", "10", "--key", folder / "site.key"]
        since = time.perf_counter()
        process = begin(*words, *(["--workers", str(workers)] if workers else []), out=folder / "dossier")
        while process.poll() is None:
            found = {each.pid: seen for each in tree(process.pid) if (seen := look(each))}
            peaks.update({pid: peak for pid, (peak, _) in found.items()})
            together = max(together, sum(now for _, now in found.values()))
            time.sleep(LOOK_EVERY_S)
        took_s = time.perf_counter() - since
    if process.returncode:
        raise SystemExit(f"assess ended with {process.returncode}")
    parent = peaks.pop(process.pid)
    say(
        f"| {frames} frames of {SIDE}x{SIDE} in one file, {size_bytes / 1e9:.2f} GB | peak resident, MB of 2^20 bytes |"
    )
    say("| --- | --- |")
    say(f"| parent | {parent:.0f} |")
    for place, peak in enumerate(sorted(peaks.values(), reverse=True), 1):
        say(f"| worker {place} | {peak:.0f} |")
    say(f"| all together at one moment, shared pages once | {together:.0f} |")
    say(f"| wall time, s | {took_s:.0f} |")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:3]))
