"""Resident memory of every process while `assess` is at one large multi-frame file.

Run as ``python -m tests.benchmarks.big_file_memory [frames [workers]]`` on Linux; the table goes to standard output.
Without numbers: 768 frames of 1024x1024, 1.5 GiB uncompressed, and a worker per core. The system's own high-water marks
are read (VmHWM of proc_pid_status(5)), so no peak falls between two looks; the sum counts what processes share twice.
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
FRAMES = 768
LOOK_EVERY_S = 0.1
MB = 1024
"""In the kB of /proc."""


def resident_mb(pid: int) -> tuple[float, float] | None:
    """(high-water mark, now) of a process; None when it is gone."""
    try:
        lines = Path(f"/proc/{pid}/status").read_text(encoding="utf-8").splitlines()
    except (FileNotFoundError, ProcessLookupError):
        return None
    found = {name: value for name, _, value in (line.partition(":") for line in lines)}
    if "VmHWM" not in found:  # it has ended and waits to be collected
        return None
    return int(found["VmHWM"].split()[0]) / MB, int(found["VmRSS"].split()[0]) / MB


def tree(pid: int) -> list[int]:
    """A process and all below it."""
    try:
        return [pid, *(child.pid for child in psutil.Process(pid).children(recursive=True))]
    except psutil.NoSuchProcess:
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
            found = {pid: seen for pid in tree(process.pid) if (seen := resident_mb(pid))}
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
    say(f"| all together at one moment | {together:.0f} |")
    say(f"| wall time, s | {took_s:.0f} |")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:3]))
