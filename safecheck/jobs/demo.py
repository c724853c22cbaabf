"""A synthetic study, assessed: the first thing to run after an installation."""

from __future__ import annotations

import os
from pathlib import Path

from safecheck.errors import UsageError
from safecheck.regions.file import RegionEntry, RegionFile, file_text
from safecheck.regions.region import OnFrames, Part
from safecheck.regions.shapes import Ellipse
from safecheck.runner.manifest import WORK
from synthetic_studies import Disc, Truth, demo_study

__all__ = ["DOSSIER", "PLAN", "REGIONS", "STUDY", "write_demo"]

STUDY, PLAN, REGIONS, DOSSIER = "study", "plan.toml", "regions.json", "dossier"


def write_demo(folder: Path) -> Path:
    """Write a study, its regions and a plan into a new folder; one whose run was stopped is taken as it is.

    Returns
    -------
    pathlib.Path
        The plan.

    Raises
    ------
    UsageError
        If the folder holds anything already.
    """
    try:
        folder.mkdir(parents=True, exist_ok=True)
        occupied = any(folder.iterdir())
    except OSError as error:
        raise UsageError(f"the folder of --out cannot be used: {os.strerror(error.errno or 0)}") from None
    if (folder / DOSSIER / WORK).is_dir():
        return folder / PLAN
    if occupied:
        raise UsageError("the folder for the demonstration is not empty; name a new one with --out")
    truth = demo_study(folder / STUDY)
    (folder / REGIONS).write_text(file_text(_regions(truth)), encoding="utf-8")
    (folder / PLAN).write_text(_PLAN, encoding="utf-8")
    return folder / PLAN


def _regions(truth: Truth) -> RegionFile:
    """Regions of the study's known targets, their background and the uniform insert."""
    series = truth.parts[0]
    entries = [_region(series, disc, index) for index, disc in enumerate(series.targets, start=1)]
    entries += [_region(series, disc, 0) for disc in (series.background, series.uniform) if disc is not None]
    return RegionFile(version=1, regions=tuple(entries))


def _region(series: Truth, disc: Disc, number: int) -> RegionEntry:
    """A disc on every slice of the series; targets are named by their number, size and contrast."""
    is_target = disc.role == "target"
    diameter = 2 * disc.circle.radius
    label = (
        f"target {number}: {disc.contrast:+.0f} {series.unit}, {2 * disc.radius_mm:.0f} mm" if is_target else disc.label
    )
    return RegionEntry(
        name=f"target-{number}" if is_target else disc.role,
        label=label,
        role="target" if is_target else "uniform" if disc.role == "uniform" else "background",
        background="background" if is_target else "",
        parts=(
            Part(
                placement=OnFrames(rows=series.grid.rows, columns=series.grid.columns),
                shape=Ellipse(centre=(disc.circle.row, disc.circle.column), height=diameter, width=diameter),
            ),
        ),
    )


_PLAN = """\
# The plan of the demonstration: a synthetic study of an invented hospital. Limits are examples, not advice.
version = 1

[change]
title = "Archive copies of CT and radiographs after 90 days"
reference = "CHANGE-0000 (demonstration)"
declared_by = "medical physicist"
declared_on = 2026-01-15
compressed_copy = "archive copy"
compressed_when = "90 days after the report"

[sample]
drawn = "chosen"
source = "one synthetic study"

[[candidates]]
codec = "jpeg2000"
ratio = 5

[[candidates]]
codec = "jpeg2000"
ratio = 10

[[candidates]]
codec = "jpeg2000"
ratio = 20
status = "context"

[[candidates]]
codec = "tiled"
ratio = 5
status = "context"

[[candidates]]
codec = "tiled"
ratio = 10
status = "context"

[[candidates]]
codec = "tiled"
ratio = 20
status = "context"

[regions]
file = "regions.json"

[[limits]]
name = "RMSE in the body"
measure = "rmse_content"
unit = "HU"
at_most = 6
modality = "CT"
declared_by = "medical physicist"
declared_on = 2026-01-15

[[limits]]
name = "bias of any target"
measure = "region_bias"
unit = "HU"
at_most = 2
region_role = "target"
declared_by = "medical physicist"
declared_on = 2026-01-15

[[limits]]
name = "largest patch error"
measure = "worst_patch_rmse"
unit = "HU"
at_most = 15
modality = "CT"
declared_by = "medical physicist"
declared_on = 2026-01-15
"""
