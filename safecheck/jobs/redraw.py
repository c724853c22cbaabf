"""A report drawn again from the record, without images, never over the first."""

from __future__ import annotations

import os
from pathlib import Path

from safecheck.documents import from_json
from safecheck.errors import DossierError, UsageError
from safecheck.jobs.dossier import RECORD, RUN
from safecheck.jobs.verify import NO_DOSSIER, read_record
from safecheck.record.run import RunFacts
from safecheck.report.drawing import draw_report

__all__ = ["redraw"]


def redraw(dossier: Path, out: Path) -> None:
    """Draw the PDF of a dossier again.

    Parameters
    ----------
    dossier
        Folder of a finished run.
    out
        PDF to write; must not exist, and must not lie inside the dossier, whose seal covers all its files.

    Raises
    ------
    DossierError
        If the record or the run's facts are missing or of another format.
    UsageError
        If there is no such folder, or the PDF exists already, would lie in the dossier or cannot be written.
    """
    if not dossier.is_dir():
        raise UsageError(NO_DOSSIER)
    record = read_record(dossier)
    try:
        run = from_json(RunFacts, (dossier / RUN).read_bytes())
    except OSError as error:
        raise DossierError("the dossier holds no run.json") from error
    if out.exists():
        raise UsageError("the PDF to write exists already; name another with --out")
    if out.resolve().is_relative_to(dossier.resolve()):
        raise UsageError("the PDF would lie inside the dossier, whose seal it would break; name another with --out")
    pdf = draw_report(record, (dossier / RECORD).read_bytes(), run, dossier, redrawn=True)
    try:
        out.write_bytes(pdf)
    except OSError as error:
        raise UsageError(f"the PDF cannot be written there: {os.strerror(error.errno or 0)}") from None
