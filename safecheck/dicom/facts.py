"""What is known of an input, in the words and numbers that its row may carry."""

from __future__ import annotations

from dataclasses import dataclass

from pydicom.dataset import Dataset

from safecheck.dicom import terms
from safecheck.dicom.elements import readable_items, text, whole, whole_number, words
from safecheck.dicom.header import Header
from safecheck.dicom.history import history_of
from safecheck.dicom.origin import origin_of
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.errors import InputRefused
from safecheck.frames import Origin

__all__ = ["Facts", "facts_of"]


@dataclass(frozen=True, slots=True, kw_only=True)
class Facts:
    """Header facts under pseudonyms; a number that is missing or malformed is None."""

    patient: str
    """Of the study where the file names no patient."""
    study: str
    """Of the input where the file names no study."""
    series: str
    """Of the study where the file names no series."""
    instance: str
    """Of the input where the file names no instance."""
    series_number: int | None
    instance_number: int | None
    object_class: str
    frames: int | None
    """1 where the header does not say."""
    rows: int | None
    columns: int | None
    bits_allocated: int | None
    bits_stored: int | None
    photometric: str
    derived: bool | None
    """Image Type begins with DERIVED; None without an Image Type."""
    pixel_bytes: int | None
    """None without pixel data."""
    origin: Origin
    frame_of_reference: str
    """Pseudonym, or '' where the file names none."""
    uid: str
    """Raw SOP Instance UID, for matching only: never written."""
    source_uids: tuple[str, ...]
    """Raw UIDs of the Source Image Sequence, for matching only: never written."""


def facts_of(header: Header, content: str, pseudonyms: Pseudonyms) -> Facts:
    """Facts of a header.

    Parameters
    ----------
    header
        As read.
    content
        Pseudonym of the input, which stands in where the file lacks an identity.
    pseudonyms
        Names under the site key.
    """
    dataset = header.dataset
    uid = text(dataset, "SOPInstanceUID")
    study_uid, series_uid = text(dataset, "StudyInstanceUID"), text(dataset, "SeriesInstanceUID")
    patient = text(dataset, "PatientID")
    study = pseudonyms.name("study", study_uid) if study_uid else content
    image_type = words(dataset, "ImageType")
    object_class = terms.object_class(header.object_uid)
    pixel_bytes = header.pixels.size_bytes if header.pixels else None
    reference = text(dataset, "FrameOfReferenceUID")
    return Facts(
        patient=pseudonyms.name("patient", patient) if patient else study,
        study=study,
        series=pseudonyms.name("series", series_uid) if series_uid else study,
        instance=pseudonyms.name("instance", uid) if uid else content,
        series_number=whole(dataset, "SeriesNumber"),
        instance_number=whole(dataset, "InstanceNumber"),
        object_class=object_class,
        frames=_frames(dataset),
        rows=whole(dataset, "Rows"),
        columns=whole(dataset, "Columns"),
        bits_allocated=whole(dataset, "BitsAllocated"),
        bits_stored=whole(dataset, "BitsStored"),
        photometric=terms.photometric(text(dataset, "PhotometricInterpretation")),
        derived=image_type[0].upper() == "DERIVED" if image_type else None,
        pixel_bytes=pixel_bytes,
        origin=origin_of(header, history_of(header), pixel_bytes or 0, pseudonyms, object_class),
        frame_of_reference=pseudonyms.name("frame", reference) if reference else "",
        uid=uid,
        source_uids=_source_uids(dataset),
    )


def _frames(dataset: Dataset) -> int | None:
    """Number of frames; an empty element counts as absent, a malformed one as unknown."""
    try:
        return whole_number(dataset, "NumberOfFrames", missing=1)
    except InputRefused:
        return None


def _source_uids(dataset: Dataset) -> tuple[str, ...]:
    found = (text(each, "ReferencedSOPInstanceUID") for each in readable_items(dataset, "SourceImageSequence"))
    return tuple(uid for uid in found if uid)
