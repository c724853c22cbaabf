"""Delivered copies: pairs, what was not matched, and what the headers say beside what the standard asks."""

from __future__ import annotations

from collections import Counter
from typing import Any

import numpy as np

from safecheck.record.delivered import DeliveredEntry, DeliveredPairEntry, ExpectationEntry
from safecheck.record.tables import TableReader
from safecheck.statistics.groups import Groups, place_at

__all__ = ["PAIRS_SHOWN", "delivered_entry"]

PAIRS_SHOWN = 30

_COLUMNS = (
    "side",
    "reason",
    "matched",
    "input",
    "instance",
    "lossy_declared",
    "lossy_ratio",
    "lossy_method",
    "derived",
    "new_uid",
    "pair",
)
_UNMATCHED = "unmatched"


def delivered_entry(inputs: TableReader, measures: Groups) -> DeliveredEntry | None:
    """Summarise the delivered side; None where no copies were given.

    What the standard asks of an irreversibly compressed copy: PS3.3 C.7.6.1.1.2 and C.7.6.1.1.5.
    """
    rows = inputs.at(range(inputs.rows), _COLUMNS)
    if not any(row["side"] == "delivered" for row in rows):
        return None
    pairs = [row for row in rows if row["side"] == "delivered" and row["pair"]]
    headers = _by_original(rows, pairs)
    changed = _changed(measures)
    lossy = [row for instance, row in headers.items() if changed.get(instance)]
    return DeliveredEntry(
        pairs=len(pairs),
        pairs_measured=len(headers.keys() & changed.keys()),
        pairs_unchanged=sum(changed.get(instance) is False for instance in headers),
        pairs_out_of_scope=sum(row["reason"] == "not-selected" for row in pairs),
        originals_without_copy=sum(row["side"] == "original" and row["matched"] == _UNMATCHED for row in rows),
        copies_without_original=sum(row["side"] == "delivered" and row["matched"] == _UNMATCHED for row in rows),
        matched_by=dict(sorted(Counter(row["matched"] for row in pairs).items())),
        expectations=tuple(_expectations(lossy)) if lossy else (),
        shown=tuple(_shown(measures, headers)),
    )


def _changed(measures: Groups) -> dict[str, bool]:
    """Instance pseudonym of an original -> whether any sample of its measured copy differs."""
    rows = measures.of_role("delivered")
    instance_of, instances = measures.reader.codes("instance")
    unchanged = measures.reader.numbers("unchanged")
    changed: dict[str, bool] = {}
    for row in rows:
        name = instances[instance_of[row]]
        changed[name] = changed.get(name, False) or bool(unchanged[row] != 1)
    return changed


def _expectations(pairs: list[dict[str, Any]]) -> list[ExpectationEntry]:
    """Hold the copies' headers beside what the standard asks of them."""
    asked = [
        (
            "Lossy Image Compression (0028,2110)",
            "01",
            [row["lossy_declared"] or "absent" for row in pairs],
            {"01"},
        ),
        (
            "Lossy Image Compression Ratio (0028,2112)",
            "present",
            ["present" if row["lossy_ratio"] else "absent" for row in pairs],
            {"present"},
        ),
        (
            "Lossy Image Compression Method (0028,2114)",
            "a term for each ratio",
            [row["lossy_method"] or "absent" for row in pairs],
            None,
        ),
        (
            "Image Type, value 1",
            "DERIVED",
            ["DERIVED" if row["derived"] else "not DERIVED" for row in pairs],
            {"DERIVED"},
        ),
        (
            "SOP Instance UID",
            "new",
            ["new" if row["new_uid"] else "that of the original" for row in pairs],
            {"new"},
        ),
    ]
    entries = []
    for attribute, wish, found, good in asked:
        counts = Counter(found)
        agreeing = sum(count for name, count in counts.items() if (name in good if good else name != "absent"))
        entries.append(
            ExpectationEntry(
                attribute=attribute,
                asked=wish,
                found=dict(sorted(counts.items())),
                as_asked=agreeing,
                not_as_asked=len(pairs) - agreeing,
            )
        )
    return entries


def _by_original(rows: list[dict[str, Any]], pairs: list[dict[str, Any]]) -> dict[str, dict[str, Any]]:
    """Instance pseudonym of an original -> row of its copy; the table of measures names the original."""
    instance_of = {row["input"]: row["instance"] for row in rows if row["side"] == "original"}
    return {instance_of[row["pair"]]: row for row in pairs if row["pair"] in instance_of}


def _shown(measures: Groups, headers: dict[str, dict[str, Any]]) -> list[DeliveredPairEntry]:
    """The pairs with the largest errors."""
    rows = measures.of_role("delivered")
    largest = measures.reader.numbers("max_frame")[rows]
    order = rows[np.argsort(-largest, kind="stable")][:PAIRS_SHOWN]
    shown = []
    wanted = (
        "unit",
        "ratio_bits_allocated",
        "ratio_bits_stored",
        "max_frame",
        "rmse_frame",
        "settings",
        "instance",
    )
    for index in order:
        row = measures.reader.at([int(index)], wanted)[0]
        header = headers.get(row["instance"], {})
        shown.append(
            DeliveredPairEntry(
                original=place_at(measures.reader, int(index)),
                how=header.get("matched", ""),
                ratio_header=header.get("lossy_ratio", ""),
                ratio_bits_allocated=row["ratio_bits_allocated"],
                ratio_bits_stored=row["ratio_bits_stored"],
                max_frame=row["max_frame"],
                rmse_frame=row["rmse_frame"],
                unit=row["unit"],
            )
        )
    return shown
