"""A hospital of small studies, its plans, and the dossiers made of them."""

from __future__ import annotations

import csv
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from safecheck.jobs.assess import AssessRequest, assess
from safecheck.record.document import RecordDocument
from safecheck.regions.file import RegionEntry, RegionFile, file_text
from safecheck.regions.region import OnFrames, Part
from safecheck.regions.shapes import Ellipse
from safecheck.runner.executor import InProcess
from safecheck.runner.progress import Progress
from synthetic_studies import ct_body, mr_head, radiograph, us_cine
from tests.end_to_end.command import Ended

__all__ = ["CANDIDATES", "CHANGE", "CHOSEN", "PLAN", "Hospital", "Made", "assess_here", "build", "limit", "rows_of"]

CHANGE = """\
version = 1

[change]
title = "Archive copies after 90 days"
reference = "CHANGE-17"
declared_by = "medical physicist"
declared_on = 2026-01-15
compressed_copy = "archive copy"
compressed_when = "90 days after the report"

"""
CHOSEN = """\
[sample]
drawn = "chosen"

"""
CANDIDATES = """\
[[candidates]]
codec = "jpeg2000"
ratio = 5

[[candidates]]
codec = "tiled"
ratio = 10
status = "context"

"""


def limit(at_most: float, *, modality: str = "CT", unit: str = "HU") -> str:
    """A limit on the RMSE over content, as it stands in a plan."""
    return f"""\
[[limits]]
name = "RMSE in the body"
measure = "rmse_content"
unit = "{unit}"
at_most = {at_most}
modality = "{modality}"
declared_by = "medical physicist"
declared_on = 2026-01-15

"""


PLAN = f"{CHANGE}{CHOSEN}{CANDIDATES}[regions]\nfile = 'regions.json'\n\n{limit(1000)}"


@dataclass(frozen=True, slots=True)
class Hospital:
    """A folder of small studies, a plan for them, and a site key."""

    folder: Path
    studies: Path
    plan: Path
    key: Path

    @property
    def ct(self) -> Path:
        """The CT study alone: three frames."""
        return self.studies / "ct"

    def request(
        self, out: Path, *paths: Path, plan: Path | None = None, attachment: bool = True, with_images: bool = False
    ) -> AssessRequest:
        """A run over the studies, or over other paths."""
        return AssessRequest(
            paths or (self.studies,),
            out,
            plan_file=plan or self.plan,
            key_file=self.key,
            attachment=attachment,
            with_images=with_images,
        )


@dataclass(frozen=True, slots=True)
class Made:
    """A dossier and how the call that made it ended."""

    folder: Path
    ended: Ended


def build(folder: Path) -> Hospital:
    """Write CT, MR, radiograph and a colour cine, a region in the CT, and the plan that names it."""
    studies = folder / "studies"
    ct_body(studies / "ct", seed=1, rows=96, columns=96, slices=3)
    mr_head(studies / "mr", seed=2, rows=96, columns=96, slices=2)
    radiograph(studies / "cr", seed=3, rows=128, columns=96)
    us_cine(studies / "us", seed=4, rows=96, columns=128, frames=2)
    shape = Ellipse(centre=(48.0, 40.0), height=20.0, width=20.0)
    part = Part(placement=OnFrames(rows=96, columns=96), shape=shape)
    region = RegionEntry(name="circle", label="circle", role="target", background="", parts=(part,))
    (folder / "regions.json").write_text(file_text(RegionFile(version=1, regions=(region,))), encoding="utf-8")
    (folder / "plan.toml").write_text(PLAN, encoding="utf-8")
    return Hospital(folder, studies, folder / "plan.toml", folder / "site.key")


def assess_here(request: AssessRequest, report: Callable[[Progress], None] = lambda _: None) -> RecordDocument:
    """Run the main job in this process."""
    return assess(request, lambda _: None, report, executor=InProcess())


def rows_of(dossier: Path, table: str) -> list[dict[str, str]]:
    """Rows of a table, from its CSV."""
    with (dossier / f"{table}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))
