"""The site: its key, and the journal that knows which came first, a plan or results."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from safecheck.jobs.site import open_site

PLAN, OTHER = "a" * 64, "b" * 64


def test_a_plan_seen_before_any_results_of_the_studies_is_declared_before(tmp_path: Path) -> None:
    site = open_site(tmp_path / "key")
    site.see_plan(PLAN)
    assert site.declared(PLAN, ["S-1", "S-2"]) == "before the first results"
    site.see_results(["S-1"])
    assert site.declared(PLAN, ["S-1", "S-2"]) == "before the first results"


def test_a_plan_seen_after_results_of_any_of_the_studies_is_declared_after(tmp_path: Path) -> None:
    site = open_site(tmp_path / "key")
    site.see_results(["S-1"])
    site.see_plan(PLAN)
    assert site.declared(PLAN, ["S-1", "S-2"]) == "after the first results"
    assert site.declared(PLAN, ["S-2"]) == "before the first results"


def test_what_was_seen_first_stays_so(tmp_path: Path) -> None:
    site = open_site(tmp_path / "key")
    site.see_plan(PLAN)
    site.see_results(["S-1"])
    site.see_plan(PLAN)
    site.see_results(["S-1"])
    assert open_site(tmp_path / "key").declared(PLAN, ["S-1"]) == "before the first results"


def test_a_plan_never_seen_is_not_known(tmp_path: Path) -> None:
    assert open_site(tmp_path / "key").declared(OTHER, ["S-1"]) == "not known"


def test_a_journal_that_is_no_journal_stops_nothing(tmp_path: Path) -> None:
    site = open_site(tmp_path / "key")
    site.journal.write_bytes(b"no database" * 100)
    site.see_plan(PLAN)
    site.see_results(["S-1"])
    assert site.declared(PLAN, ["S-1"]) == "not known"


def test_each_key_has_a_journal_of_its_own(tmp_path: Path) -> None:
    open_site(tmp_path / "one").see_plan(PLAN)
    assert open_site(tmp_path / "other").declared(PLAN, []) == "not known"


@pytest.mark.skipif(os.name != "posix", reason="permissions of POSIX")
def test_key_and_journal_are_for_their_owner_alone(tmp_path: Path) -> None:
    site = open_site(tmp_path / "key")
    site.see_plan(PLAN)
    assert [path.stat().st_mode & 0o777 for path in (tmp_path / "key", site.journal)] == [0o600, 0o600]
