"""A study that carries a known string wherever an identifier may hide, to find out where it leaks to."""

from __future__ import annotations

import zlib
from dataclasses import dataclass
from pathlib import Path

from pydicom import Dataset, dcmread
from pydicom.datadict import dictionary_VR
from pydicom.fileset import FileSet
from pydicom.uid import UID

from synthetic_studies.ct import ct_body
from synthetic_studies.headers import write_file
from synthetic_studies.truth import Truth

__all__ = ["CanaryTruth", "canary_study", "digits_of"]

_KEYWORDS = """
AccessionNumber StudyID StationName PerformedStationName PerformedProcedureStepID PerformedLocation
RequestedProcedureID PatientTelephoneNumbers Occupation EthnicGroup DetectorID StationAETitle RetrieveAETitle
PerformedStationAETitle PatientID OtherPatientIDs IssuerOfPatientID PatientAddress InstitutionName
InstitutionalDepartmentName StudyDescription SeriesDescription ProtocolName DeviceSerialNumber
PerformedProcedureStepDescription RequestedProcedureDescription PatientReligiousPreference MedicalAlerts
Allergies CountryOfResidence RegionOfResidence MedicalRecordLocator MilitaryRank BranchOfService AdmissionID
RequestingService CurrentPatientLocation PatientInstitutionResidence ReasonForStudy
AdmittingDiagnosesDescription GantryID ServiceEpisodeID DeidentificationMethod Manufacturer
ManufacturerModelName ContrastBolusAgent SoftwareVersions SpecialNeeds ResponsibleOrganization
ClinicalTrialSponsorName ClinicalTrialSubjectID ClinicalTrialProtocolID ClinicalTrialSiteName
ReasonForTheRequestedProcedure PlacerOrderNumberImagingServiceRequest FillerOrderNumberImagingServiceRequest
ConvolutionKernel InstitutionAddress ReferringPhysicianAddress PatientComments AdditionalPatientHistory
ImageComments StudyComments DerivationDescription AcquisitionDeviceProcessingDescription VisitComments
CommentsOnThePerformedProcedureStep PatientTelecomInformation IdentifyingComments TextComments
ImagingServiceRequestComments PatientName OtherPatientNames PatientBirthName PatientMotherBirthName
ReferringPhysicianName PerformingPhysicianName OperatorsName PhysiciansOfRecord NameOfPhysiciansReadingStudy
RequestingPhysician ResponsiblePerson ConsultingPhysicianName PatientBirthDate StudyDate SeriesDate
AcquisitionDate ContentDate InstanceCreationDate PatientBirthTime StudyTime SeriesTime AcquisitionTime
ContentTime InstanceCreationTime AcquisitionDateTime StudyInstanceUID SeriesInstanceUID FrameOfReferenceUID
DeviceUID InstanceCreatorUID IrradiationEventUID BodyPartExamined
""".split()  # noqa: SIM905 - a list of ninety quoted words is harder to read
DATE, TIME = "19130317", "031713.171913"
_SLOPE_MARK = "7777777777777777"


@dataclass(frozen=True, slots=True)
class CanaryTruth:
    """What was planted, and where."""

    study: Truth
    """The readable series."""
    broken: tuple[Path, ...]
    """Files that no reader can take whole: cut short, or with words where a number belongs."""
    needles: tuple[str, ...]
    """Strings none of which may turn up in any output: words, digits, date, time."""
    planted: tuple[str, ...]
    """Where they stand: keywords, nested and private elements, File Meta, preamble, file and folder names."""
    directory: Path | None
    """A DICOMDIR that lists copies of the series, if asked for."""


def digits_of(canary: str) -> str:
    """Eighteen digits that follow from a canary and stand for it in UIDs."""
    data = canary.encode()
    return f"9{zlib.crc32(data):010d}{zlib.adler32(data) % 10**7:07d}"


def canary_study(folder: Path, canary: str, *, seed: int = 1, slices: int = 2, directory: bool = False) -> CanaryTruth:
    """Write a small CT series with a canary in every place of an identifier, and two broken files beside it.

    Parameters
    ----------
    folder
        Made when missing; the files lie in subfolders whose names hold the canary.
    canary
        6 to 16 capitals and digits.
    seed, slices
        Of the series, 96x96.
    directory
        Also write a DICOMDIR with copies of the series.

    Raises
    ------
    ValueError
        For a canary that not every kind of element could hold.
    """
    if not (6 <= len(canary) <= 16 and canary.isascii() and canary.isalnum() and canary.upper() == canary):
        raise ValueError("a canary is 6 to 16 capitals and digits")
    place = folder / f"{canary}_ward" / f"study {canary}"
    clean = ct_body(place, seed=seed, rows=96, columns=96, slices=slices)
    files, uids, planted = [], [], []
    for index, source in enumerate(clean.files):
        header = dcmread(source)
        source.unlink()
        planted = _plant(header, canary, index + 1)
        path = place / f"{canary}_{index + 1:04d}.dcm"
        _write_planted(path, header, canary)
        files.append(path)
        uids.append(str(header.SOPInstanceUID))
    digits = digits_of(canary)
    study = Truth(
        kind="canary_study",
        seed=seed,
        files=tuple(files),
        patient_id=canary,
        study_uid=_uid(digits, "StudyInstanceUID"),
        series_uid=_uid(digits, "SeriesInstanceUID"),
        instance_uids=tuple(uids),
        grid=clean.grid,
        unit=clean.unit,
        slice_positions_mm=clean.slice_positions_mm,
        padding_value=clean.padding_value,
    )
    return CanaryTruth(
        study=study,
        broken=_write_broken(place, files[0], canary),
        needles=(canary, canary.lower(), canary.title(), digits, DATE, "1913-03-17", TIME),
        planted=(*planted, "preamble", "SourceApplicationEntityTitle", "file name", "folder name"),
        directory=_write_directory(folder / f"{canary}_disc", files, digits) if directory else None,
    )


def _uid(digits: str, keyword: str) -> str:
    return f"2.25.{digits}{zlib.crc32(keyword.encode())}"


def _value(keyword: str, canary: str) -> str:
    """Value for one element by its value representation."""
    kind = dictionary_VR(keyword)
    if kind == "UI":
        return _uid(digits_of(canary), keyword)
    fixed = {"DA": DATE, "TM": TIME, "DT": DATE + TIME, "PN": f"{canary}^{canary.title()}"}
    return fixed.get(kind, canary)


def _plant(header: Dataset, canary: str, instance: int) -> list[str]:
    """Put the canary everywhere in one header; name the places."""
    for keyword in _KEYWORDS:
        setattr(header, keyword, _value(keyword, canary))
    header.SOPInstanceUID = f"{_uid(digits_of(canary), 'SOPInstanceUID')}{instance}"
    nested = ("RequestAttributesSequence", "OtherPatientIDsSequence", "OriginalAttributesSequence")
    for name in nested:
        item = Dataset()
        item.PatientID = item.RequestedProcedureDescription = item.ScheduledProcedureStepID = canary
        item.PatientName = f"{canary}^{canary.title()}"
        item.ReferencedSOPInstanceUID = _uid(digits_of(canary), name)
        setattr(header, name, [item])
    block = header.private_block(0x0009, f"{canary} PRIVATE", create=True)
    block.add_new(0x01, "LO", canary)
    block.add_new(0x02, "UN", canary.encode() + b" " * (len(canary) % 2))
    item = Dataset()
    item.PatientID = canary
    block.add_new(0x03, "SQ", [item])
    private = [f"private (0009,10{element:02d})" for element in (1, 2, 3)]
    return [*_KEYWORDS, "SOPInstanceUID", *nested, "private creator", *private]


def _write_planted(path: Path, header: Dataset, canary: str) -> None:
    """Write, with the canary also in the preamble and the File Meta Information."""
    write_file(path, header)
    again = dcmread(path)
    again.preamble = canary.encode().ljust(128, b"\0")
    again.file_meta.SourceApplicationEntityTitle = canary
    again.save_as(path, enforce_file_format=True)


def _write_broken(place: Path, whole: Path, canary: str) -> tuple[Path, ...]:
    """One file cut short, and one with the canary where the rescale slope belongs."""
    data = whole.read_bytes()
    cut = place / f"{canary}_cut.dcm"
    cut.write_bytes(data[: len(data) * 3 // 4])
    header = dcmread(whole)
    header.SOPInstanceUID = _uid(digits_of(canary), "broken")
    header.RescaleSlope = _SLOPE_MARK
    wrong = place / f"{canary}_wrong.dcm"
    write_file(wrong, header)
    slope = canary.ljust(len(_SLOPE_MARK)).encode()
    wrong.write_bytes(wrong.read_bytes().replace(_SLOPE_MARK.encode(), slope))
    return cut, wrong


def _write_directory(root: Path, files: list[Path], digits: str) -> Path:
    """DICOMDIR over copies of the files."""
    listing = FileSet()
    listing.UID = UID(_uid(digits, "file-set"))
    for path in files:
        listing.add(path)
    listing.write(root)
    return root / "DICOMDIR"
