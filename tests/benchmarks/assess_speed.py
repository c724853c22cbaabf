"""The main job against a plain script, the table of good times, and memory over the number of frames.

Usage: python tests/benchmarks/assess_speed.py [plain] [table] [memory]

Each part prints one table of docs/benchmarks.md. Times are of whole processes; medians of three.
"""

from __future__ import annotations

import os
import resource
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from functools import partial
from pathlib import Path

from synthetic_studies import big_multiframe, ct_body, radiograph

HERE = Path(__file__).parent
RUNS = 3
WINDOWS = """
[[windows]]
label = "soft tissue"
centre = 40
width = 400
unit = "HU"

[[windows]]
label = "lung"
centre = -600
width = 1500
unit = "HU"
"""
PLAN = """version = 1
[change]
title = "benchmark"
declared_by = "engineer"
declared_on = 2026-01-01
compressed_copy = "none"
compressed_when = "never"
[sample]
drawn = "chosen"
"""


def say(text: str) -> None:
    """Print at once."""
    print(text, flush=True)  # noqa: T201


def timed(call: Callable[[], object]) -> float:
    """Median wall time of a call in seconds."""
    times = []
    for _ in range(RUNS):
        since = time.perf_counter()
        call()
        times.append(time.perf_counter() - since)
    return statistics.median(times)


def begin(*words: str | Path, out: Path | None = None) -> subprocess.Popen[bytes]:
    """Start the command, with a new dossier where it writes one."""
    if out is not None:
        subprocess.run(["rm", "-rf", str(out)], check=True)
        words = (*words, "--out", out)
    command = [sys.executable, "-m", "safecheck", *map(str, words), "--quiet"]
    return subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE)


def safecheck(*words: str | Path, out: Path | None = None) -> float:
    """Run the command and give its largest resident memory in MB."""
    process = begin(*words, out=out)
    _, status, usage = os.wait4(process.pid, 0)
    if status:
        raise SystemExit(f"{process.args!r} ended with {os.waitstatus_to_exitcode(status)}")
    return usage.ru_maxrss / 1024


def plan_file(folder: Path, codecs: tuple[str, ...], ratios: tuple[int, ...]) -> Path:
    """A plan with two windows and no limits."""
    path = folder / f"plan-{'-'.join(codecs)}.toml"
    candidates = "".join(
        f'[[candidates]]\ncodec = "{codec}"\nratio = {ratio}\n' for codec in codecs for ratio in ratios
    )
    path.write_text(PLAN + candidates + WINDOWS, encoding="utf-8")
    return path


def against_plain(folder: Path) -> None:
    """Main job with jpeg2000 on two cores against the plain script on one."""
    study = folder / "ct"
    ct_body(study, seed=3, slices=60)
    ratios = (5, 8, 10, 15, 20)
    plan = plan_file(folder, ("jpeg2000",), ratios)
    key = folder / "site.key"
    script = [sys.executable, str(HERE / "plain_script.py"), str(study), *map(str, ratios)]
    environment = {**os.environ, "OMP_NUM_THREADS": "1"}
    safecheck("assess", study, "--plan", plan, "--key", key, out=folder / "dossier")
    plain, ours = [], []
    for _ in range(RUNS):
        since = time.perf_counter()
        subprocess.run(script, check=True, stdout=subprocess.DEVNULL, env=environment)
        plain.append(time.perf_counter() - since)
        since = time.perf_counter()
        safecheck("assess", study, "--plan", plan, "--key", key, out=folder / "dossier")
        ours.append(time.perf_counter() - since)
    pairs = [one / other for one, other in zip(ours, plain, strict=True)]
    say("| 60 CT frames, jpeg2000 at 5 ratios, 2 windows | wall s, median |")
    say("| --- | --- |")
    say(f"| plain script, one process, no controls | {statistics.median(plain):.2f} |")
    say(f"| `assess`, two workers, all controls and the record | {statistics.median(ours):.2f} |")
    say(f"| ratio, pair by pair | {statistics.median(pairs):.3f} |")


def good_times(folder: Path) -> None:
    """The jobs of the table of good times that a command line can run."""
    key = folder / "site.key"
    series, film = folder / "ct300", folder / "cr"
    ct_body(series, seed=4, slices=300)
    radiograph(film, seed=4, rows=2500, columns=2000)
    safecheck("assess", film, "--codecs", "tiled", "--ratios", "10", "--key", key, out=folder / "warm")
    say("| job | wall s, median | largest process, MB |")
    say("| --- | --- | --- |")
    helps = [sys.executable, "-m", "safecheck", "--help"]
    took = timed(lambda: subprocess.run(helps, check=True, stdout=subprocess.DEVNULL))
    say(f"| `--help` | {took:.2f} | |")
    for name, words, out in (
        (
            "CT, 300 frames, 5 ratios, tiled",
            ("assess", series, "--codecs", "tiled", "--key", key),
            folder / "ct-dossier",
        ),
        ("CR 2500x2000, 5 ratios, tiled", ("assess", film, "--codecs", "tiled", "--key", key), folder / "cr-dossier"),
        ("CR 2500x2000, 5 ratios, jpeg2000", ("assess", film, "--codecs", "jpeg2000", "--key", key), folder / "cr-j2k"),
    ):
        memory: list[float] = []
        took = timed(partial(_remember, memory, words, out))
        say(f"| {name} | {took:.2f} | {max(memory):.0f} |")
    took = timed(lambda: safecheck_verify(folder / "ct-dossier"))
    say(f"| verify without images, 300 frames | {took:.2f} | |")


def _remember(memory: list[float], words: tuple[str | Path, ...], out: Path) -> None:
    """Run the command and note its largest process."""
    memory.append(safecheck(*words, out=out))


def safecheck_verify(dossier: Path) -> None:
    """Verify a dossier."""
    subprocess.run([sys.executable, "-m", "safecheck", "verify", str(dossier)], check=True, stdout=subprocess.DEVNULL)


def memory_over_frames(folder: Path) -> None:
    """Largest resident memory of any process of a run over 200 and over 2,000 frames."""
    key = folder / "site.key"
    say("| frames of 256x256 in one file | largest process, MB |")
    say("| --- | --- |")
    found = []
    for frames in (200, 2000):
        path = folder / f"big{frames}.dcm"
        big_multiframe(path, frames, 256, 256)
        words = ("assess", path, "--codecs", "tiled", "--ratios", "10", "--key", key)
        found.append(safecheck(*words, out=folder / "big"))
        children = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
        say(f"| {frames} | {max(found[-1], 0):.0f} (all children so far {children:.0f}) |")
    say(f"| 2,000 over 200 | {found[1] / found[0]:.3f} |")


PARTS = {"plain": against_plain, "table": good_times, "memory": memory_over_frames}


def main() -> None:
    """Run the parts asked for, or all."""
    for name in sys.argv[1:] or PARTS:
        with tempfile.TemporaryDirectory() as folder:
            PARTS[name](Path(folder))
        say("")


if __name__ == "__main__":
    main()
