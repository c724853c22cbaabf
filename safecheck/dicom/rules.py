"""What is by rule no subject of an assessment, as one ordered table: the first rule that applies gives the reason.

docs/exclusions.md holds the same table, written by `as_markdown`.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

from safecheck.dicom.elements import text, words
from safecheck.dicom.facts import Facts
from safecheck.dicom.header import Header
from safecheck.dicom.opened import DIRECTORY_CLASS
from safecheck.dicom.syntaxes import Coding
from safecheck.wording import sentence_of

__all__ = ["RULES", "Include", "Rule", "as_markdown", "excluded_by"]

_STORAGE = "1.2.840.10008.5.1.4.1.1."
_NOT_IMAGES = tuple(
    # Families of PS3.4 Annex B and GG that hold no image: by the beginning of what follows the storage root.
    _STORAGE + branch
    for branch in (
        "4.2",
        "8",
        "9",
        "10",
        "11",
        "66",
        "67",
        "68",
        "77.1.5.3",
        "78",
        "79",
        "80",
        "88",
        "90",
        "91",
        "104",
        "129",
        "131",
        "200",
        "201",
        "501.3",
    )
) + tuple(f"1.2.840.10008.5.1.4.{branch}" for branch in ("34", "38", "39", "43", "44", "45"))
_RADIOTHERAPY = _STORAGE + "481."
_RADIOTHERAPY_IMAGES = frozenset(_RADIOTHERAPY + number for number in ("1", "23", "24"))
_SECONDARY_CAPTURE = _STORAGE + "7"
# Where the class is private or missing, the modality speaks.
_NOT_IMAGE_TEXT = """
SR PR KO SEG RTSTRUCT RTPLAN RTDOSE RTRECORD RTINTENT RTRAD RTSEGANN REG FID DOC PLAN RWV SMR AU ECG EPS HD RESP
EEG EMG EOG POS M3D STAIN TEXTUREMAP ASMT ANN CTPROTOCOL XAPROTOCOL
"""
_NOT_IMAGE_MODALITIES = frozenset(_NOT_IMAGE_TEXT.split())
_CROSS_SECTIONAL = frozenset(("CT", "MR", "PT", "NM"))

# Words in series descriptions, image types and conversion types that devices use; common practice, no source.
_LOCALIZER_WORDS = re.compile(r"\b(?:locali[sz]er|scouts?|topogram|scanogram|surview|3[ -]?pl(?:ane)? loc)\b", re.I)
_DOSE_WORDS = re.compile(
    r"\bdose[ _-]*(?:report|info|summary|page|record|sheet)\b|\bpatient protocol\b|\bprotocol page\b", re.I
)
_DOSE_TYPES = re.compile(r"CT_SOM\d PROT|DOSE[ _]?(?:INFO|REPORT)", re.I)
_SCREEN_TYPES = re.compile(r"SCREEN ?(?:SAVE|CAPTURE|SHOT)|SECONDARY CAPTURE", re.I)
_SCREEN_CONVERSIONS = frozenset(("WSD", "DV", "DRW", "SYN"))


@dataclass(frozen=True, slots=True)
class Include:
    """What is assessed only when asked for."""

    localizers: bool = False
    secondary_captures: bool = False
    lossy_sources: bool = False


@dataclass(frozen=True, slots=True)
class Rule:
    """One line of the table."""

    reason: str
    """Code of `safecheck.wording.REASONS`."""
    condition: str
    """What is looked at, in words."""
    asked_for: str
    """Field of `Include` that lifts the rule, or '' for none."""
    finds: Callable[[Header, Facts], str]
    """What was found, without identifiers; '' where the rule does not apply."""

    def applies(self, header: Header, facts: Facts, include: Include) -> str:
        """What was found, or '' where the rule does not apply or was lifted."""
        if self.asked_for and getattr(include, self.asked_for):
            return ""
        return self.finds(header, facts)


def _directory(header: Header, _: Facts) -> str:
    return "Media Storage Directory" if header.object_uid == DIRECTORY_CLASS else ""


def _branches_from(uid: str, roots: tuple[str, ...]) -> bool:
    return any(uid == root or uid.startswith(root + ".") for root in roots)


def _not_an_image(header: Header, facts: Facts) -> str:
    uid = header.object_uid
    if _branches_from(uid, _NOT_IMAGES) or (uid.startswith(_RADIOTHERAPY) and uid not in _RADIOTHERAPY_IMAGES):
        return facts.object_class
    known = facts.object_class and not facts.object_class.startswith("private")
    if not known and facts.origin.modality in _NOT_IMAGE_MODALITIES:
        return f"Modality {facts.origin.modality}"
    return ""


def _no_pixels(header: Header, facts: Facts) -> str:
    # Pixels that lie elsewhere (JPIP) are a matter of the syntax.
    if header.pixels or header.cut or header.syntax.coding is Coding.REFERENCED:
        return ""
    return facts.object_class or "no object class"


def _video(header: Header, _: Facts) -> str:
    return header.syntax.name if header.syntax.coding is Coding.VIDEO else ""


def _described(header: Header) -> str:
    return " ".join(text(header.dataset, each) for each in ("SeriesDescription", "ProtocolName", "ImageComments"))


def _types(header: Header) -> str:
    return "\\".join(words(header.dataset, "ImageType")[2:])


def _dose_page(header: Header, _: Facts) -> str:
    if _DOSE_TYPES.search(_types(header)):
        return "by Image Type"
    return "by the series' description" if _DOSE_WORDS.search(_described(header)) else ""


def _localizer(header: Header, facts: Facts) -> str:
    types = _types(header).upper().split("\\")
    if "LOCALIZER" in types or "SCOUT" in types:
        return "by Image Type"
    if facts.origin.modality in _CROSS_SECTIONAL and _LOCALIZER_WORDS.search(_described(header)):
        return "by the series' description"
    return ""


def _secondary_capture(header: Header, facts: Facts) -> str:
    if _branches_from(header.object_uid, (_SECONDARY_CAPTURE,)):
        modality = facts.origin.modality or "unknown"
        return f"by object class, Modality {modality}"
    if _SCREEN_TYPES.search(_types(header)):
        return "by Image Type"
    # Some scanners fill Conversion Type for images as acquired, which Image Type then calls primary.
    primary = "PRIMARY" in (each.upper() for each in words(header.dataset, "ImageType")[:2])
    converted = text(header.dataset, "ConversionType") in _SCREEN_CONVERSIONS
    return "by Conversion Type" if converted and not primary else ""


def _palette(_: Header, facts: Facts) -> str:
    return facts.photometric if facts.photometric == "PALETTE COLOR" else ""


def _already_lossy(_: Header, facts: Facts) -> str:
    return "; ".join(facts.origin.history.evidence) if facts.origin.history.lossy else ""


RULES: tuple[Rule, ...] = (
    Rule("dicomdir", "SOP Class is Media Storage Directory.", "", _directory),
    Rule(
        "not-an-image",
        "SOP Class of a structured report, key object selection, presentation state, segmentation, registration, "
        "radiotherapy object (radiotherapy images apart), waveform, encapsulated document, measurement, protocol or "
        "raw data; where the class is private or missing, a Modality of these.",
        "",
        _not_an_image,
    ),
    Rule("no-pixels", "No Pixel Data element, in a file that does not end within its header.", "", _no_pixels),
    Rule("video", "Transfer syntax of MPEG-2, AVC/H.264, HEVC/H.265 or SMPTE ST 2110.", "", _video),
    Rule(
        "dose-page",
        "Image Type from value 3 on, or the series' description, protocol name or comments, name a dose report or "
        "patient protocol page.",
        "",
        _dose_page,
    ),
    Rule(
        "localizer",
        "Image Type from value 3 on holds LOCALIZER or SCOUT; for CT, MR, PT and NM also a series' description, "
        "protocol name or comments that name a localizer, scout, topogram, scanogram or surview.",
        "localizers",
        _localizer,
    ),
    Rule(
        "secondary-capture",
        "SOP Class is one of Secondary Capture, whatever Modality says; Image Type from value 3 on names a screen "
        "save; or Conversion Type is WSD, DV, DRW or SYN and Image Type does not say PRIMARY.",
        "secondary_captures",
        _secondary_capture,
    ),
    Rule("palette", "Photometric Interpretation is PALETTE COLOR.", "", _palette),
    Rule(
        "already-lossy",
        "The header declares a lossy step (flag, ratio, method, derivation code, lossy predecessor), the transfer "
        "syntax is lossy, or the code stream is: NEAR above 0, 9/7 filter, cosine or XYB transform, dropped bits, or "
        "one that could not be told.",
        "lossy_sources",
        _already_lossy,
    ),
)
"""In the order in which they are tried."""


def excluded_by(header: Header, facts: Facts, include: Include) -> tuple[str, str] | None:
    """(reason code, what was found) by the first rule that applies; None where none does."""
    for rule in RULES:
        if detail := rule.applies(header, facts, include):
            return rule.reason, detail
    return None


def as_markdown() -> str:
    """Write the rules as the table of docs/exclusions.md."""
    lines = [
        "| order | reason | what it says | what is looked at | assessed when asked for by |",
        "| --- | --- | --- | --- | --- |",
    ]
    for number, rule in enumerate(RULES, start=1):
        asked = f"`{rule.asked_for}`" if rule.asked_for else "–"
        lines.append(f"| {number} | `{rule.reason}` | {sentence_of(rule.reason)} | {rule.condition} | {asked} |")
    return "\n".join(lines) + "\n"
