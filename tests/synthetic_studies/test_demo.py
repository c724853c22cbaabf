"""The study of a first run."""

from __future__ import annotations

from pathlib import Path

from pydicom import dcmread

from synthetic_studies import demo_study


def test_the_demo_has_a_ct_series_and_a_radiograph_of_one_patient(tmp_path: Path) -> None:
    truth = demo_study(tmp_path, slices=2)
    headers = [dcmread(path, stop_before_pixels=True) for path in truth.files]
    assert [header.Modality for header in headers] == ["CT", "CT", "CR"]
    assert {header.PatientID for header in headers} == {truth.patient_id}
    assert len({header.StudyInstanceUID for header in headers}) == 2
    assert len(truth.regions()) == 9
