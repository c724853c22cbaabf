"""The ratio ledger: bytes before, on every basis, and after."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt

from safecheck.record.candidates import LedgerEntry, NeighbourEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.groups import Groups, Indices

__all__ = ["ledger"]


def ledger(groups: Groups, candidates: tuple[str, ...]) -> Iterator[LedgerEntry]:
    """Yield totals and spreads of every candidate in every stratum."""
    columns = _columns(groups.reader)
    codec_of, codecs = groups.reader.codes("lossless_codec")
    for candidate in candidates:
        for stratum, rows in groups.by_stratum(groups.of_candidate(candidate)):
            counts = {codecs[code]: int((codec_of[rows] == code).sum()) for code in np.unique(codec_of[rows])}
            counts.pop("", None)
            beside = dict(groups.by_stratum(groups.neighbours_of(candidate)))
            neighbour = _neighbour(beside[stratum], columns) if stratum in beside else None
            yield _entry(candidate, stratum, rows, columns, counts).model_copy(update={"neighbour": neighbour})


def _columns(reader: TableReader) -> dict[str, npt.NDArray[np.float64]]:
    """Sizes of every row in bytes."""
    pixels = reader.numbers("rows") * reader.numbers("columns")
    samples = pixels * reader.numbers("channels")
    stored = reader.numbers("bits_stored")
    return {
        "pixels": pixels,
        "stored": samples * stored / 8,
        "allocated": samples * reader.numbers("bits_allocated") / 8,
        "content": reader.numbers("content_pixels") * reader.numbers("channels") * stored / 8,
        "lossless": reader.numbers("lossless_bytes"),
        "now": reader.numbers("source_bytes"),
        "code": reader.numbers("code_bytes"),
        "ratio": reader.numbers("ratio_bits_stored"),
        "dial": reader.numbers("dial_value"),
    }


def _neighbour(rows: Indices, columns: dict[str, npt.NDArray[np.float64]]) -> NeighbourEntry:
    """Totals and spread of the neighbouring settings."""
    ratios, dial, code = columns["ratio"][rows], columns["dial"][rows], columns["code"][rows].sum()
    return NeighbourEntry(
        frames=len(rows),
        dial_least=float(dial.min()),
        dial_largest=float(dial.max()),
        code_bytes=int(code),
        ratio_bits_stored=float(columns["stored"][rows].sum() / code),
        ratio_bits_stored_least=float(ratios.min()),
        ratio_bits_stored_median=float(np.median(ratios)),
        ratio_bits_stored_largest=float(ratios.max()),
    )


def _entry(
    candidate: str,
    stratum: str,
    rows: Indices,
    columns: dict[str, npt.NDArray[np.float64]],
    lossless_codecs: dict[str, int],
) -> LedgerEntry:
    """Totals over one group of rows; a ratio of totals, not a mean of ratios, since bytes are what is stored."""
    total = {name: float(values[rows].sum()) for name, values in columns.items()}
    code = total["code"]
    lossless = None if np.isnan(total["lossless"]) else int(total["lossless"])
    content = total["content"] or None
    ratios, dial = columns["ratio"][rows], columns["dial"][rows]
    known = dial[~np.isnan(dial)]
    return LedgerEntry(
        candidate=candidate,
        stratum=stratum,
        frames=len(rows),
        bits_stored_bytes=total["stored"],
        bits_allocated_bytes=total["allocated"],
        content_bytes=content,
        lossless_bytes=lossless,
        lossless_codecs=lossless_codecs,
        bytes_now=int(total["now"]),
        code_bytes=int(code),
        ratio_bits_stored=total["stored"] / code,
        ratio_bits_allocated=total["allocated"] / code,
        ratio_content=content / code if content else None,
        times_smaller_than_lossless=lossless / code if lossless else None,
        times_smaller_than_now=total["now"] / code,
        bits_per_pixel=8 * code / total["pixels"],
        ratio_bits_stored_least=float(ratios.min()),
        ratio_bits_stored_median=float(np.median(ratios)),
        ratio_bits_stored_largest=float(ratios.max()),
        ratio_bits_stored_p05=float(np.percentile(ratios, 5)),
        ratio_bits_stored_p95=float(np.percentile(ratios, 95)),
        dial_least=float(known.min()) if len(known) else None,
        dial_largest=float(known.max()) if len(known) else None,
    )
