"""A multi-frame file of any size, written frame by frame."""

from __future__ import annotations

import struct
from pathlib import Path
from typing import BinaryIO

import numpy as np
from pydicom import dcmwrite

from synthetic_studies.fields import low_passed
from synthetic_studies.headers import declare_grey, declare_window, file_meta, start_header
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.truth import Grid, Truth

__all__ = ["big_multiframe"]


def big_multiframe(path: Path, frames: int, rows: int, columns: int, *, seed: int = 1) -> Truth:
    """Write an X-ray angiography run, 12 bits in 16, uncompressed; memory does not grow with the frames.

    Raises
    ------
    ValueError
        When the pixels would not fit the 32-bit length of an uncompressed element.
    """
    size_bytes = frames * rows * columns * 2
    if size_bytes >= 2**32 - 1:
        raise ValueError(f"{size_bytes} bytes of pixels, expected under 4 GiB")
    grid = Grid(rows, columns, 200.0 / min(rows, columns))
    scope, patient = Scope("big_multiframe", seed, (frames, rows, columns)), Patient(1 + seed % 99)
    header = start_header("XA", scope, patient, 1)
    header.ImageType = ["ORIGINAL", "PRIMARY", "SINGLE PLANE"]
    header.KVP, header.RadiationSetting, header.PixelIntensityRelationship = "75", "GR", "LIN"
    header.NumberOfFrames, header.FrameTime = frames, "66.7"
    header.FrameIncrementPointer = 0x00181063
    header.PatientOrientation = ["L", "F"]
    header.BurnedInAnnotation, header.LossyImageCompression = "NO", "00"
    declare_grey(header, grid, stored=12)
    declare_window(header, 2048, 4096)
    header.file_meta = file_meta(header)
    path.parent.mkdir(parents=True, exist_ok=True)
    dcmwrite(path, header, enforce_file_format=True)
    with path.open("ab") as stream:
        stream.write(struct.pack("<HH2sHI", 0x7FE0, 0x0010, b"OW", 0, size_bytes))
        _write_frames(stream, frames, (rows, columns), seed)
    return Truth(
        kind="big_multiframe",
        seed=seed,
        files=(path,),
        patient_id=patient.identifier,
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=(str(header.SOPInstanceUID),),
        grid=grid,
        unit="stored value",
        frames=frames,
    )


def _write_frames(stream: BinaryIO, frames: int, shape: tuple[int, int], seed: int) -> None:
    """Write a scene at rest under noise that is shifted anew for each frame, so that no two are equal."""
    rng = np.random.default_rng([seed, 61])
    scene = 2000 + 500 * low_passed(rng, shape, 0.02)
    noise = 25 * low_passed(rng, shape, 0.4)
    for _ in range(frames):
        shift = (int(rng.integers(shape[0])), int(rng.integers(shape[1])))
        frame = np.clip(np.rint(scene + np.roll(noise, shift, (0, 1))), 0, 4095)
        stream.write(frame.astype("<u2").tobytes())
