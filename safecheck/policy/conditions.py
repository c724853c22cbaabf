"""Exit conditions: what a run can end with, and which of several wins."""

from __future__ import annotations

import enum
from collections.abc import Iterable
from types import MappingProxyType

__all__ = ["CONDITION_TEXTS", "ExitCondition", "in_order", "winning"]


class ExitCondition(enum.IntEnum):
    """Exit codes of the command line; 1 is never used on purpose."""

    DONE = 0
    USAGE = 2
    LEFT_OUT = 3
    CONTROLS = 4
    INCOMPLETE = 5
    DIFFERENCE = 6
    LITTLE_EVIDENCE = 7
    INTERNAL = 8
    OUTSIDE = 10


_PRECEDENCE = (
    ExitCondition.USAGE,
    ExitCondition.INTERNAL,
    ExitCondition.INCOMPLETE,
    ExitCondition.CONTROLS,
    ExitCondition.DIFFERENCE,
    ExitCondition.LEFT_OUT,
    ExitCondition.OUTSIDE,
    ExitCondition.LITTLE_EVIDENCE,
)

CONDITION_TEXTS: MappingProxyType[ExitCondition, str] = MappingProxyType(
    {
        ExitCondition.DONE: "ran, controls held, no proposed candidate outside a declared limit",
        ExitCondition.USAGE: "the call or the plan is wrong",
        ExitCondition.LEFT_OUT: "more input refused or excluded than the plan allows, or nothing evaluated",
        ExitCondition.CONTROLS: "controls not held, run invalid",
        ExitCondition.INCOMPLETE: "incomplete, can be resumed",
        ExitCondition.DIFFERENCE: "verification found a difference",
        ExitCondition.LITTLE_EVIDENCE: "too little evidence for the declared claim",
        ExitCondition.INTERNAL: "internal error",
        ExitCondition.OUTSIDE: "a proposed candidate outside a declared limit",
    }
)


def in_order(conditions: Iterable[ExitCondition]) -> tuple[ExitCondition, ...]:
    """Each condition once, the one that wins first; DONE is no condition."""
    found = set(conditions)
    return tuple(condition for condition in _PRECEDENCE if condition in found)


def winning(conditions: Iterable[ExitCondition]) -> ExitCondition:
    """Return the condition that gives the exit code."""
    return next(iter(in_order(conditions)), ExitCondition.DONE)
