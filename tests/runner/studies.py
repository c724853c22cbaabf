"""Made-up instances, a reader and an evaluation that stand in for the real ones."""

from __future__ import annotations

import contextlib
import dataclasses
import logging
import os
import signal
import time
import warnings
import zlib
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from safecheck.dicom.instance import Instance, Source
from safecheck.errors import InputRefused
from safecheck.evaluation import Assignment, Candidate
from safecheck.frames import Frame, FrameKey, LossHistory, Origin, PixelFormat, Raster, SizeBasis
from safecheck.record.rows import FrameResult, MeasureRow, RegionRow, WindowRow
from safecheck.runner.manifest import Manifest, begin, describe
from safecheck.runner.merge import Merged, merge
from safecheck.runner.pool import LocalPool
from safecheck.runner.progress import Progress
from safecheck.runner.run import run
from safecheck.runner.tasks import Task, plan_tasks
from safecheck.runner.worker import Treatment

KEY = bytes(range(32))
ASSIGNMENT = Assignment(
    candidates=tuple(Candidate(f"tiled {ratio}:1", "tiled", ratio, SizeBasis.BITS_STORED) for ratio in (5.0, 10.0))
)


def instance(
    name: str,
    *,
    frames: int = 1,
    series: str = "R-1",
    number: int | None = 1,
    modality: str = "CT",
    size: tuple[int, int] = (16, 16),
    folder: str = "somewhere",
) -> Instance:
    """An instance of no file."""
    origin = Origin(modality, "HEAD", "over 1 to 3 mm", "", "", "Explicit VR Little Endian", 512, LossHistory(False))
    return Instance(
        source=Source(Path(folder) / name),
        input=f"F-{name}",
        patient="P-1",
        study="S-1",
        series=series,
        instance=f"I-{name}",
        series_number=1,
        instance_number=number,
        frames=frames,
        object_class="CT Image Storage",
        rows=size[0],
        columns=size[1],
        bits_allocated=16,
        bits_stored=12,
        photometric="MONOCHROME2",
        size_bytes=1000,
        pixel_bytes=512,
        derived=False,
        origin=origin,
        uid=f"1.2.3.{name}",
    )


def study(series: int = 3, slices: int = 10, cine_frames: int = 20) -> list[Instance]:
    """Several series of single frames, and one instance of many."""
    singles = [
        instance(f"{s}-{n}", series=f"R-{s}", number=n, modality="CT" if s % 2 else "MR")
        for s in range(series)
        for n in range(slices)
    ]
    return [*singles, instance("cine", frames=cine_frames, series="R-cine", modality="US")]


def manifest_of(instances: list[Instance], **changes: object) -> Manifest:
    """What a run over these instances is about."""
    about: dict[str, Any] = {"plan_hash": "p" * 64, "key": KEY, "key_id": "K-1", "versions": {"safecheck": "0.1"}}
    return describe(instances, {}, ASSIGNMENT, **(about | changes))


def tasks_of(instances: list[Instance]) -> tuple[Task, ...]:
    """Tasks of a run over these instances."""
    return plan_tasks(instances, {}, manifest_of(instances), KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1)


@dataclass(frozen=True, slots=True)
class Reader:
    """Frames made of an instance's name and their number."""

    instance: Instance
    notes: tuple[str, ...]

    def frame(self, number: int) -> Frame:
        made_of = self.instance
        if made_of.object_class == "refused by the reader":
            raise InputRefused("truncated", "512 bytes expected, 500 found")
        seed = np.random.default_rng([zlib.crc32(made_of.input.encode()), number])
        samples = seed.integers(0, 4096, (made_of.rows, made_of.columns), dtype=np.uint16)
        key = FrameKey(
            made_of.patient, made_of.study, made_of.series, made_of.instance, number, 1, made_of.instance_number
        )
        origin = dataclasses.replace(made_of.origin, notes=self.notes)
        return Frame(key, origin, Raster(samples, PixelFormat(16, 12, False, "MONOCHROME2")), 12, "HU")


@contextlib.contextmanager
def open_instance(which: Instance) -> Iterator[Reader]:
    """Open an instance of no file."""
    if which.object_class == "cannot be opened":
        raise OSError(2, "no such file", str(which.source.path))
    yield Reader(which, ("padding range turned round",) if which.origin.modality == "US" else ())


@dataclass(frozen=True, slots=True)
class FakeEvaluation:
    """Rows that depend on samples, key and candidate alone; may misbehave on chosen frames."""

    takes_s: float = 0.0
    dies_on: tuple[tuple[str, int], ...] = ()
    """(instance, frame) under which the process kills itself."""
    dies_once: str = ""
    """File that is made at the first death; while it is there nothing dies."""
    raises_on: tuple[tuple[str, int], ...] = ()
    refuses_on: tuple[tuple[str, int], ...] = ()
    misfits_on: tuple[tuple[str, int], ...] = ()
    """(instance, frame) whose rows hold a text where a number belongs."""
    pid_file: str = ""
    """File to which the process adds its number before it takes its time."""
    environment_log: str = ""
    """File that takes note of threads that libraries were allowed."""
    breaks: str = ""
    """Folder that is replaced by a file."""
    chatty: bool = False
    """Print, warn and log in every way that a library may."""
    log: str = ""
    """File to which each frame evaluated adds a line."""

    def __call__(
        self, frame: Frame, assignment: Assignment, *, full_controls: bool, delivered: Frame | None = None
    ) -> FrameResult:
        place = (frame.key.instance, frame.key.frame)
        if self.pid_file:
            with Path(self.pid_file).open("a") as file:
                file.write(f"{os.getpid()}\n")
        if self.environment_log:
            threads = " ".join(f"{name}={os.environ[f'{name}_NUM_THREADS']}" for name in ("OMP", "OPENBLAS", "NUMBA"))
            Path(self.environment_log).write_text(threads)
        if self.breaks and Path(self.breaks).is_dir():
            Path(self.breaks).rmdir()
            Path(self.breaks).touch()
        if self.chatty:
            _chat()
        if self.log:
            with Path(self.log).open("a") as file:
                file.write(f"{place[0]} {place[1]}\n")
        if self.takes_s:
            time.sleep(self.takes_s)
        if place in self.dies_on:
            self._die()
        if place in self.raises_on:
            raise KeyError("Doe^Jane")
        if place in self.refuses_on:
            raise InputRefused("range", "5000 found, at most 4095 expected")
        if place in self.misfits_on:
            text: Any = "text"
            return FrameResult((dataclasses.replace(row(MeasureRow, frame, "any"), code_bytes=text),))
        names = [candidate.name for candidate in assignment.candidates]
        names += ["over-compressed"] if full_controls else []
        names += ["delivered"] if delivered is not None else []
        return FrameResult(
            tuple(row(MeasureRow, frame, name) for name in names),
            tuple(row(WindowRow, frame, name) for name in names),
            tuple(row(RegionRow, frame, name) for name in names if frame.key.frame % 2),
        )

    def _die(self) -> None:
        if self.dies_once:
            if Path(self.dies_once).exists():
                return
            Path(self.dies_once).touch()
        os.kill(os.getpid(), signal.SIGKILL)


def _chat() -> None:
    print("Doe^Jane")  # noqa: T201
    os.write(1, b"Doe^Jane")
    os.write(2, b"Doe^Jane")
    warnings.warn("Doe^Jane", stacklevel=1)
    logging.getLogger("pydicom").error("Doe^Jane")


def row(kind: type[Any], frame: Frame, candidate: str) -> Any:
    """A row with every column filled from the frame."""
    figure = float(frame.raster.samples.mean()) / (1 + len(candidate))
    by_kind: dict[str, Any] = {"str": "text", "int": frame.key.frame, "float": figure, "bool": True}
    values = {item.name: by_kind[str(item.type).partition(" ")[0]] for item in dataclasses.fields(kind)}
    key = frame.key
    places = {"patient": key.patient, "study": key.study, "series": key.series, "instance": key.instance}
    return kind(**values | places | {"frame": key.frame, "candidate": candidate})


def run_study(
    dossier: Path,
    instances: list[Instance],
    *,
    workers: int = 2,
    evaluation: FakeEvaluation | None = None,
    reports: list[Progress] | None = None,
) -> Merged:
    """One whole run, begun or resumed."""
    manifest = manifest_of(instances)
    tasks = plan_tasks(instances, {}, manifest, KEY, assignment=ASSIGNMENT, share_percent=5.0, seed=1)
    treatment = Treatment(ASSIGNMENT, evaluation or FakeEvaluation(), open_instance)
    heard = [] if reports is None else reports
    with begin(dossier, manifest) as held:
        run(tasks, treatment, held.path, executor=LocalPool(workers), warm_up=lambda: None, report=heard.append)
        return merge(tasks, held.path, dossier)


def work_of(dossier: Path, instances: list[Instance]) -> Path:
    """Work folder of a run that was begun, and left again."""
    with begin(dossier, manifest_of(instances)) as held:
        return held.path


def tables_of(dossier: Path) -> dict[str, bytes]:
    """Bytes of the tables in a dossier."""
    return {name: (dossier / f"{name}.parquet").read_bytes() for name in ("measures", "windows", "regions")}


class _DiesOnArrival:
    def __reduce__(self) -> tuple[Any, ...]:
        return os._exit, (1,)


class _Unreadable:
    def __reduce__(self) -> tuple[Any, ...]:
        return _raise_lookup_error, ()


def _raise_lookup_error() -> None:
    raise LookupError("Doe^Jane")


class Killed:
    """What tests need to know of processes, and to do to them."""

    on_arrival: Any = _DiesOnArrival()
    """Ends the worker process that takes it out of its orders."""
    unreadable: Any = _Unreadable()
    """Raises in the worker process that takes it out of its orders."""

    @staticmethod
    def all_pids(file: Path) -> list[int]:
        return [int(line) for line in file.read_text().split()] if file.exists() else []

    @staticmethod
    def first_pid(file: Path) -> float:
        """Kill the first process that names itself in a file; the time when it was killed."""
        until_s = time.monotonic() + 20
        while not Killed.all_pids(file) and time.monotonic() < until_s:
            time.sleep(0.01)
        os.kill(Killed.all_pids(file)[0], signal.SIGKILL)
        return time.monotonic()

    @staticmethod
    def alive(pid: int) -> bool:
        try:
            state = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0]
        except OSError:
            return False
        return state != "Z"

    @staticmethod
    def workers_of(pid: int) -> list[int]:
        """Child processes of a run."""
        return [int(child) for child in Path(f"/proc/{pid}/task/{pid}/children").read_text().split()]


def environment() -> dict[str, str]:
    """Environment in which a program of the tests finds them."""
    return os.environ | {"PYTHONPATH": str(Path(__file__).parents[2])}
