"""A frame's candidates may be written by several threads at once, and the selftest runs beside a run."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

_TWO_THREADS = """
import sys
import threading
import numpy as np
from safecheck.codecs.jpeg2000 import Jpeg2000
from safecheck.frames import PixelFormat, Raster

samples = np.random.default_rng(1).integers(0, 4096, (96, 96)).astype(np.uint16)
raster = Raster(samples, PixelFormat(16, 12, False, "MONOCHROME2"))

sys.setswitchinterval(1e-6)  # threads take turns as often as they can

def encode():
    for _ in range(100):
        Jpeg2000(40.0).encode(raster)

threads = [threading.Thread(target=encode) for _ in range(4)]
for thread in threads:
    thread.start()
for thread in threads:
    thread.join()
"""


def test_two_threads_that_write_jpeg_2000_do_not_crash_the_process() -> None:
    project = Path(__file__).parents[2]
    ended = subprocess.run([sys.executable, "-c", _TWO_THREADS], cwd=project, check=False, capture_output=True)
    assert ended.returncode == 0, ended.stderr
