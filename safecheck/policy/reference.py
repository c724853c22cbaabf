"""The candidate whose damage the others are held beside: named by the plan, or found by the record."""

from __future__ import annotations

from safecheck.errors import DocumentError
from safecheck.policy.plan import Plan

__all__ = ["check_reference"]


def check_reference(plan: Plan) -> None:
    """Check that the plan's reference, where it has one, is the name of a candidate.

    Raises
    ------
    DocumentError
        With the dotted path of the key.
    """
    names = [candidate.name for candidate in plan.candidates]
    if plan.reference and plan.reference not in names:
        known = ", ".join(repr(name) for name in names)
        raise DocumentError("reference", f"no candidate is named {plan.reference!r}; expected one of {known}")
