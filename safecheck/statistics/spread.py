"""What is not fixed by what was asked of a codec, over all frames of a candidate: the middle with both tails."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from types import MappingProxyType
from typing import Literal, TypeAlias

import numpy as np

from safecheck.policy.plan import Asked
from safecheck.record.candidates import SpreadEntry
from safecheck.statistics.groups import Groups

__all__ = ["OPEN", "spread"]

Figure: TypeAlias = Literal["ratio_bits_stored", "dial_value", "rmse_content"]

OPEN: Mapping[Asked | Literal[""], tuple[Figure, ...]] = MappingProxyType(
    {
        "ratio per frame": ("rmse_content", "dial_value"),
        "ratio per series": ("ratio_bits_stored", "rmse_content", "dial_value"),
        "setting": ("ratio_bits_stored", "rmse_content"),
        "": ("ratio_bits_stored", "rmse_content"),
    }
)
"""What was asked -> the figures that it leaves open."""


def spread(groups: Groups, candidate: str, asked: Asked | Literal[""]) -> Iterator[SpreadEntry]:
    """Yield the figures left open, each over the frames of one unit."""
    rows = groups.of_candidate(candidate)
    unit_of, units = groups.reader.codes("unit")
    for figure in OPEN[asked]:
        values = groups.reader.numbers(figure)
        own = [(units[code], rows[unit_of[rows] == code]) for code in np.unique(unit_of[rows])]
        parts = own if figure == "rmse_content" else [("to 1" if figure == "ratio_bits_stored" else "", rows)]
        for unit, part in parts:
            known = values[part][~np.isnan(values[part])]
            if not len(known):
                continue
            median, low, high = (float(value) for value in np.percentile(known, (50, 5, 95)))
            yield SpreadEntry(
                figure=figure,
                unit=unit,
                frames=len(known),
                median=median,
                p05=low,
                p95=high,
                least=float(known.min()),
                largest=float(known.max()),
            )
