"""What each reversible codec makes of the frames that carry the full controls, and how codecs carry samples."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from safecheck.record.candidates import CarriageEntry, ReversibleEntry
from safecheck.statistics.groups import Groups, Indices

__all__ = ["carriages", "reversible_codecs"]

_FORM = ("bits_stored", "signed", "code_precision", "sample_offset", "sample_scale", "clipped_on_reading")
"""Columns that say how samples of one form are carried."""


def reversible_codecs(groups: Groups) -> Iterator[ReversibleEntry]:
    """Yield an entry for each stratum and reversible codec, the smallest code per stored byte first."""
    reader = groups.reader
    codec_of, codecs = reader.codes("codec")
    stored = reader.numbers("rows") * reader.numbers("columns") * reader.numbers("channels")
    stored = stored * reader.numbers("bits_stored") / 8
    code, smallest = reader.numbers("code_bytes"), reader.numbers("lossless_bytes")
    for stratum, rows in groups.by_stratum(_exact_rows(groups)):
        entries = []
        for number in np.unique(codec_of[rows]):
            own = rows[codec_of[rows] == number]
            entries.append(
                ReversibleEntry(
                    stratum=stratum,
                    codec=codecs[number],
                    frames=len(own),
                    bits_stored_bytes=float(stored[own].sum()),
                    code_bytes=int(code[own].sum()),
                    ratio_bits_stored=float(stored[own].sum() / code[own].sum()),
                    smallest_bytes=None if np.isnan(smallest[own]).any() else int(smallest[own].sum()),
                )
            )
        yield from sorted(entries, key=lambda entry: (-entry.ratio_bits_stored, entry.codec))


def _exact_rows(groups: Groups) -> Indices:
    """Rows of reversible codecs on frames with the full controls; a lossy codec's exact form has a dial, and no place.

    The pipe's own control stands on every frame, so it is taken where another reversible codec stands beside it.
    """
    dial_of, dials = groups.reader.codes("dial")
    rows = groups.of_role("reversible")
    rows = rows[dial_of[rows] == (dials.index("") if "" in dials else -1)]
    instance_of, _ = groups.reader.codes("instance")
    number = groups.reader.numbers("frame").astype(np.int64)
    frame = instance_of[rows] * (int(number.max(initial=0)) + 1) + number[rows]
    pipe = np.isin(rows, groups.of_candidate("reversible"))
    return np.asarray(rows[np.isin(frame, frame[~pipe])], dtype=np.int64)


def carriages(groups: Groups) -> Iterator[CarriageEntry]:
    """Yield the forms of samples of which a code stream says another precision, or that were offset or scaled."""
    reader = groups.reader
    codec_of, codecs = reader.codes("codec")
    columns = np.stack([reader.numbers(name) for name in _FORM], axis=1)
    bits, _, precision, offset, scale, _ = columns.T
    # Without a code of our own, as for delivered copies, nothing is known.
    rows = np.flatnonzero(~np.isnan(precision) & ((precision != bits) | (offset != 0) | (scale != 1)))
    for number in np.unique(codec_of[rows]):
        forms, counts = np.unique(columns[rows[codec_of[rows] == number]], axis=0, return_counts=True)
        for form, count in zip(forms.tolist(), counts.tolist(), strict=True):
            yield CarriageEntry(
                codec=codecs[number],
                bits_stored=int(form[0]),
                signed=bool(form[1]),
                code_precision=int(form[2]),
                sample_offset=int(form[3]),
                sample_scale=form[4],
                clipped_on_reading=bool(form[5]),
                rows=count,
            )
