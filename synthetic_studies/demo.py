"""The study that a first run shows: a CT series with its targets, and a radiograph of the same patient."""

from __future__ import annotations

from pathlib import Path

from synthetic_studies.ct import ct_body
from synthetic_studies.identity import Patient
from synthetic_studies.radiograph import radiograph
from synthetic_studies.truth import Truth

__all__ = ["demo_study"]


def demo_study(folder: Path, *, seed: int = 1, slices: int = 8) -> Truth:
    """Write a CT series of `slices` slices of 512x512 into `folder/ct` and a radiograph into `folder/cr`.

    Returns
    -------
    Truth
        Of the CT series, whose regions are worth drawing; `parts` holds it and the radiograph's.
    """
    patient = Patient(1, 58)
    series = ct_body(folder / "ct", seed=seed, slices=slices, patient=patient)
    film = radiograph(folder / "cr", seed=seed, patient=patient)
    return Truth(
        kind="demo_study",
        seed=seed,
        files=series.files + film.files,
        patient_id=series.patient_id,
        study_uid=series.study_uid,
        series_uid=series.series_uid,
        instance_uids=series.instance_uids + film.instance_uids,
        grid=series.grid,
        unit=series.unit,
        slice_positions_mm=series.slice_positions_mm,
        noise_sd=series.noise_sd,
        padding_value=series.padding_value,
        field_circle=series.field_circle,
        targets=series.targets,
        background=series.background,
        uniform=series.uniform,
        edge=series.edge,
        parts=(series, film),
    )
