"""Verification from a part of the images says what is missing, and accuses nobody of an altered row."""

from __future__ import annotations

from pathlib import Path

from safecheck.jobs.assess import AssessRequest
from safecheck.jobs.verify import verify
from synthetic_studies import ct_body
from tests.end_to_end.hospital import assess_here


def test_half_the_images_are_told_once_and_the_rest_is_computed_again(tmp_path: Path) -> None:
    ct_body(tmp_path / "ct", seed=1, rows=96, columns=96, slices=4)
    out, key = tmp_path / "out", tmp_path / "key"
    request = AssessRequest((tmp_path / "ct",), out, ratios=(8.0,), codecs=("jpeg2000",), key_file=key)
    assess_here(request)
    files = tuple(sorted(path for path in (tmp_path / "ct").rglob("*") if path.is_file()))
    found = verify(out, images=files[:2], delivered=(), key_file=key, regions_file=None, frames=4, seed=1)
    assert found.differences == ("2 instances of the record are not among the images given",)
    assert "2 of 4 frames were computed again" in " ".join(found.lines)
