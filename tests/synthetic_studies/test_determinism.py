"""Equal seeds give equal bytes; other seeds and options give other studies."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

import synthetic_studies as made

MAKERS: dict[str, Callable[[Path, int], Any]] = {
    "ct_body": lambda folder, seed: made.ct_body(folder, seed=seed, rows=96, columns=80, slices=2),
    "radiograph": lambda folder, seed: made.radiograph(folder, seed=seed, rows=128, columns=96),
    "mr_head": lambda folder, seed: made.mr_head(folder, seed=seed, rows=64, columns=72, slices=2),
    "us_cine": lambda folder, seed: made.us_cine(folder, seed=seed, rows=120, columns=160, frames=2),
    "already_lossy": lambda folder, seed: made.already_lossy(folder, seed=seed, rows=64, columns=64, slices=2),
    "delivered_pair": lambda folder, seed: made.delivered_pair(folder, seed=seed, rows=64, columns=64, slices=2),
    "archive": lambda folder, seed: made.archive(folder, seed=seed, patients=3, modalities=("CT", "MR", "CR")),
    "canary_study": lambda folder, seed: made.canary_study(folder, "CANARY77", seed=seed, directory=True),
    "big_multiframe": lambda folder, seed: made.big_multiframe(folder / "big.dcm", 3, 32, 40, seed=seed),
}


def _contents(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


@pytest.mark.parametrize("name", MAKERS)
def test_equal_seeds_give_equal_bytes(name: str, tmp_path: Path) -> None:
    for folder in ("first", "second"):
        (tmp_path / folder).mkdir()
        MAKERS[name](tmp_path / folder, 5)
    first, second = _contents(tmp_path / "first"), _contents(tmp_path / "second")
    assert first
    assert first.keys() == second.keys()
    assert all(first[path] == second[path] for path in first)


@pytest.mark.parametrize("name", [name for name in MAKERS if name != "canary_study"])
def test_another_seed_gives_other_bytes(name: str, tmp_path: Path) -> None:
    for seed in (5, 6):
        (tmp_path / str(seed)).mkdir()
        MAKERS[name](tmp_path / str(seed), seed)
    first, second = _contents(tmp_path / "5"), _contents(tmp_path / "6")
    assert all(first[path] != second[path] for path in first.keys() & second.keys())


def test_other_options_give_other_uids(tmp_path: Path) -> None:
    plain = made.ct_body(tmp_path / "a", seed=5, rows=64, columns=64, slices=1)
    other = made.ct_body(tmp_path / "b", seed=5, rows=64, columns=64, slices=1, noise_sd_hu=20)
    assert plain.series_uid != other.series_uid
    assert not set(plain.instance_uids) & set(other.instance_uids)
