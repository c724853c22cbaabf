"""Resident memory of every process while `assess` is at one large multi-frame file.

Run as ``python -m tests.benchmarks.big_file_memory [frames [workers]]`` on Linux; the table goes to standard output.
Without numbers: 716 frames of 1024x1024, 1.50 GB uncompressed, and a worker per core. The system's own high-water marks
are read (VmHWM of proc_pid_status(5)), so that only what falls after the last look is missed, and `largest process`
misses nothing; the sum is of looks alone, and takes what processes share once.
"""

from __future__ import annotations

import os
import sys
import tempfile
import time
from dataclasses import dataclass, field
from pathlib import Path

import psutil

from synthetic_studies import big_multiframe
from tests.benchmarks.assess_speed import begin, say

SIDE = 1024
FRAMES = 716
LOOK_EVERY_S = 0.5


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


@dataclass(slots=True)
class Watched:
    """What was seen of a process and of all below it."""

    status: int = 0
    """Exit code."""
    peaks_mb: dict[int, float] = field(default_factory=dict)
    """Process id -> highest resident memory, as of the last look at it."""
    together_mb: float = 0.0
    """Most that all held at one look, shared pages once."""
    largest_mb: float = 0.0
    """Highest resident memory of any of them, as the system tells at their end."""


def watch(pid: int) -> Watched:
    """Look at a process until it ends."""
    watched = Watched()
    while True:
        ended, status, usage = os.wait4(pid, os.WNOHANG)
        if ended:
            watched.status, watched.largest_mb = os.waitstatus_to_exitcode(status), usage.ru_maxrss / 2**10
            return watched
        found = {each.pid: seen for each in tree(pid) if (seen := look(each))}
        watched.peaks_mb.update({each: peak for each, (peak, _) in found.items()})
        watched.together_mb = max(watched.together_mb, sum(now for _, now in found.values()))
        time.sleep(LOOK_EVERY_S)


def main(frames: int = FRAMES, workers: int | None = None) -> None:
    """Print the table."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        path = folder / "run.dcm"
        big_multiframe(path, frames, SIDE, SIDE)
        size_bytes = path.stat().st_size
        words: list[str | Path] = ["assess", path, "--codecs", "tiled", "--ratios", "10", "--key", folder / "site.key"]
        since = time.perf_counter()
        process = begin(*words, *(["--workers", str(workers)] if workers else []), out=folder / "dossier")
        watched = watch(process.pid)
        took_s = time.perf_counter() - since
    if watched.status:
        told = process.stderr.read().decode() if process.stderr else ""
        raise SystemExit(f"assess ended with {watched.status}: {told}")
    parent = watched.peaks_mb.pop(process.pid)
    say(
        f"| {frames} frames of {SIDE}x{SIDE} in one file, {size_bytes / 1e9:.2f} GB | peak resident, MB of 2^20 bytes |"
    )
    say("| --- | --- |")
    say(f"| parent | {parent:.0f} |")
    for place, peak in enumerate(sorted(watched.peaks_mb.values(), reverse=True), 1):
        say(f"| worker {place} | {peak:.0f} |")
    say(f"| largest process, as told at the end | {watched.largest_mb:.0f} |")
    say(f"| all together at one moment, shared pages once | {watched.together_mb:.0f} |")
    say(f"| wall time, s | {took_s:.0f} |")


if __name__ == "__main__":
    main(*map(int, sys.argv[1:3]))
