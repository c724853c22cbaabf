"""Small dossiers that many tests read; a test that changes one changes a copy."""

from __future__ import annotations

from pathlib import Path

import pytest

from tests.end_to_end.command import run
from tests.end_to_end.hospital import Hospital, Made, build


@pytest.fixture(scope="session")
def hospital(tmp_path_factory: pytest.TempPathFactory) -> Hospital:
    """Small studies, their plan and the site key."""
    return build(tmp_path_factory.mktemp("hospital"))


@pytest.fixture(scope="session")
def made(hospital: Hospital) -> Made:
    """The dossier of the studies, made by the command line with two workers and crops."""
    out = hospital.folder / "dossier"
    arguments: list[str | Path] = [
        "assess",
        hospital.studies,
        "--plan",
        hospital.plan,
        "--out",
        out,
        "--key",
        hospital.key,
    ]
    ended = run(*arguments, "--with-images", "--workers", "2", folder=hospital.folder)
    assert ended.code == 0, ended.text
    return Made(out, ended)
