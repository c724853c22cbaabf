"""What a pseudonym stands for, read again from the images: for the user's own screen, and for nothing else."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from pathlib import Path

from safecheck.dicom.facts import Facts
from safecheck.dicom.header import read_header, text
from safecheck.dicom.instance import Instance, Source
from safecheck.dicom.intake import gather
from safecheck.dicom.pseudonyms import Pseudonyms
from safecheck.dicom.quiet import quiet_library
from safecheck.dicom.rules import Include
from safecheck.dicom.source import open_source
from safecheck.errors import InputExcluded, InputRefused

__all__ = ["identities"]

_TELLS = (
    ("patient", (("Patient's Name", 0x00100010), ("Patient ID", 0x00100020))),
    ("study", (("Study Date", 0x00080020), ("Accession Number", 0x00080050), ("Study Instance UID", 0x0020000D))),
    ("series", (("Series Number", 0x00200011), ("Series Instance UID", 0x0020000E))),
    ("instance", (("Instance Number", 0x00200013), ("SOP Instance UID", 0x00080018))),
)
"""What each kind of pseudonym stands for; a kind is told with all kinds above it."""


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
            parts = [f"{name}: {text(dataset, tag)}" for _, tells in _TELLS[:kinds] for name, tag in tells]
    except (InputExcluded, InputRefused):
        return "the header cannot be read again"
    return "; ".join(parts)
