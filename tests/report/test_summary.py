from __future__ import annotations

import pytest

from safecheck.report.summary import WIDTH, summary_text
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, lint
from tests.report.made_records import make_record, make_run
from tests.report.pages import squeezed

SHA256 = "0123456789abcdef" * 4


def test_the_summary_holds_hash_outcomes_exit_and_cautions() -> None:
    text = summary_text(make_record(), SHA256, make_run())
    assert SHA256 in text
    flat = squeezed(text)
    assert "Change reference: CHG-2026-0417" in flat
    assert (
        "- error inside the head (at most 5 HU): outside declared limits with jpeg2000 10:1, jpeg2000 15:1, "
        "jpeg2000 20:1, tiled 10:1, tiled 15:1 and tiled 20:1, within in 23 of 30 studies; no bound: not "
        "a random sample"
    ) in flat
    assert "Exit 10: a proposed candidate outside a declared limit" in flat
    assert "declared: before the first results" in flat
    for caution in (*CAUTIONS, CAUTIONS_WHEN["many_limits"]):
        assert caution in flat
    assert "pacs-workstation-9" not in flat


@pytest.mark.parametrize("held", [True, False], ids=["held", "not held"])
def test_the_summary_is_short_plain_and_without_forbidden_words(held: bool) -> None:
    text = summary_text(make_record(held=held, cautions=(*CAUTIONS, *CAUTIONS_WHEN.values())), SHA256, make_run())
    assert list(lint(squeezed(text))) == []
    assert max(map(len, text.splitlines())) <= WIDTH
    assert len(text.splitlines()) <= 80
    assert "safecheck" not in text
    assert ("RUN INVALID" in text) == (not held)
    assert "SECOND GENERATION" in text


def test_without_limits_the_summary_says_so() -> None:
    assert "Outcomes: no limits declared." in summary_text(make_record(limits=[]), SHA256, make_run())
