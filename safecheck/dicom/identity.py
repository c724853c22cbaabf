"""What a pseudonym stands for, read again from the images: for the user's own screen, and for nothing else."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path

from pydicom.datadict import dictionary_description

from safecheck.dicom.elements import text
from safecheck.dicom.facts import Facts
from safecheck.dicom.header import read_header
from safecheck.dicom.instance import Instance, Source
from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.rules import Include
from safecheck.dicom.source import open_source
from safecheck.errors import InputExcluded, InputRefused

__all__ = ["identities"]

_TELLS = (
    ("PatientName", "PatientID"),
    ("StudyDate", "AccessionNumber", "StudyInstanceUID"),
    ("SeriesNumber", "SeriesInstanceUID"),
    ("InstanceNumber", "SOPInstanceUID"),
)
"""What a pseudonym of a patient, study, series and instance stands for; each is told with all above it."""


def identities(pseudonym: str, paths: Sequence[Path], pseudonyms: Pseudonyms) -> Iterator[str]:
    """Yield, for each image that the pseudonym names, one line of what its header says.

    Parameters
    ----------
    pseudonym
        Of a patient, study, series, instance or input.
    paths
        Images to look through, as for a run.
    pseudonyms
        Names under the site key with which the pseudonym was made.
    """
    every = Include(localizers=True, secondary_captures=True, lossy_sources=True)
    found = gather(paths, pseudonyms=pseudonyms, include=every)
    known: list[tuple[Source, str, Instance | Facts]] = [(each.source, each.input, each) for each in found.instances]
    known += [(each.source, each.input, each.facts) for each in found.left_out if each.facts]
    for source, name, facts in known:
        names = [facts.patient, facts.study, facts.series, facts.instance]
        if pseudonym == name:
            yield f"{_header_lines(source, 4)}; file {source.path}{' ' + source.member if source.member else ''}"
        elif pseudonym in names:
            yield _header_lines(source, names.index(pseudonym) + 1)


def _header_lines(source: Source, kinds: int) -> str:
    """What the header says of the first kinds."""
    try:
        with open_source(source) as stream, quiet_library():
            dataset = read_header(stream).dataset
            told = (keyword for keywords in _TELLS[:kinds] for keyword in keywords)
            parts = [f"{dictionary_description(keyword)}: {text(dataset, keyword)}" for keyword in told]
    except (InputExcluded, InputRefused):
        return "the header cannot be read again"
    return "; ".join(parts)
