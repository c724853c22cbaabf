"""A frame's candidates may be written by several threads at once, and the selftest runs beside a run."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from safecheck.codecs import registry

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


_EVERY_CODEC = """
import sys
import threading
import numpy as np
from safecheck.codecs import registry
from safecheck.frames import PixelFormat, Raster

samples = np.random.default_rng(1).integers(0, 4096, (96, 96)).astype(np.uint16)
raster = Raster(samples, PixelFormat(16, 12, False, "MONOCHROME2"))
codec = registry.codec(sys.argv[1])
code = codec.encode(raster)
back = codec.decode(code, raster.format, raster.shape)
same = []

sys.setswitchinterval(1e-6)

def both():
    for _ in range(20):
        again = codec.encode(raster)
        same.append(again == code and np.array_equal(codec.decode(again, raster.format, raster.shape), back))

threads = [threading.Thread(target=both) for _ in range(4)]
for thread in threads:
    thread.start()
for thread in threads:
    thread.join()
sys.exit(0 if len(same) == 80 and all(same) else 1)
"""


@pytest.mark.parametrize("name", [name for name in registry.names() if name != "tiled"])
def test_two_threads_write_and_read_the_same_as_one(name: str) -> None:
    project = Path(__file__).parents[2]
    command = [sys.executable, "-c", _EVERY_CODEC, name]
    ended = subprocess.run(command, cwd=project, check=False, capture_output=True)
    assert ended.returncode == 0, ended.stderr
