"""The plan of a run: from its file, or from the candidates given on the command line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from safecheck.codecs import registry
from safecheck.codecs.base import RatedCodec
from safecheck.documents import from_toml
from safecheck.errors import CodecUnavailable, DocumentError, UsageError
from safecheck.policy.limits import check_limits
from safecheck.policy.plan import CandidatePlan, Change, Plan, SamplePlan, Scope, plan_hash
from safecheck.policy.reference import check_reference

__all__ = [
    "DEFAULT_CODECS",
    "DEFAULT_RATIOS",
    "LoadedPlan",
    "check_available",
    "is_available",
    "load_plan",
    "missing_controls",
    "plan_of_command_line",
    "setting_range",
]

DEFAULT_RATIOS = (5.0, 8.0, 10.0, 15.0, 20.0)
DEFAULT_CODECS = ("tiled", "jpeg2000")
_CONTROLS = ("jpegls-reversible", "jpeg2000-reversible")


@dataclass(frozen=True, slots=True)
class LoadedPlan:
    """A plan, and where it came from."""

    plan: Plan
    source: Literal["file", "command line"]
    regions_file: Path | None
    """Region file, SEG or RT Structure Set, or None."""

    @property
    def sha256(self) -> str:
        """Hash of the plan as read."""
        return plan_hash(self.plan)


def load_plan(path: Path) -> LoadedPlan:
    """Read a plan and check what the document alone cannot: codecs, their settings, measures, units.

    Raises
    ------
    UsageError
        If the file cannot be read.
    DocumentError
        With the dotted path of the key at fault.
    """
    try:
        text = path.read_text(encoding="utf-8")
    except FileNotFoundError:
        raise UsageError("there is no such plan file") from None
    except (OSError, UnicodeDecodeError) as error:
        raise UsageError("the plan file cannot be read as text") from error
    plan = from_toml(Plan, text)
    _check_codecs(plan)
    check_limits(plan)
    check_reference(plan)
    regions = path.parent / plan.regions.file if plan.regions else None
    return LoadedPlan(plan, "file", regions)


def plan_of_command_line(
    ratios: Sequence[float], codecs: Sequence[str], scope: Scope, regions_file: Path | None
) -> LoadedPlan:
    """Make a plan without limits from candidates given on the command line.

    Raises
    ------
    UsageError
        If there is no codec or no ratio, one stands there twice, a codec is unknown or a ratio is out of range.
    """
    if not ratios or not codecs:
        raise UsageError("at least one ratio and one codec are expected")
    if len(set(ratios)) < len(ratios) or len(set(codecs)) < len(codecs):
        raise UsageError("each ratio and each codec is expected once, and one stands there twice")
    for ratio in ratios:
        if not 1 < ratio <= 1000:
            raise UsageError(f"a ratio is expected above 1 and at most 1000, found {ratio:g}")
    for name in codecs:
        if name not in registry.rated_names():
            known = ", ".join(registry.rated_names())
            raise UsageError(f"no codec {name!r} can be asked for a ratio; expected one of {known}")
    plan = Plan(
        version=1,
        change=Change(
            title="Candidates given on the command line",
            declared_by="no plan declared",
            declared_on=None,
            compressed_copy="not declared",
            compressed_when="not declared",
        ),
        sample=SamplePlan(drawn="chosen"),
        scope=scope,
        candidates=tuple(CandidatePlan(codec=name, ratio=ratio) for name in codecs for ratio in ratios),
    )
    return LoadedPlan(plan, "command line", regions_file)


def is_available(codec: str) -> bool:
    """Whether a codec works on this machine; a library may be here and lack the part that the codec needs."""
    try:
        return registry.available(codec) and bool(registry.codec(codec).version)
    except CodecUnavailable:
        return False


def check_available(plan: Plan) -> None:
    """Raise where this machine lacks the codec of a candidate, or one that every run needs.

    Raises
    ------
    DocumentError
        With the dotted path of the first such candidate.
    UsageError
        If a codec of the run's own controls is missing.
    """
    for index, candidate in enumerate(plan.candidates):
        if not is_available(candidate.codec):
            library = registry.entry(candidate.codec).library
            raise DocumentError(
                f"candidates[{index}].codec",
                f"{candidate.codec} is not available here, expected {library} with that codec; see safecheck selftest",
            )
    for name in missing_controls():
        raise UsageError(
            f"{name} is not available here, and every run needs it as a control of its own; expected "
            f"{registry.entry(name).library} with that codec; see safecheck selftest"
        )


def missing_controls() -> tuple[str, ...]:
    """Codecs of the reversible codes that every frame carries, where this machine lacks them."""
    return tuple(name for name in _CONTROLS if not is_available(name))


def _check_codecs(plan: Plan) -> None:
    """Ask the registry for each candidate's codec with its settings, and for its dial where there is no ratio."""
    known: dict[tuple[str | float | None, ...], int] = {}
    for index, candidate in enumerate(plan.candidates):
        path = f"candidates[{index}]"
        made = _made(candidate, path)
        _check_dial(candidate, path)
        # The name tells candidates apart by what was written, which a codec may take for the same setting.
        asked = (candidate.ratio, candidate.per, candidate.basis, candidate.outside)
        first = known.setdefault((candidate.codec, registry.settings_text(made.settings), *asked), index)
        if first != index:
            held = ", ".join(f"{key} {value}" for key, value in made.settings.items())
            raise DocumentError(
                f"{path}.settings", f"is the same as that of candidates[{first}] to {candidate.codec}: {held}"
            )


def _made(candidate: CandidatePlan, path: str) -> RatedCodec:
    """A candidate's codec; what is wrong with it is named by the key at fault."""
    try:
        registry.rated(candidate.codec)
    except UsageError as error:
        raise DocumentError(f"{path}.codec", str(error)) from error
    for key, value in candidate.settings.items():
        try:
            registry.rated(candidate.codec, **{key: value})
        except UsageError as error:
            raise DocumentError(f"{path}.settings.{key}", str(error)) from error
    return registry.rated(candidate.codec, **candidate.settings)


def _check_dial(candidate: CandidatePlan, path: str) -> None:
    """A ratio, or the codec's dial, and not both."""
    dial = registry.entry(candidate.codec).dial
    if candidate.ratio is None and dial not in candidate.settings:
        raise DocumentError(
            f"{path}.settings.{dial}",
            f"is missing; without a ratio {candidate.codec} is set by its {dial}, "
            f"expected {setting_range(candidate.codec, dial)}",
        )
    if candidate.ratio is not None and dial in candidate.settings:
        raise DocumentError(
            f"{path}.settings.{dial}",
            f"is what the ratio of {candidate.ratio:g}:1 sets; expected either ratio or settings.{dial}, not both",
        )


def setting_range(codec: str, setting: str) -> str:
    """Range of a codec's setting, in the codec's own words: it says them when asked for what no setting can be."""
    try:
        registry.rated(codec, **{setting: -1.0})
    except UsageError as error:
        return str(error).partition("expected ")[2]
    return "a number"
