"""Whether a patient was a minor: the one thing said of an age, and neither age nor date leaves the room."""

from __future__ import annotations

import re

from pydicom.dataset import Dataset

from safecheck.dicom.elements import text

__all__ = ["under_18"]

_EXAMINED = ("StudyDate", "SeriesDate", "AcquisitionDate", "ContentDate")
_AGE_TEXT = re.compile(r"(\d{1,3})([DWMY])")
_DATE_TEXT = re.compile(r"(\d{4})\.?(\d{2})\.?(\d{2})")
# 18 years in each unit of an age string (PS3.5 6.2, AS).
_COMING_OF_AGE = {"D": 6574, "W": 939, "M": 216, "Y": 18}


def under_18(dataset: Dataset) -> bool:
    """Whether Patient's Age, or else birth date and date of the study, give an age under 18 years."""
    if age := _AGE_TEXT.fullmatch(text(dataset, "PatientAge")):
        return int(age[1]) < _COMING_OF_AGE[age[2]]
    birth = _date(dataset, "PatientBirthDate")
    examined = next((date for keyword in _EXAMINED if (date := _date(dataset, keyword))), None)
    if birth is None or examined is None:
        return False
    return birth <= examined < (birth[0] + 18, birth[1], birth[2])


def _date(dataset: Dataset, keyword: str) -> tuple[int, int, int] | None:
    """(year, month, day); None where absent or malformed."""
    found = _DATE_TEXT.fullmatch(text(dataset, keyword))
    return (int(found[1]), int(found[2]), int(found[3])) if found else None
