"""The words that outputs share: cautions, outcomes, reasons, and the lint that keeps forbidden words out.

Wording is part of the product: the record, the PDF, the page and the command line take it from here and nowhere else.
"""

from __future__ import annotations

import enum
import re
from collections.abc import Iterator
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

__all__ = [
    "ANALYSIS_CODEC",
    "CAUTIONS",
    "CAUTIONS_WHEN",
    "DELIVERED_COPIES",
    "FORBIDDEN",
    "NO_BOUND",
    "NO_LIMITS",
    "ON_REFERENCE",
    "REASONS",
    "RECORD_TITLE",
    "REDRAWN",
    "RUN_INVALID",
    "SHORT_CAUTION",
    "STUDY_TITLE",
    "ForbiddenWord",
    "OutcomeWord",
    "Reason",
    "lint",
    "sentence_of",
]

RECORD_TITLE = "Recompression record"
STUDY_TITLE = "Transform study"
RUN_INVALID = "RUN INVALID: controls not held"
REDRAWN = "REDRAWN from the record, without images"
NO_LIMITS = "no limits declared"
NO_BOUND = "no bound: not a random sample"
DELIVERED_COPIES = "delivered copies"
"""Name under which the copies that an archive returned stand among the candidates."""
ON_REFERENCE = "on the reference frame of the series"
"""Ends the note that one setting for a series did not meet the ratio where it was sought."""

ANALYSIS_CODEC = "analysis codec, not an archive encoder"

SHORT_CAUTION = (
    "Numerical differences only; not a medical device. Whether an image may be used is decided under local law and "
    "guidance by the licensed clinicians responsible."
)


class OutcomeWord(enum.StrEnum):
    """A limit held against values. Three words, none of them a verdict on an image."""

    WITHIN = "within declared limits"
    OUTSIDE = "outside declared limits"
    NOT_EVALUATED = "not evaluated"


CAUTIONS: tuple[str, ...] = (
    "This record describes numerical differences between images before and after recompression. It does not say "
    "whether any image is fit for diagnosis, treatment or any other clinical use. It is not a medical device and "
    "not for decisions on an individual patient.",
    "Whether irreversible compression may be used, for which examinations and to what degree, is decided under the "
    "law and guidance that apply locally by the licensed clinicians responsible, with advice from a medical "
    "physicist where required.",
    "Limits shown were declared by the user. Staying within them is not evidence of clinical acceptability. A limit"
    " that the over-compressed control also meets tells nothing.",
    "Results apply to the images, encoder, version and settings listed, and reach beyond them only as far as the "
    "sample was drawn at random. An archive product may encode differently; check the images it delivers.",
    "Small or low-contrast findings can be altered while average figures stay favourable. See the worst places and "
    "the region tables.",
    "Irreversible compression cannot be undone. Keep the originals until the decision is final and verified.",
    "Only pixels were examined: not headers, references to new instance UIDs, the lossy mark in viewers, derived "
    "views, registration, or the comparison with earlier images.",
    "The seal shows a change only against a hash kept elsewhere; it is neither a signature nor an electronic seal "
    "in law. Pseudonymised is not anonymous.",
)
"""Cautions 1 to 8, which always stand."""

CAUTIONS_WHEN: MappingProxyType[str, str] = MappingProxyType(
    {
        "mammography": "Mammography is among the images: several jurisdictions forbid irreversible compression of it.",
        "radiotherapy": "CT is among the images: where it serves radiotherapy planning, dose depends on its values.",
        "quantification": "PET or NM images are among the images: quantities are read from their values.",
        "density": "Bone density, calcium or lung density may be read from these images: small shifts of value matter.",
        "ai_or_cad": "These images may be the input of AI or CAD, whose response to recompression was not examined.",
        "paediatric": "Paediatric images are among the images: structures are smaller and doses lower.",
        "already_lossy": "Some sources were already lossy: figures show only the loss added to them.",
        "burned_in_text": "Some images may carry burned-in text: its legibility was not examined.",
        "few_patients": "Fewer patients were assessed than the claim needs.",
        "empty_stratum": "A group of like images that the plan names holds no image.",
        "many_limits": "Many limits were held against many candidates at once: some fall on either side by chance.",
        "controls": "Controls were not held: no figure of this run may be relied on.",
    }
)
"""Caution 9, one sentence for each case in which it applies."""


@dataclass(frozen=True, slots=True)
class Reason:
    """Why an input was left out."""

    status: Literal["excluded", "refused"]
    """Excluded: by rule no subject. Refused: its pixels would be read on a doubtful path."""
    sentence: str


REASONS: MappingProxyType[str, Reason] = MappingProxyType(
    {
        # by rule
        "not-dicom": Reason("excluded", "not a DICOM file"),
        "no-pixels": Reason("excluded", "holds no pixel data"),
        "not-an-image": Reason(
            "excluded", "a report, presentation state, segmentation, plan or other non-image object"
        ),
        "localizer": Reason("excluded", "a localizer; assessed only when asked for"),
        "secondary-capture": Reason("excluded", "a secondary capture; assessed only when asked for"),
        "dose-page": Reason("excluded", "a dose report or other page of text"),
        "palette": Reason("excluded", "palette colour: samples are indices, which no irreversible codec may touch"),
        "already-lossy": Reason("excluded", "already lossy; assessed only when second generation is asked for"),
        "video": Reason("excluded", "a video stream"),
        "duplicate": Reason("excluded", "the same instance as an input already counted"),
        "dicomdir": Reason("excluded", "a directory record; the files it lists are counted themselves"),
        "no-original": Reason("excluded", "a delivered copy that fits no original, by its header"),
        "not-selected": Reason("excluded", "outside the scope that the plan declares"),
        # doubtful
        "unreadable": Reason("refused", "cannot be read as DICOM"),
        "truncated": Reason("refused", "pixel data is shorter than the header declares"),
        "length": Reason("refused", "pixel data is of another length than the header declares"),
        "header": Reason("refused", "a header value that the pixel path needs is missing or malformed"),
        "syntax": Reason("refused", "a transfer syntax that no decoder here reads"),
        "decode": Reason("refused", "the code stream cannot be decoded"),
        "bits": Reason("refused", "more than 16 bits stored, or bits that contradict each other"),
        "high-bits": Reason("refused", "bits above the stored ones hold values that are neither sign nor overlay"),
        "sign": Reason("refused", "the sign declared and the sign in the code stream contradict each other"),
        "range": Reason("refused", "sample values lie outside the range that the header declares"),
        "photometric": Reason("refused", "a photometric interpretation that is not handled"),
        "rescale": Reason("refused", "a rescale slope of zero, or one that is not a number"),
        "frames": Reason("refused", "the number of frames declared and found differ"),
        "too-large": Reason("refused", "too large to be taken in whole"),
        "archive-path": Reason("refused", "an archive member that points outside its archive"),
        "archive-bomb": Reason("refused", "an archive member that inflates beyond measure"),
        "link-loop": Reason("refused", "a symbolic link that leads back into a folder already entered"),
        "original-refused": Reason("refused", "a delivered copy whose original was refused"),
        "delivered-differs": Reason("refused", "a delivered copy of another size, unit or kind than its original"),
        "conflict": Reason("refused", "two inputs claim the same instance with different content"),
        "worker-lost": Reason("refused", "the process that assessed it died twice"),
        "internal": Reason("refused", "an internal error while it was assessed"),
    }
)


def sentence_of(reason: str) -> str:
    """Sentence of a reason code; an unknown code is shown as it is."""
    known = REASONS.get(reason)
    return known.sentence if known else reason


@dataclass(frozen=True, slots=True)
class ForbiddenWord:
    """A place where a text uses a word that no output may hold."""

    word: str
    position: int


FORBIDDEN: tuple[re.Pattern[str], ...] = tuple(
    re.compile(pattern, re.IGNORECASE)
    for pattern in (
        r"\bsafe(?:ly|ty|r|st)?\b",
        r"\bun?acceptabl[ey]\b|\bacceptabl[ey]\b",
        r"\bapproved?\b|\bapproval\b",
        r"\bdiagnostic(?:ally)?[ -](?:quality|lossless|acceptable)\b",
        r"\bvisually[ -]lossless\b|\bperceptually[ -]lossless\b",
        r"\bno clinical impact\b|\bclinically (?:insignificant|irrelevant|equivalent)\b",
        r"\bcompliant\b|\bcompliance\b",
        r"\bvalidated\b|\bcertified\b|\bcertificate\b",
        r"\brecommended ratios?\b",
        r"\b(?:pass(?:es|ed)?|fail(?:s|ed|ure)?)\b(?![^.]*\bdeclared limits\b)",
        r"\bquality (?:is |was )?improved\b|\bimproved quality\b",
        "[\u2713\u2714\u2705\u2717\u2718\u274c\u274e]",
    )
)
"""What no output may say. The program's own name is one word and matches none of these."""


def lint(text: str) -> Iterator[ForbiddenWord]:
    """Yield each forbidden word in a text that a user may come to read."""
    for pattern in FORBIDDEN:
        for match in pattern.finditer(text):
            yield ForbiddenWord(match.group(0), match.start())
