"""Files below the paths of a call: folders walked, links followed once, loops named."""

from __future__ import annotations

import errno
import os
import stat
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path

from safecheck.errors import UsageError

__all__ = ["Problem", "expand_lists", "find_files", "read_list"]

_LIST_LOOK_BYTES = 1 << 14


@dataclass(frozen=True, slots=True, order=True)
class Problem:
    """A path that is no file to read."""

    path: str
    """Never written."""
    reason: str
    detail: str


@dataclass(slots=True)
class _Walk:
    """What a walk has met so far."""

    files: set[Path] = field(default_factory=set)
    problems: set[Problem] = field(default_factory=set)
    folders: set[str] = field(default_factory=set)
    """Real paths of folders entered."""
    below: dict[str, set[str]] = field(default_factory=dict)
    """Folder -> folders that lie or are linked in it."""
    links: set[tuple[str, str, str]] = field(default_factory=set)
    """(link, folder that holds it, folder that it leads to)."""


def read_list(list_file: Path) -> tuple[Path, ...]:
    """Read a list file: one path a line, relative ones from the list's own folder, empty lines skipped.

    Raises
    ------
    UsageError
        If it cannot be read as UTF-8 text.
    """
    try:
        lines = list_file.read_text(encoding="utf-8-sig").splitlines()
    except (OSError, UnicodeDecodeError) as error:
        raise UsageError(f"the list file cannot be read ({type(error).__name__})") from None
    return tuple(list_file.parent / line.strip() for line in lines if line.strip())


def expand_lists(paths: Iterable[Path]) -> tuple[Path, ...]:
    """Put in the place of each list file what it lists.

    A file that was handed in itself is a list if it is text and its first line names a path that exists.
    """
    expanded: list[Path] = []
    for path in paths:
        expanded.extend(read_list(path) if _is_list(path) else (path,))
    return tuple(expanded)


def _is_list(path: Path) -> bool:
    try:
        if not path.is_file():
            return False
        with path.open("rb") as stream:
            start = stream.read(_LIST_LOOK_BYTES)
        first = start.decode("utf-8-sig", "ignore").strip().split("\n")[0].strip()
        return b"\0" not in start and bool(first) and (path.parent / first).exists()
    except (OSError, ValueError):
        return False


def find_files(paths: Iterable[Path]) -> tuple[tuple[Path, ...], tuple[Problem, ...]]:
    """Find the regular files at and below some paths.

    Parameters
    ----------
    paths
        Files and folders, in any order, overlapping as they may.

    Returns
    -------
    tuple
        (real paths of the files, sorted, each once; what was found that is no file to read, sorted). Neither depends
        on the order of ``paths``.
    """
    walk = _Walk()
    waiting = [folder for path in paths if (folder := _enter(walk, Path(path), None))]
    while waiting:
        waiting.extend(_walk_folder(walk, waiting.pop()))
    for link, holder, target in walk.links:
        if _reaches(walk.below, target, holder):
            walk.problems.add(Problem(link, "link-loop", "a link to a folder that holds it"))
    return tuple(sorted(walk.files)), tuple(sorted(walk.problems))


def _walk_folder(walk: _Walk, folder: str) -> list[str]:
    """Note what a folder holds; the folders in it that are still to be entered."""
    if folder in walk.folders:
        return []
    walk.folders.add(folder)
    try:
        with os.scandir(folder) as entries:
            names = sorted(entry.name for entry in entries)
    except OSError:
        walk.problems.add(Problem(folder, "unreadable", "a folder that may not be opened"))
        return []
    found = (_enter(walk, Path(folder) / name, folder) for name in names)
    return [each for each in found if each]


def _enter(walk: _Walk, path: Path, holder: str | None) -> str | None:
    """Note a file or a problem; the real path of a folder."""
    try:
        linked = holder is None or path.is_symlink()
        real = Path(os.path.realpath(path, strict=True)) if linked else path
        mode = real.stat().st_mode
    except FileNotFoundError:
        walk.problems.add(Problem(str(path.absolute()), "unreadable", "listed or linked, but missing"))
        return None
    except (OSError, ValueError) as error:
        reason = "link-loop" if getattr(error, "errno", None) == errno.ELOOP else "unreadable"
        walk.problems.add(Problem(str(path.absolute()), reason, f"{type(error).__name__} when looked at"))
        return None
    if stat.S_ISREG(mode):
        walk.files.add(real)
    elif not stat.S_ISDIR(mode):
        walk.problems.add(Problem(str(real), "not-dicom", "not a regular file"))
    else:
        if holder is not None:
            walk.below.setdefault(holder, set()).add(str(real))
            if linked:
                walk.links.add((str(path), holder, str(real)))
        return str(real)
    return None


def _reaches(below: dict[str, set[str]], start: str, end: str) -> bool:
    """Whether a folder leads to another, by any number of steps."""
    seen, waiting = {start}, [start]
    while waiting:
        folder = waiting.pop()
        if folder == end:
            return True
        waiting.extend(below.get(folder, set()) - seen)
        seen |= below.get(folder, set())
    return False
