"""From paths to instances: every file found is an instance to assess, or left out by name of a reason."""

from __future__ import annotations

import dataclasses
import hashlib
import io
from collections import Counter, defaultdict
from collections.abc import Callable, Iterable
from dataclasses import dataclass, field
from pathlib import Path, PurePosixPath
from typing import BinaryIO, TypeAlias

from safecheck.dicom.archives import Member, begins_archive, member_names, read_members
from safecheck.dicom.examine import Content, Examined, LeftOut, examine, leave_out
from safecheck.dicom.facts import Facts
from safecheck.dicom.folders import Problem, expand_lists, find_files, read_list
from safecheck.dicom.instance import Instance, Source
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.rules import Include
from safecheck.errors import InputRefused

__all__ = ["Include", "Intake", "LeftOut", "Progress", "gather"]

# Up to this size a file is read once, and hashed and parsed in memory.
_AT_ONCE_BYTES = 8 * 1024 * 1024
_LAST = 1 << 62

Progress: TypeAlias = Callable[[int, int], None]
"""Called with (inputs looked at, inputs found so far)."""


@dataclass(frozen=True, slots=True)
class Intake:
    """All inputs of one side, in an order that does not depend on how they were handed in."""

    instances: tuple[Instance, ...]
    left_out: tuple[LeftOut, ...]

    @property
    def counts(self) -> dict[str, int]:
        """Inputs by reason code, and under 'assessed' those left in; they sum to the number of inputs."""
        return {"assessed": len(self.instances), **Counter(each.reason for each in self.left_out)}


def gather(
    paths: Iterable[Path],
    *,
    pseudonyms: Pseudonyms,
    include: Include | None = None,
    list_file: Path | None = None,
    progress: Progress | None = None,
) -> Intake:
    """Take in files, folders, DICOMDIRs, zip archives and list files, whatever their names.

    Parameters
    ----------
    paths
        Handed in; may overlap. Folders are walked, zip archives entered, files that a DICOMDIR lists added. A text
        file whose first line names a path that exists is a list, one path a line.
    pseudonyms
        Names under the site key.
    include
        What is assessed only when asked for; None for none of it.
    list_file
        A list of further paths that is taken for one whatever it holds.
    progress
        Told after each input.

    Returns
    -------
    Intake
        Sorted by pseudonyms, series number and instance number.

    Raises
    ------
    UsageError
        If the list file cannot be read, or two identifiers share a pseudonym.
    """
    handed_in = expand_lists(Path(each) for each in paths) + (read_list(list_file) if list_file else ())
    run = _Run(pseudonyms, include or Include(), progress)
    with quiet_library():
        run.take_paths(handed_in)
    return run.result()


@dataclass(slots=True)
class _Run:
    """One gathering under way."""

    pseudonyms: Pseudonyms
    include: Include
    progress: Progress | None
    candidates: list[tuple[Instance, Facts]] = field(default_factory=list)
    left_out: list[LeftOut] = field(default_factory=list)
    met: dict[str, Examined] = field(default_factory=dict)
    """What was found in each content, by its name."""
    files: set[Path] = field(default_factory=set)
    problems: set[Problem] = field(default_factory=set)
    done: int = 0
    found: int = 0

    def take_paths(self, paths: Iterable[Path]) -> None:
        """Take in all files at and below paths that were not met before."""
        files, problems = find_files(paths)
        fresh = [path for path in files if path not in self.files]
        self.files.update(fresh)
        self.found += len(fresh)
        for problem in problems:
            if problem not in self.problems:
                source = Source(Path(problem.path))
                self._leave_unread(source, problem.path, problem.reason, problem.detail)
        self.problems.update(problems)
        for path in fresh:
            self._take_file(path)
            self._step(found=0)

    def result(self) -> Intake:
        """Set aside instances that contradict each other, and sort."""
        by_uid: dict[str, list[tuple[Instance, Facts]]] = defaultdict(list)
        for instance, facts in self.candidates:
            by_uid[instance.uid or instance.input].append((instance, facts))
        instances = [group[0][0] for group in by_uid.values() if len(group) == 1]
        conflicts = [
            leave_out(each.source, each.input, "conflict", f"{len(group)} inputs", each.size_bytes, facts)
            for group in by_uid.values()
            if len(group) > 1
            for each, facts in group
        ]
        return Intake(
            tuple(sorted(instances, key=_place)), tuple(sorted(self.left_out + conflicts, key=_place_left_out))
        )

    def _step(self, found: int) -> None:
        self.found += found
        self.done += 1
        if self.progress:
            self.progress(self.done, self.found)

    def _leave_unread(self, source: Source, mark: str, reason: str, detail: str, size_bytes: int = 0) -> None:
        """Leave out what was not read, under a name made of ``mark``."""
        name = self.pseudonyms.name("input", f"unread\0{reason}\0{mark}")
        self.left_out.append(leave_out(source, name, reason, detail, size_bytes))

    def _take_file(self, path: Path) -> None:
        try:
            with path.open("rb") as stream:
                if not begins_archive(stream.read(132)):
                    self._take_stream(path, stream)
                    return
        except OSError as error:
            detail = f"{type(error).__name__} when opened"
            self._leave_unread(Source(path), str(path), "unreadable", detail)
            return
        self._take_archive(path)

    def _take_stream(self, path: Path, stream: BinaryIO) -> None:
        size_bytes = stream.seek(0, io.SEEK_END)
        stream.seek(0)
        if size_bytes <= _AT_ONCE_BYTES:
            stream = io.BytesIO(stream.read())
        examined = self._take(Source(path), stream, size_bytes, lambda below: path.parent.joinpath(below).exists())
        if examined.listing:
            below = (path.parent.joinpath(each) for each in examined.listing.files)
            self.take_paths(each for each in below if each.exists())

    def _take_archive(self, path: Path) -> None:
        try:
            for member in read_members(path):
                self._take_member(path, member)
                self._step(found=1)
        except InputRefused as refusal:
            size_bytes = path.stat().st_size
            self._leave_unread(Source(path), str(path), refusal.reason, refusal.detail, size_bytes)

    def _take_member(self, path: Path, member: Member) -> None:
        source = Source(path, member.name)
        if member.refused:
            mark = f"{member.name}\0{member.mark}"
            self._leave_unread(source, mark, *member.refused, member.size_bytes)
            return
        stream = io.BytesIO(member.content)
        if begins_archive(member.content[:132]):
            detail = "an archive within an archive, not entered"
            self.left_out.append(leave_out(source, self._name(stream), "not-dicom", detail, member.size_bytes))
            return
        folder = PurePosixPath(member.name).parent
        self._take(source, stream, member.size_bytes, lambda below: str(folder / below) in member_names(path))

    def _name(self, stream: BinaryIO) -> str:
        """Pseudonym by content."""
        stream.seek(0)
        digest = hashlib.sha256()
        while part := stream.read(1 << 20):
            digest.update(part)
        return self.pseudonyms.name("input", digest.hexdigest())

    def _take(
        self, source: Source, stream: BinaryIO, size_bytes: int, holds: Callable[[PurePosixPath], bool]
    ) -> Examined:
        """Book one content; the same content again is a duplicate if it is DICOM, and looked at once."""
        name = self._name(stream)
        examined = self.met.get(name)
        if examined and examined.facts and not examined.listing:
            self.left_out.append(leave_out(source, name, "duplicate", "", size_bytes, examined.facts))
            return examined
        if examined is None or examined.listing:
            content = Content(source, name, stream, size_bytes, holds)
            examined = examine(content, self.pseudonyms, self.include)
            self.met[name] = examined
        if examined.instance and examined.facts:
            self.candidates.append((examined.instance, examined.facts))
        if examined.left_out:
            self.left_out.append(dataclasses.replace(examined.left_out, source=source))
        return examined


_Place: TypeAlias = tuple[str, str, int, str, int, str, str]


def _place(each: Instance | Facts) -> _Place:
    """Where an instance stands in the order; those without a number come last."""
    series_number = _LAST if each.series_number is None else each.series_number
    instance_number = _LAST if each.instance_number is None else each.instance_number
    name = each.input if isinstance(each, Instance) else ""
    return each.patient, each.study, series_number, each.series, instance_number, each.instance, name


def _place_left_out(each: LeftOut) -> tuple[_Place, str, str, str]:
    place = _place(each.facts) if each.facts else ("", "", 0, "", 0, "", "")
    return place, each.input, each.reason, each.detail
