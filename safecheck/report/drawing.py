"""The dossier's PDF and summary, from the record's bytes."""

from __future__ import annotations

import hashlib
from pathlib import Path

from safecheck.record.document import RecordDocument
from safecheck.record.run import RunFacts
from safecheck.report.attach import attached
from safecheck.report.content import report_of
from safecheck.report.pdf import draw_pdf
from safecheck.report.sections.view import view_of

__all__ = ["PLACES", "draw_report"]

PLACES = "places"
"""Folder of the crops within a dossier."""


def draw_report(
    record: RecordDocument,
    record_bytes: bytes,
    run: RunFacts,
    folder: Path,
    *,
    attachment: bool = True,
    redrawn: bool = False,
) -> bytes:
    """Draw report.pdf: the same input gives the same bytes.

    Parameters
    ----------
    record
        The record.
    record_bytes
        record.json as it lies in the dossier; its hash stands on every page.
    run
        When and how the run was made.
    folder
        The dossier; its crops are shown where it has any, unless the report is redrawn.
    attachment
        Whether the PDF carries the record's bytes.
    redrawn
        Drawn again from the record, without images; every page says so.

    Raises
    ------
    DossierError
        If a crop that the record names cannot be read.
    """
    crops = folder / PLACES
    view = view_of(
        record,
        hashlib.sha256(record_bytes).hexdigest(),
        run,
        crops if crops.is_dir() and not redrawn else None,
    )
    pdf = draw_pdf(report_of(view, redrawn=redrawn))
    return attached(pdf, record_bytes) if attachment else pdf
