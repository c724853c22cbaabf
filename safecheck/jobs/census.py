"""What is there: files, strata, bits, syntaxes, sizes, what is already lossy, what is left out and why."""

from __future__ import annotations

import os
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path

from safecheck.dicom.instance import Instance
from safecheck.errors import UsageError
from safecheck.jobs.inputs import Inputs, gather_inputs
from safecheck.jobs.site import open_site
from safecheck.policy.plan import Scope
from safecheck.runner.tasks import pixels_of
from safecheck.wording import SHORT_CAUTION, sentence_of

__all__ = ["Census", "StratumCount", "draft_plan", "lines_of", "take_census", "write_draft_plan"]


@dataclass(frozen=True, slots=True)
class StratumCount:
    """A group of like images."""

    stratum: str
    patients: int
    studies: int
    instances: int
    frames: int
    bits_stored: tuple[int, ...]
    syntaxes: tuple[str, ...]
    bytes_now: int
    """Pixel data as it lies there."""
    bytes_bits_stored: float
    """Pixels at their bits stored."""

    lossy: int
    """Instances already lossy."""

    @property
    def ratio_now(self) -> float:
        """Ratio today on the bits-stored basis; below 1 where samples lie there with their unused bits."""
        return self.bytes_bits_stored / self.bytes_now if self.bytes_now else 0.0


@dataclass(frozen=True, slots=True)
class Census:
    """All that headers tell."""

    inputs: Inputs
    strata: tuple[StratumCount, ...]

    @property
    def lossy(self) -> int:
        """Instances already lossy, whether taken in or left out."""
        left = sum(1 for each in self.inputs.left_out if each.facts and each.facts.origin.history.lossy)
        return left + sum(each.origin.history.lossy for each in self.inputs.assessed)


def take_census(
    paths: tuple[Path, ...], *, scope: Scope, key_file: Path | None, progress: Callable[[int, int], None]
) -> Census:
    """Read headers and count.

    Raises
    ------
    UsageError
        If the key or a list file cannot be read.
    """
    site = open_site(key_file)
    inputs = gather_inputs(paths, (), scope=scope, pseudonyms=site.pseudonyms, progress=progress)
    groups: dict[str, list[Instance]] = {}
    for each in inputs.assessed:
        groups.setdefault(each.origin.stratum, []).append(each)
    return Census(inputs, tuple(_count(name, groups[name]) for name in sorted(groups)))


def _count(stratum: str, instances: list[Instance]) -> StratumCount:
    """Count one stratum."""
    return StratumCount(
        stratum=stratum,
        patients=len({each.patient for each in instances}),
        studies=len({each.study for each in instances}),
        instances=len(instances),
        frames=sum(each.frames for each in instances),
        bits_stored=tuple(sorted({each.bits_stored for each in instances})),
        syntaxes=tuple(sorted({each.origin.source_syntax for each in instances})),
        bytes_now=sum(each.pixel_bytes for each in instances),
        lossy=sum(each.origin.history.lossy for each in instances),
        bytes_bits_stored=sum(each.frames * pixels_of(each) * each.bits_stored / 8 for each in instances),
    )


def lines_of(census: Census) -> Iterator[str]:
    """Yield the lines that the command prints."""
    inputs = census.inputs
    files = len(inputs.assessed) + len(inputs.out_of_scope) + len(inputs.left_out)
    taken = len(inputs.assessed)
    yield f"{files} files: {taken} images that could be assessed, {files - taken} left out"
    for stratum in census.strata:
        bits = "/".join(map(str, stratum.bits_stored))
        yield ""
        yield f"{stratum.stratum}"
        yield (
            f"  {_counted(stratum.patients, 'patient')}, {_counted(stratum.studies, 'study', 'studies')}, "
            f"{_counted(stratum.instances, 'instance')}, {_counted(stratum.frames, 'frame')}, {bits} bits stored"
        )
        yield f"  {'; '.join(stratum.syntaxes)}"
        kind = "already lossy" if stratum.lossy == stratum.instances else "lossless" if not stratum.lossy else "mixed"
        yield f"  {_megabytes(stratum.bytes_now)} now: {kind}, {stratum.ratio_now:.2f}:1 of bits stored"
    yield ""
    yield f"Already lossy: {census.lossy}"
    counts = Counter((each.status, each.reason) for each in inputs.left_out)
    for (status, reason), number in sorted(counts.items()):
        yield f"{status}: {number} - {sentence_of(reason)}"
    yield ""
    yield SHORT_CAUTION


def _counted(number: int, one: str, many: str = "") -> str:
    """'1 study', '2 studies'."""
    return f"{number} {one if number == 1 else many or one + 's'}"


def _megabytes(size: float) -> str:
    return f"{size / 1e6:,.1f} MB"


def write_draft_plan(census: Census, path: Path) -> None:
    """Write a plan to start from into a new file.

    Raises
    ------
    UsageError
        If the file exists or cannot be written.
    """
    try:
        with path.open("x", encoding="utf-8") as file:
            file.write(draft_plan(census))
    except OSError as error:
        raise UsageError(f"the file for the draft plan cannot be written: {os.strerror(error.errno or 0)}") from None


def draft_plan(census: Census) -> str:
    """Write a plan to start from: what was found is filled in, what only a person can say is marked."""
    modalities = sorted({each.origin.modality for each in census.inputs.assessed if each.origin.modality})
    scope = ", ".join(f'"{modality}"' for modality in modalities)
    return _DRAFT.format(scope=scope)


_DRAFT = """\
# A plan to start from. Fill in every line that says "to be filled in" before the run.
version = 1

[change]
title = "to be filled in"
reference = ""
declared_by = "to be filled in: a role, no name"
declared_on = 2000-01-01 # to be filled in
compressed_copy = "to be filled in, e.g. archive copy"
compressed_when = "to be filled in, e.g. 90 days after the report"

[sample]
# random: drawn at random from the studies the policy will meet; consecutive; chosen
drawn = "chosen"
source = ""

[scope]
modalities = [{scope}]

# One table per candidate; only proposed ones decide the exit code.
[[candidates]]
codec = "jpeg2000"
ratio = 10
basis = "bits-stored"
status = "proposed"

[[candidates]]
codec = "tiled"
ratio = 10
status = "context"

# No limit is given: published figures contradict each other, and limits are for the site to declare.
# [[limits]]
# name = ""
# measure = "rmse_content"
# unit = "HU"
# at_most = 0
# modality = "CT"
# declared_by = ""
# declared_on = 2000-01-01

[allowed]
refused_percent = 0
excluded_percent = 100
"""
