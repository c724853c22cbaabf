"""Loss before this assessment: declared in the header, implied by the syntax, or found in the code stream.

Whatever speaks for a loss counts; the flag (0028,2110) alone never clears a file, since it is often absent or wrong.
"""

from __future__ import annotations

from collections.abc import Iterator

from pydicom.dataset import Dataset

from safecheck.dicom.elements import readable_items, text, words
from safecheck.dicom.header import Header
from safecheck.dicom.stream_loss import Finding, Verdict, look_into
from safecheck.dicom.syntaxes import Loss
from safecheck.dicom.terms import decimal, loss_method
from safecheck.frames import LossHistory

__all__ = ["history_of"]

_CODE_LOSSY = "113040"
_CODE_FROM_LOSSY = "121330"


def history_of(header: Header) -> LossHistory:
    """Gather the loss history of a file.

    Parameters
    ----------
    header
        As read; the looks at its code streams included.

    Returns
    -------
    LossHistory
        With evidence for either answer. A code stream whose kind cannot be told counts as lossy.
    """
    flag = text(header.dataset, "LossyImageCompression")
    ratios = tuple(decimal(each) for each in words(header.dataset, "LossyImageCompressionRatio"))
    methods = tuple(loss_method(each) for each in words(header.dataset, "LossyImageCompressionMethod"))
    finding = _finding(header)
    against = [*_declared(header, flag, ratios, methods), *_implied(header), *_found(finding)]
    if against:
        return LossHistory(True, _flag_term(flag), ratios, methods, tuple(against))
    return LossHistory(False, _flag_term(flag), ratios, methods, tuple(_cleared(header, flag, finding)))


def _flag_term(flag: str) -> str:
    return flag if flag in ("", "00", "01") else "other"


def _declared(header: Header, flag: str, ratios: tuple[str, ...], methods: tuple[str, ...]) -> Iterator[str]:
    """What the header says for a loss."""
    if flag == "01":
        yield "the header declares a lossy step (0028,2110)"
    elif flag not in ("", "00"):
        yield "the lossy flag (0028,2110) holds neither 00 nor 01"
    if flag != "01" and any(_speaks_for_loss(each) for each in ratios):
        yield "a lossy ratio is recorded (0028,2112)"
    if flag != "01" and any(methods):
        yield "a lossy method is recorded (0028,2114)"
    if any(text(each, "CodeValue") == _CODE_LOSSY for each in readable_items(header.dataset, "DerivationCodeSequence")):
        yield "lossy compression is among the derivation codes"
    if any(_came_from_lossy(each) for each in readable_items(header.dataset, "SourceImageSequence")):
        yield "a source image is named as a lossy predecessor"


def _speaks_for_loss(ratio: str) -> bool:
    try:
        return float(ratio) > 1
    except ValueError:
        return False


def _came_from_lossy(source: Dataset) -> bool:
    purposes = readable_items(source, "PurposeOfReferenceCodeSequence")
    return any(text(each, "CodeValue") == _CODE_FROM_LOSSY for each in purposes)


def _implied(header: Header) -> Iterator[str]:
    if header.syntax.loss is Loss.IRREVERSIBLE and header.pixels:
        yield "the transfer syntax is lossy"


def _finding(header: Header) -> Finding | None:
    """Gravest finding over the fragments."""
    looks = header.pixels.looks if header.pixels else ()
    found = [finding for look in looks if (finding := look_into(header.syntax.coding, look))]
    if not found and header.pixels and header.syntax.loss is Loss.EITHER:
        return Finding(Verdict.UNTOLD, "no code stream was found to look into")
    return max(found, default=None)


def _found(finding: Finding | None) -> Iterator[str]:
    if finding and finding.verdict >= Verdict.UNTOLD:
        yield finding.evidence


def _cleared(header: Header, flag: str, finding: Finding | None) -> Iterator[str]:
    """Why it does not count as lossy."""
    if header.syntax.loss is Loss.REVERSIBLE:
        yield "the transfer syntax is reversible"
    if finding:
        yield finding.evidence
    yield "the header declares no lossy step (0028,2110)" if flag == "00" else "the header says nothing of loss"
