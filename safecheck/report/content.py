"""Record -> report: plain frozen objects in reading order, nothing drawn yet."""

from __future__ import annotations

from safecheck.report.blocks import Report, Section
from safecheck.report.sections.back import definitions, keeping, plan, signatures, versions
from safecheck.report.sections.candidates import candidates
from safecheck.report.sections.checks import controls, left_out
from safecheck.report.sections.delivered import delivered
from safecheck.report.sections.equal_damage import equal_damage
from safecheck.report.sections.front import front
from safecheck.report.sections.further import further
from safecheck.report.sections.ledger import ledger
from safecheck.report.sections.limits import limits
from safecheck.report.sections.places import places
from safecheck.report.sections.regions import regions
from safecheck.report.sections.strata import overview, strata
from safecheck.report.sections.view import View
from safecheck.wording import RECORD_TITLE, REDRAWN, RUN_INVALID

__all__ = ["SECOND_GENERATION", "report_of"]

SECOND_GENERATION = "SECOND GENERATION: sources were already lossy"


def report_of(view: View, *, redrawn: bool = False) -> Report:
    """Build the report of a record.

    Parameters
    ----------
    view
        The record with its run facts.
    redrawn
        Whether it is drawn again from the record; every page then says so.
    """
    marks = []
    if not view.record.controls_held:
        marks.append(RUN_INVALID)
    if view.second_generation:
        marks.append(SECOND_GENERATION)
    if redrawn:
        marks.append(REDRAWN)
    return Report(
        title=RECORD_TITLE,
        subject=view.subject,
        reference=view.change.get("reference", ""),
        record_sha256=view.record_sha256,
        front=front(view),
        sections=_sections(view),
        marks=tuple(marks),
        across="" if view.record.controls_held else RUN_INVALID,
    )


def _sections(view: View) -> tuple[Section, ...]:
    """All sections after the first pages."""
    return (
        overview(view),
        limits(view),
        *strata(view),
        places(view),
        regions(view),
        *candidates(view),
        ledger(view),
        *equal_damage(view),
        controls(view),
        left_out(view),
        delivered(view),
        definitions(view),
        versions(view),
        plan(view),
        keeping(view),
        signatures(view),
        *further(view),
    )
