"""The transform study: the middle frame of each series through cosine, Walsh-Hadamard and Fourier."""

from __future__ import annotations

import hashlib
import os
from collections import Counter
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Literal

from safecheck.codecs.tile.codec import Tiled
from safecheck.dicom.instance import Instance
from safecheck.dicom.reader import open_instance
from safecheck.errors import InputExcluded, InputRefused, UsageError
from safecheck.jobs.assess import Tell
from safecheck.jobs.inputs import Inputs, gather_inputs
from safecheck.jobs.regions import load_regions
from safecheck.jobs.site import open_site
from safecheck.jobs.versions import versions
from safecheck.policy.plan import Scope
from safecheck.record.transforms import LeftAside, StudiedFrame, StudyBasis, TransformStudy, table_bytes
from safecheck.regions.region import RegionSet
from safecheck.report.transform_study import cautions_text, draw_study
from safecheck.runner.pool import cores
from safecheck.runner.references import references_of
from safecheck.study import study_frame
from safecheck.study.tiles import TRANSFORMS, basis
from safecheck.wording import sentence_of

__all__ = [
    "CAUTIONS_FILE",
    "PAGES_FILE",
    "TABLE_FILE",
    "TransformRequest",
    "lines_of",
    "study_transforms",
]

PAGES_FILE, TABLE_FILE, CAUTIONS_FILE = "transforms.pdf", "transforms.csv", "cautions.txt"
MOST_THREADS = 4
"""Each holds a few planes of real numbers."""
DRAWN_SIZES = (4, 8)
"""Tile sizes of which basis functions are drawn."""


@dataclass(frozen=True, slots=True)
class TransformRequest:
    """What a user asked for."""

    paths: tuple[Path, ...]
    out: Path
    """A folder that is not there yet, or is empty."""
    scope: Scope = field(default_factory=Scope)
    regions_file: Path | None = None
    key_file: Path | None = None
    most_frames: int = 6
    """One of each series at most."""
    with_images: bool = False
    basis_functions: bool = False


def study_transforms(request: TransformRequest, tell: Tell) -> TransformStudy:
    """Study the middle frame of each series and write pages, table and cautions; nothing where none can be studied.

    Parameters
    ----------
    request
        What is asked.
    tell
        Takes sentences for the user.

    Raises
    ------
    UsageError
        If the call, the key, the region file or the folder is wrong.
    """
    _check_folder(request)
    site = open_site(request.key_file)
    regions = load_regions(request.regions_file, site.pseudonyms) if request.regions_file else None
    for sentence in regions.refused if regions else ():
        tell(f"Left out of the regions: {sentence}")
    inputs = gather_inputs(
        request.paths,
        (),
        scope=request.scope,
        pseudonyms=site.pseudonyms,
        progress=lambda done, found: tell(f"Reading headers: {done} of {found} files"),
    )
    if inputs.assessed and not site.has_kernels(versions()):
        tell("Preparing compiled code (some seconds on the first run after an installation)")
    study = _study(request, inputs, regions, tell)
    if study.frames:
        _write(study, request)
    return study


def _check_folder(request: TransformRequest) -> None:
    """Refuse a folder that cannot be made, holds anything, or whose files would be taken for inputs."""
    place = request.out.resolve()
    nearest = next(folder for folder in (place, *place.parents) if folder.exists())
    if not nearest.is_dir() or not os.access(nearest, os.W_OK):
        raise UsageError("the folder of --out cannot be used; expected one that is new or empty and can be written to")
    if place.exists() and any(place.iterdir()):
        raise UsageError("the folder of --out is not empty; name a new one")
    if any(place.is_relative_to(path.resolve()) for path in request.paths if path.is_dir()):
        raise UsageError("the folder of --out would lie among the images; name one elsewhere")


def _study(request: TransformRequest, inputs: Inputs, regions: RegionSet | None, tell: Tell) -> TransformStudy:
    """Study frames until there are as many as asked for."""
    series = references_of(inputs.assessed)
    left: Counter[tuple[Literal["file", "frame"], str]] = Counter(("file", each.reason) for each in inputs.left_out)
    left.update(("file", "not-selected") for _ in inputs.out_of_scope)
    frames: list[StudiedFrame] = []
    for references in series.values():
        if len(frames) == request.most_frames:
            break
        tell(f"Studying frames: {len(frames) + 1} of at most {min(request.most_frames, len(series))}")
        for reference in references:
            found = _study_one(*reference, regions, with_images=request.with_images)
            if isinstance(found, StudiedFrame):
                frames.append(found)
                break
            left["frame", found] += 1
    return TransformStudy(
        frames=tuple(frames),
        files=len(inputs.assessed) + sum(number for (what, _), number in left.items() if what == "file"),
        series=len(series),
        most_frames=request.most_frames,
        left_aside=tuple(LeftAside(what, reason, number) for (what, reason), number in sorted(left.items())),
        codec_version=Tiled().version,
        bases=tuple(_bases()) if request.basis_functions else (),
    )


def _study_one(instance: Instance, number: int, regions: RegionSet | None, *, with_images: bool) -> StudiedFrame | str:
    """Study a frame, or say by its reason why not."""
    try:
        with open_instance(instance) as reader:
            frame = reader.frame(number)
    except (InputRefused, InputExcluded) as error:
        return error.reason
    threads = min(cores(), MOST_THREADS)
    return study_frame(frame, regions, with_images=with_images, threads=threads) or "every pixel is padding"


def _bases() -> Iterator[StudyBasis]:
    """Yield the basis functions that are drawn."""
    for size in DRAWN_SIZES:
        for transform in TRANSFORMS:
            yield StudyBasis(transform, basis(transform, size))


def _write(study: TransformStudy, request: TransformRequest) -> None:
    """Write the files."""
    table = table_bytes(study.frames)
    pages = draw_study(study, hashlib.sha256(table).hexdigest(), with_images=request.with_images)
    request.out.mkdir(parents=True, exist_ok=True)
    (request.out / CAUTIONS_FILE).write_text(cautions_text(study), encoding="utf-8")
    (request.out / TABLE_FILE).write_bytes(table)
    (request.out / PAGES_FILE).write_bytes(pages)


def lines_of(study: TransformStudy) -> list[str]:
    """Say what was studied and what was not."""
    lines = [f"{study.files} file{'s' * (study.files != 1)} read, {study.series} series with images to study"]
    lines += [
        f"{item.number} {item.what}{'s' * (item.number > 1)}: {sentence_of(item.reason)}" for item in study.left_aside
    ]
    left = study.series - len(study.frames)
    number = len(study.frames)
    return [
        *lines,
        f"{number} frame{'s' * (number != 1)} studied, at most {study.most_frames}; {left} series not studied",
    ]
