"""Controls: rows that check the run itself, counted by kind and codec."""

from __future__ import annotations

from collections.abc import Iterator
from types import MappingProxyType
from typing import Literal, get_args

import numpy as np

from safecheck.record.outcomes import ControlEntry
from safecheck.statistics.groups import BRACKET, Groups, Indices, place_at

__all__ = ["CONTROL_ROLES", "PROMISED", "controls"]

ControlRole = Literal["reversible", "repeat", "over-compressed", "planted"]
CONTROL_ROLES: tuple[ControlRole, ...] = get_args(ControlRole)

PROMISED: Literal["promised error"] = "promised error"
"""Not a recompression of its own: candidates of a codec that promises a largest error are held against it."""

_ASKED: MappingProxyType[str, str] = MappingProxyType(
    {
        "reversible": "a reversible code gives back every sample: largest error exactly 0",
        "repeat": "the same frame gives the same code again, byte for byte",
        "over-compressed": "RMSE in content above that of every candidate of the codec; constant frames exempt",
        "planted": "a known displacement in one patch comes back with its size, row and column",
        PROMISED: "no stored value moves further than the setting promises; counted: rows of candidates and neighbours",
    }
)


def controls(groups: Groups) -> Iterator[ControlEntry]:
    """Yield one entry per kind of control and codec, with the first place where it was not held."""
    held = groups.reader.numbers("control_held")
    codec_of, codecs = groups.reader.codes("codec")
    for role in CONTROL_ROLES:
        rows = groups.of_role(role)
        for code in np.unique(codec_of[rows]):
            of_codec = rows[codec_of[rows] == code]
            yield _entry(groups, role, codecs[code], of_codec, of_codec[held[of_codec] != 1])
    rows = np.concatenate([groups.of_role("candidate"), groups.of_role(BRACKET)])
    rows = np.sort(rows[~np.isnan(held[rows])])
    for code in np.unique(codec_of[rows]):
        of_codec = rows[codec_of[rows] == code]
        yield _entry(groups, PROMISED, codecs[code], of_codec, of_codec[held[of_codec] != 1])


def _entry(
    groups: Groups, role: ControlRole | Literal["promised error"], codec: str, rows: Indices, not_held: Indices
) -> ControlEntry:
    """Count one kind of control for one codec; a row without a finding counts as not held."""
    first = int(not_held[0]) if len(not_held) else None
    return ControlEntry(
        control=role,
        codec=codec,
        frames=len(rows),
        held=len(rows) - len(not_held),
        not_held=len(not_held),
        text=_ASKED[role],
        first_not_held=None if first is None else place_at(groups.reader, first),
        found="" if first is None else groups.reader.at([first], ["control_found"])[0]["control_found"],
    )
