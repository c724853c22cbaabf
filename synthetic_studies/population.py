"""Many small studies of many patients, whose properties are drawn, for statistics over patients."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from synthetic_studies.ct import Kernel, ct_body
from synthetic_studies.identity import Patient, Scope
from synthetic_studies.mr import mr_head
from synthetic_studies.radiograph import radiograph
from synthetic_studies.truth import Grid, Truth

__all__ = ["archive"]

_KERNELS: tuple[Kernel, ...] = ("SOFT", "STANDARD", "SHARP")
_THICKNESSES_MM = (1.0, 3.0, 5.0)


def archive(
    folder: Path,
    *,
    seed: int,
    patients: int = 20,
    most_studies: int = 2,
    rows: int = 96,
    columns: int = 96,
    slices: int = 2,
    modalities: tuple[str, ...] = ("CT",),
) -> Truth:
    """Write one folder for each patient, with one to `most_studies` small studies in it.

    Parameters
    ----------
    folder
        Made when missing.
    seed
        Equal seeds and options give equal bytes.
    patients
        Numbered from 1.
    most_studies
        How many studies a patient has is drawn evenly from 1 to this.
    rows, columns, slices
        Of each series; a radiograph has one file.
    modalities
        Any of CT, MR and CR; drawn evenly for each study.

    Returns
    -------
    Truth
        `parts` holds a truth for each study. Its `properties` holds what was drawn: 'patient', 'age_years', 'sex',
        'modality', 'noise_sd', and for CT 'kernel' and 'thickness_mm'.
    """
    rng = np.random.default_rng([seed, 71])
    parts = []
    for number in range(1, patients + 1):
        patient = Patient(number, int(rng.integers(1, 95)), str(rng.choice(["F", "M", "O"])))
        for study in range(int(rng.integers(1, most_studies + 1))):
            place = folder / f"patient_{number:04d}" / f"study_{study + 1}"
            modality = str(rng.choice(list(modalities)))
            parts.append(_write_study(place, patient, modality, (rows, columns, slices), rng))
    scope = Scope("archive", seed, (patients,))
    return Truth(
        kind="archive",
        seed=seed,
        files=tuple(path for part in parts for path in part.files),
        patient_id="",
        study_uid=scope.uid("study"),
        series_uid=scope.uid("series"),
        instance_uids=tuple(uid for part in parts for uid in part.instance_uids),
        grid=Grid(rows, columns, 1.0),
        unit="",
        parts=tuple(parts),
    )


def _write_study(
    place: Path, patient: Patient, modality: str, sizes: tuple[int, int, int], rng: np.random.Generator
) -> Truth:
    """Draw the properties of one study and write it."""
    rows, columns, slices = sizes
    seed = int(rng.integers(1, 2**31))
    noise_sd = round(float(np.exp(rng.uniform(np.log(4), np.log(45)))), 3)
    kernel = _KERNELS[int(rng.integers(len(_KERNELS)))]
    thickness_mm = float(rng.choice(_THICKNESSES_MM))
    if modality == "CT":
        made = ct_body(
            place,
            seed=seed,
            rows=rows,
            columns=columns,
            slices=slices,
            noise_sd_hu=noise_sd,
            kernel=kernel,
            thickness_mm=thickness_mm,
            patient=patient,
        )
    elif modality == "MR":
        made = mr_head(place, seed=seed, rows=rows, columns=columns, slices=slices, noise_sd=noise_sd, patient=patient)
    elif modality == "CR":
        made = radiograph(place, seed=seed, rows=rows, columns=columns, noise_sd=noise_sd, patient=patient)
    else:
        raise ValueError(f"modality {modality!r}, expected CT, MR or CR")
    drawn = {"patient": patient.number, "age_years": patient.age_years, "sex": patient.sex}
    made.properties.update(drawn, modality=modality, noise_sd=noise_sd)
    return made
