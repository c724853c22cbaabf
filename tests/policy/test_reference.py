"""The plan's reference is one of its candidates, by name."""

from __future__ import annotations

import pytest

from safecheck.documents import from_toml
from safecheck.errors import DocumentError
from safecheck.policy.plan import Plan
from safecheck.policy.reference import check_reference
from tests.policy.test_plan import PLAN


@pytest.mark.parametrize("name", ["", "jpeg2000 10:1", "tiled 8.5:1 of content, size 16"], ids=["none", "one", "other"])
def test_the_name_of_a_candidate_or_none_is_taken(name: str) -> None:
    check_reference(from_toml(Plan, f'reference = "{name}"\n{PLAN}'))


@pytest.mark.parametrize("name", ["jpeg2000 8:1", "jpeg2000", "JPEG2000 10:1"], ids=["ratio", "codec", "letters"])
def test_another_name_is_named_with_what_was_expected(name: str) -> None:
    plan = from_toml(Plan, f'reference = "{name}"\n{PLAN}')
    with pytest.raises(DocumentError, match=r"reference: no candidate is named .* expected one of 'jpeg2000 10:1', "):
        check_reference(plan)
