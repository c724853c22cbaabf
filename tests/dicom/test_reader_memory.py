"""Frames are read one at a time: memory does not grow with the file."""

from __future__ import annotations

import os
import struct
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import imagecodecs
import numpy as np
import pytest

from safecheck.dicom.instance import Instance
from tests.dicom.factory import EXPLICIT, J, header_for, noise, write_instance

MEGABYTE = 1 << 20
ROWS = COLUMNS = 512
FRAME_BYTES = ROWS * COLUMNS * 2
FRAMES = 3000
"""Over 1.5 GB of frames, in a file whose holes take no room on the disk."""

PROBE = """
import sys
from collections.abc import Callable
from pathlib import Path
from safecheck.dicom.reader import open_instance
from tests.dicom.factory import instance_at
with open_instance(instance_at(Path(sys.argv[1]))) as reader:
    for number in (*range(1, reader.frames, 25), reader.frames):
        reader.frame(number)
status = Path("/proc/self/status").read_text()
print(next(line.split()[1] for line in status.splitlines() if line.startswith("VmHWM")))
"""


def peak_bytes(path: Path) -> int:
    """Peak resident memory of a process of its own that reads frames throughout the file."""
    root = Path(__file__).parents[2]
    done = subprocess.run(
        [sys.executable, "-c", PROBE, str(path)],
        capture_output=True,
        text=True,
        check=True,
        cwd=root,
        env={**os.environ, "PYTHONPATH": str(root)},
    )
    return int(done.stdout) * 1024


def native(folder: Path) -> Instance:
    header = header_for(np.zeros((ROWS, COLUMNS), dtype="u2"), BitsStored=12, NumberOfFrames=FRAMES)
    instance = write_instance(folder, header, b"", EXPLICIT)
    with instance.source.path.open("r+b") as file:
        file.seek(-4, os.SEEK_END)
        file.write(struct.pack("<I", FRAMES * FRAME_BYTES))
        file.truncate(file.tell() + FRAMES * FRAME_BYTES)
    return instance


def coded(folder: Path) -> Instance:
    samples = noise((ROWS, COLUMNS), 12)
    code = bytes(imagecodecs.jpegls_encode(samples))
    header = header_for(samples, BitsStored=12, NumberOfFrames=FRAMES)
    instance = write_instance(folder, header, [b"\x00\x00"], J + "80", offset_table=False)
    path = instance.source.path
    content = path.read_bytes()
    start = content.rindex(b"\xfe\xff\x00\xe0")
    with path.open("r+b") as file:
        for number in range(FRAMES):
            file.seek(start + number * (FRAME_BYTES + 8))
            file.write(b"\xfe\xff\x00\xe0" + struct.pack("<I", FRAME_BYTES))
            if number % 25 == 0 or number == FRAMES - 1:
                file.write(code)  # the rest of the fragment is padding, and a hole on the disk
        file.seek(start + FRAMES * (FRAME_BYTES + 8))
        file.write(b"\xfe\xff\xdd\xe0\x00\x00\x00\x00")
    return instance


@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="peak memory is read from /proc")
@pytest.mark.parametrize("make", [native, coded])
def test_a_multi_frame_file_of_over_a_gigabyte_stays_under_600_megabytes(
    tmp_path: Path, make: Callable[[Path], Instance]
) -> None:
    path = make(tmp_path).source.path
    assert path.stat().st_size > 1500 * MEGABYTE
    peak = peak_bytes(path)
    assert peak < 600 * MEGABYTE
    # What the libraries take by themselves is about 150 MB; the file must not show in the figure at all.
    assert peak < 300 * MEGABYTE
