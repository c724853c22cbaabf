"""From an instance to its frames, one at a time; a doubtful pixel path is refused with its reason."""

from __future__ import annotations

import dataclasses
from types import TracebackType
from typing import BinaryIO

from safecheck.dicom.display import read_displays
from safecheck.dicom.frame_bytes import FrameBytes, locate_frames
from safecheck.dicom.frame_pixels import FramePixels, check_syntax, read_frame_pixels, second_frame_pixels
from safecheck.dicom.functional_groups import FunctionalGroups
from safecheck.dicom.geometry import Place, read_place
from safecheck.dicom.instance import Instance
from safecheck.dicom.modality import LUMA_UNIT, Modality, read_modality
from safecheck.dicom.opened import OpenedFile, open_file
from safecheck.dicom.padding import read_padding
from safecheck.dicom.pixel_header import PixelHeader, read_pixel_header
from safecheck.dicom.source import open_source
from safecheck.dicom.stored_bits import bits_needed
from safecheck.errors import InputRefused
from safecheck.frames import Frame, FrameKey, Origin, Raster, Rescale, Samples

__all__ = ["InstanceReader", "open_instance"]


def open_instance(instance: Instance) -> InstanceReader:
    """Open an instance and check all that can be checked before a frame is decoded.

    Parameters
    ----------
    instance
        As intake found it.

    Returns
    -------
    InstanceReader
        A context manager; it keeps the file open and no frame in memory.

    Raises
    ------
    InputRefused
        With a reason code of `safecheck.wording.REASONS`.
    """
    stream = open_source(instance.source)
    try:
        return InstanceReader(instance, stream)
    except BaseException:
        stream.close()
        raise


class InstanceReader:
    """Frames of one open instance.

    Parameters
    ----------
    instance
        As intake found it.
    stream
        Its bytes, seekable; closed with the reader.
    """

    def __init__(self, instance: Instance, stream: BinaryIO) -> None:
        self._instance = instance
        self._stream = stream
        self._opened: OpenedFile = open_file(stream)
        self._header: PixelHeader = read_pixel_header(self._opened.dataset)
        check_syntax(self._opened.syntax, self._header)
        self._bytes: FrameBytes = locate_frames(self._opened, self._header)
        self._groups = FunctionalGroups(self._opened.dataset, self._header.frames)
        self._capture = "Secondary Capture" in instance.object_class

    @property
    def header(self) -> PixelHeader:
        """What the header declares of the samples."""
        return self._header

    @property
    def frames(self) -> int:
        """Number of frames, declared and found."""
        return self._header.frames

    def __enter__(self) -> InstanceReader:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        self._stream.close()
        self._opened.stream.close()

    def frame(self, number: int) -> Frame:
        """Read one frame.

        Parameters
        ----------
        number
            From 1, as DICOM counts.

        Returns
        -------
        Frame
            Its `origin.notes` say what was set right.

        Raises
        ------
        InputRefused
            With a reason code of `safecheck.wording.REASONS`.
        """
        index = self._index(number)
        opened, header = self._opened, self._header
        pixels = read_frame_pixels(self._bytes.read(index), opened.syntax, header, little_endian=opened.little_endian)
        padding = read_padding(opened.dataset, header)
        modality = self._modality(index)
        displays, display_notes = read_displays(
            opened.dataset, self._groups, index, header, modality.transform, little_endian=opened.little_endian
        )
        place = read_place(opened.dataset, self._groups, index, self._instance.frame_of_reference)
        notes = (*opened.notes, *self._bytes.notes, *pixels.notes, *padding.notes, *modality.notes, *display_notes)
        notes = (*notes, *place.notes)
        return Frame(
            key=self._key(number),
            origin=self._origin(pixels, place, notes),
            raster=Raster(pixels.samples, header.format, padding.mask(pixels.samples)),
            bits_used=bits_needed(pixels.samples),
            unit=modality.unit,
            modality_transform=modality.transform,
            spacing_mm=place.spacing_mm,
            geometry=place.geometry,
            padding_range=padding.range,
            displays=displays,
        )

    def second_opinion(self, number: int) -> Samples | None:
        """Stored values of a frame by the second decoder of its syntax; None where there is none.

        Equal to `frame(number).raster.samples` for reversible code streams.

        Raises
        ------
        InputRefused
            As `frame`.
        """
        return second_frame_pixels(self._bytes.read(self._index(number)), self._opened.syntax, self._header)

    def _index(self, number: int) -> int:
        if not 1 <= number <= self.frames:
            raise InputRefused("frames", f"frame {number} of {self.frames} was asked for")
        return number - 1

    def _modality(self, index: int) -> Modality:
        if self._header.channels == 3:
            return Modality(Rescale(), LUMA_UNIT)
        return read_modality(
            self._opened.dataset,
            self._groups,
            index,
            acquisition=self._instance.origin.modality,
            capture=self._capture,
            signed=self._header.signed,
            little_endian=self._opened.little_endian,
        )

    def _key(self, number: int) -> FrameKey:
        known = self._instance
        return FrameKey(
            patient=known.patient,
            study=known.study,
            series=known.series,
            instance=known.instance,
            frame=number,
            series_number=known.series_number,
            instance_number=known.instance_number,
        )

    def _origin(self, pixels: FramePixels, place: Place, notes: tuple[str, ...]) -> Origin:
        known = self._instance.origin
        own_thickness = place.slice_thickness_class if self._groups.enhanced else ""
        return dataclasses.replace(
            known,
            source_bytes=round(pixels.source_bytes * self._opened.packed_share),
            slice_position_mm=place.slice_position_mm,
            slice_thickness_class=own_thickness or known.slice_thickness_class,
            notes=tuple(dict.fromkeys((*known.notes, *notes))),
        )
