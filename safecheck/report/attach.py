"""The record inside the PDF, as an attachment that any reader can take out again."""

from __future__ import annotations

import io

from pypdf import PdfReader, PdfWriter
from pypdf.generic import NameObject, TextStringObject

from safecheck.errors import DossierError

__all__ = ["ATTACHMENT", "attached", "taken_out"]

ATTACHMENT = "record.json"


def attached(pdf: bytes, record: bytes) -> bytes:
    """Return the PDF with the record's bytes attached; the same input gives the same bytes."""
    writer = PdfWriter(clone_from=io.BytesIO(pdf))
    embedded = writer.add_attachment(ATTACHMENT, record)
    # Readers differ in which of the two names they show.
    embedded.alternative_name = TextStringObject(ATTACHMENT)
    embedded.description = TextStringObject("The record, canonical JSON")
    embedded.subtype = NameObject("/application/json")
    buffer = io.BytesIO()
    writer.write(buffer)
    return buffer.getvalue()


def taken_out(pdf: bytes) -> bytes:
    """Return the record's bytes that a PDF carries.

    Raises
    ------
    DossierError
        If the PDF carries no record.
    """
    found = PdfReader(io.BytesIO(pdf)).attachments.get(ATTACHMENT)
    if not found:
        raise DossierError("the PDF carries no record as an attachment")
    return found[0]
