"""The pages of a transform study, and the companion of its table."""

from __future__ import annotations

from safecheck.record.transforms import TransformStudy
from safecheck.report.blocks import Report
from safecheck.report.content import SECOND_GENERATION
from safecheck.report.pdf import draw_pdf
from safecheck.report.sections.study_frame import basis_section, frame_section
from safecheck.report.sections.study_front import TABLE_NAME, study_cautions, study_front, study_meanings
from safecheck.report.sections.study_words import figures_of
from safecheck.wording import STUDY_TITLE

__all__ = ["cautions_text", "draw_study"]


def draw_study(study: TransformStudy, table_sha256: str, *, with_images: bool) -> bytes:
    """Draw transforms.pdf: the same study gives the same bytes.

    Parameters
    ----------
    study
        With at least one frame.
    table_sha256
        SHA-256 of the table beside it, which stands on every page.
    with_images
        Whether pictures were asked for.
    """
    figures = [figures_of(number, frame) for number, frame in enumerate(study.frames, start=1)]
    sections = [frame_section(item, with_images=with_images) for item in figures]
    sections.append(study_meanings())
    if study.bases:
        sections.append(basis_section(study.bases))
    lossy = any(frame.source_lossy for frame in study.frames)
    report = Report(
        title=STUDY_TITLE,
        subject="",
        reference="",
        record_sha256=table_sha256,
        front=study_front(study, figures, table_sha256),
        sections=tuple(sections),
        marks=(SECOND_GENERATION,) if lossy else (),
        hashed=TABLE_NAME,
    )
    return draw_pdf(report)


def cautions_text(study: TransformStudy) -> str:
    """Write the cautions as plain text: a table carries no lines above its data."""
    return "".join(f"{number}. {text}\n" for number, text in enumerate(study_cautions(study.frames), start=1))
