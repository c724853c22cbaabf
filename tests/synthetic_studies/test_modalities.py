"""Radiograph, MR and ultrasound hold what they claim."""

from __future__ import annotations

import tracemalloc
from pathlib import Path

import numpy as np
import pytest
from pydicom import dcmread

from synthetic_studies import archive, big_multiframe, mr_head, radiograph, us_cine
from synthetic_studies.identity import Patient
from synthetic_studies.lettering import draw_text


def test_monochrome1_is_the_same_picture_turned_upside_down_in_value(tmp_path: Path) -> None:
    dark = dcmread(radiograph(tmp_path / "1", seed=2, rows=160, columns=128, photometric="MONOCHROME1").files[0])
    bright = dcmread(radiograph(tmp_path / "2", seed=2, rows=160, columns=128).files[0])
    assert dark.PhotometricInterpretation == "MONOCHROME1"
    np.testing.assert_array_equal(dark.pixel_array, 4095 - bright.pixel_array)
    assert int(bright.pixel_array.max()) < 4096


def test_mr_background_is_rayleigh_distributed(tmp_path: Path) -> None:
    truth = mr_head(tmp_path, seed=2, slices=4, noise_sd=60.0)
    slope = truth.properties["slope"]
    corners = np.stack([dcmread(path).pixel_array[:40, :40] for path in truth.files]) * slope
    # Magnitude of two Gaussian channels: mean sd * sqrt(pi / 2), SD sd * sqrt(2 - pi / 2) (computed).
    assert corners.mean() == pytest.approx(60 * np.sqrt(np.pi / 2), rel=0.02)
    assert corners.std() == pytest.approx(60 * np.sqrt(2 - np.pi / 2), rel=0.03)


def test_mr_declares_the_slope_of_its_truth(tmp_path: Path) -> None:
    truth = mr_head(tmp_path, seed=2, rows=64, columns=64, slices=1)
    header = dcmread(truth.files[0])
    assert float(header.RescaleSlope) == truth.properties["slope"]
    assert header.BitsStored == 12
    assert int(header.pixel_array.max()) < 4096


def test_ultrasound_text_stands_in_the_pixels_of_every_frame(tmp_path: Path) -> None:
    truth = us_cine(tmp_path, seed=0, frames=3)
    header = dcmread(truth.files[0])
    assert header.BurnedInAnnotation == "YES"
    text = draw_text("SYNTHETIC BODY ONE", 2)
    for frame in header.pixel_array:
        corner = frame[4 : 4 + text.shape[0], 8 : 8 + text.shape[1]]
        assert np.all(corner[text] == 235)
        assert corner[~text].mean() < 60


def test_ultrasound_has_a_dark_outside_colour_and_motion(tmp_path: Path) -> None:
    frames = dcmread(us_cine(tmp_path, seed=1, frames=3).files[0]).pixel_array.astype(int)
    assert frames[:, -20:, :20].max() == 0
    assert np.count_nonzero(np.ptp(frames[0], axis=2) > 60) > 1000
    assert np.count_nonzero(frames[0] != frames[1]) > 100_000


def test_an_archive_has_the_asked_patients_and_says_what_was_drawn(tmp_path: Path) -> None:
    truth = archive(tmp_path, seed=4, patients=6, rows=64, columns=64, modalities=("CT", "MR", "CR"))
    assert {part.properties["patient"] for part in truth.parts} == set(range(1, 7))
    for part in truth.parts:
        header = dcmread(part.files[0], stop_before_pixels=True)
        assert header.PatientID == part.patient_id == f"SYN-{part.properties['patient']:06d}"
        assert header.Modality == part.properties["modality"]
        assert header.PatientAge == f"{part.properties['age_years']:03d}Y"
        assert 4 <= part.noise_sd <= 45
    assert len({part.study_uid for part in truth.parts}) == len(truth.parts)


def test_an_archive_refuses_a_modality_it_cannot_make(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="expected CT, MR or CR"):
        archive(tmp_path, seed=4, patients=1, modalities=("PT",))


@pytest.mark.parametrize(
    ("number", "name"),
    [(1, "One"), (19, "Nineteen"), (20, "Twenty"), (42, "Forty-Two"), (120, "120")],
    ids=str,
)
def test_patients_are_named_by_their_number(number: int, name: str) -> None:
    assert Patient(number).name == f"Synthetic^Body {name}"


def test_text_with_an_unknown_letter_is_refused() -> None:
    with pytest.raises(ValueError, match="expected capitals"):
        draw_text("é")


def test_a_long_run_is_written_in_memory_that_does_not_grow_with_it(tmp_path: Path) -> None:
    peaks = []
    for frames in (5, 100):
        tracemalloc.start()
        big_multiframe(tmp_path / f"{frames}.dcm", frames, 128, 128)
        peaks.append(tracemalloc.get_traced_memory()[1])
        tracemalloc.stop()
    assert peaks[1] < 1.1 * peaks[0]
    frames_read = dcmread(tmp_path / "100.dcm").pixel_array
    assert len({frame.tobytes() for frame in frames_read}) == 100
