"""run.json: when and how a run was made. It stands apart from the record, so that equal results give equal records."""

from __future__ import annotations

import datetime
from typing import Literal

from pydantic import AwareDatetime, Field

from safecheck.documents import Document

__all__ = ["RunFacts"]


class RunFacts(Document):
    """What the dossier says about its making."""

    schema_version: Literal["1"] = "1"
    started: AwareDatetime
    finished: AwareDatetime
    workers: int = Field(ge=1)
    """Worker processes."""
    seconds: dict[str, float] = Field(default_factory=dict)
    """Duration of each step by its name, e.g. 'assess', 'statistics'."""
    sessions: int = Field(default=1, ge=1)
    """1, and 1 more for each time the run was resumed."""
    host: str = ""
    """Name of the machine. It stands in run.json only, never in the PDF."""
    system: str = ""
    """Operating system, processor and Python version."""
    plan_declared: Literal["before the first results", "after the first results", "not known"] = "not known"
    """Whether the plan was first seen before or after results of the same inputs."""

    @property
    def wall_time(self) -> datetime.timedelta:
        """From start to finish; includes the pauses of a run that was resumed."""
        return self.finished - self.started
