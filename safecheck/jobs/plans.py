"""The plan of a run: from its file, or from the candidates given on the command line."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Literal

from safecheck.codecs import registry
from safecheck.documents import from_toml
from safecheck.errors import DocumentError, UsageError
from safecheck.policy.limits import check_limits
from safecheck.policy.plan import CandidatePlan, Change, Plan, SamplePlan, Scope, plan_hash

__all__ = ["DEFAULT_CODECS", "DEFAULT_RATIOS", "LoadedPlan", "load_plan", "plan_of_command_line"]

DEFAULT_RATIOS = (5.0, 8.0, 10.0, 15.0, 20.0)
DEFAULT_CODECS = ("tiled", "jpeg2000")


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


def _check_codecs(plan: Plan) -> None:
    """Ask the registry for each candidate's codec with its settings."""
    for index, candidate in enumerate(plan.candidates):
        try:
            registry.rated(candidate.codec, **candidate.settings)
        except UsageError as error:
            raise DocumentError(f"candidates[{index}].codec", str(error)) from error
