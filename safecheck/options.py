"""Arguments and options of the command line, declared once for every command that takes them."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated, TypeAlias

import typer

__all__ = [
    "Basis",
    "Captures",
    "Codecs",
    "Delivered",
    "DraftPlan",
    "DryRun",
    "ErrorImages",
    "Images",
    "Key",
    "Localizers",
    "LossySources",
    "MostFrames",
    "NoAttachment",
    "Paths",
    "PlanFile",
    "Quiet",
    "Ratios",
    "Regions",
    "StudyFolder",
    "Workers",
]

Paths: TypeAlias = Annotated[
    list[Path],
    typer.Argument(
        metavar="PATH...", help="Files, folders, zip archives, a DICOMDIR or a list file; mixed as you like."
    ),
]
Key: TypeAlias = Annotated[
    Path | None, typer.Option("--key", metavar="FILE", help="Site key file; by default in your configuration folder.")
]
Quiet: TypeAlias = Annotated[bool, typer.Option("--quiet", "-q", help="No progress on the screen.")]
Localizers: TypeAlias = Annotated[bool, typer.Option("--localizers", help="Take localizers too.")]
Captures: TypeAlias = Annotated[bool, typer.Option("--secondary-captures", help="Take secondary captures too.")]
LossySources: TypeAlias = Annotated[
    bool, typer.Option("--allow-lossy-source", help="Take sources already lossy, as second generation.")
]
Regions: TypeAlias = Annotated[
    Path | None, typer.Option("--regions", metavar="FILE", help="Region file, DICOM segmentation or RT Structure Set.")
]

DraftPlan: TypeAlias = Annotated[
    Path | None, typer.Option("--draft-plan", metavar="FILE", help="Write a plan to start from.")
]

PlanFile: TypeAlias = Annotated[
    Path | None, typer.Option("--plan", metavar="FILE", help="Plan declared before the run.")
]
Ratios: TypeAlias = Annotated[
    str, typer.Option("--ratios", metavar="LIST", help="Ratios on the bits-stored basis, without a plan.")
]
# Named here and not asked of the registry, since a help page loads no codec; a test holds the two equal.
Codecs: TypeAlias = Annotated[
    str,
    typer.Option(
        "--codecs",
        metavar="LIST",
        help="Codecs, without a plan: any of jpeg2000, jpeg, jpegls, htj2k, jpegxl, tiled; parted by commas.",
    ),
]
Delivered: TypeAlias = Annotated[
    list[Path] | None,
    typer.Option("--delivered", metavar="PATH", help="Copies that the archive returned; may be given again."),
]
DryRun: TypeAlias = Annotated[
    bool, typer.Option("--dry-run", help="Print counts, time, disk and the plan's hash; measure nothing.")
]
Images: TypeAlias = Annotated[
    bool, typer.Option("--with-images", help="Write crops of the worst places, but none that may show text.")
]
NoAttachment: TypeAlias = Annotated[
    bool, typer.Option("--no-attachment", help="Leave the record out of the PDF's attachments.")
]
Workers: TypeAlias = Annotated[
    int | None, typer.Option("--workers", min=1, metavar="NUMBER", help="Processes; by default one per core.")
]

StudyFolder: TypeAlias = Annotated[
    Path, typer.Option("--out", metavar="FOLDER", help="New folder for the pages and the table.")
]
MostFrames: TypeAlias = Annotated[
    int, typer.Option("--frames", min=1, metavar="NUMBER", help="At most so many frames, one of each series.")
]
ErrorImages: TypeAlias = Annotated[
    bool, typer.Option("--with-images", help="Show errors of a part of each frame, but of none that may show text.")
]
Basis: TypeAlias = Annotated[bool, typer.Option("--basis", help="Draw the basis functions too.")]
