"""Which frames carry the full controls: a share of each stratum, and one that each codec of the run takes."""

from __future__ import annotations

import dataclasses
import itertools
import random
from collections.abc import Sequence

import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Codec
from safecheck.dicom.instance import Instance
from safecheck.evaluation import Assignment, Candidate
from safecheck.frames import PixelFormat, SizeBasis
from safecheck.runner import full_controls
from safecheck.runner.full_controls import choose_full_controls, codecs_of
from tests.runner.studies import KEY, instance

CODECS = ("jpeg2000", "tiled")


def assignment(codecs: Sequence[str] = CODECS) -> Assignment:
    return Assignment(tuple(Candidate(f"{name} 10:1", name, 10.0, SizeBasis.BITS_STORED) for name in codecs))


def chosen(
    instances: Sequence[Instance], share_percent: float = 0.0, seed: int = 1, codecs: Sequence[str] = CODECS
) -> set[str]:
    found = choose_full_controls(instances, codecs_of(assignment(codecs)), KEY, share_percent, seed)
    return {input_ for input_, _ in found}


def takes(name: str, size: tuple[int, int], photometric: str = "MONOCHROME2", bits: int = 12) -> bool:
    """What the codec itself says, asked past the room under test."""
    form = PixelFormat(16 if bits > 8 else 8, bits, False, "RGB" if photometric == "RGB" else "MONOCHROME2")
    return registry.rated(name).refuses(form, size) is None


def many(prefix: str, count: int, size: tuple[int, int], **changes: object) -> list[Instance]:
    return [
        dataclasses.replace(instance(f"{prefix}{n}", number=n, size=size), **changes)  # type: ignore[arg-type]
        for n in range(count)
    ]


def test_the_sizes_used_here_are_taken_and_refused_as_these_tests_need() -> None:
    assert [takes(name, (16, 16)) for name in CODECS] == [False, True]
    assert [takes(name, (100, 100)) for name in CODECS] == [True, True]


@pytest.mark.parametrize("seed", range(8))
def test_each_codec_finds_a_frame_that_it_takes_in_a_stratum_of_mixed_sizes(seed: int) -> None:
    # One frame in forty is taken by both codecs; by the share alone it would be drawn once in twenty times.
    mixed = [*many("small", 39, (16, 16)), *many("large", 1, (100, 100))]
    assert "F-large0" in chosen(mixed, 5.0, seed)


@pytest.mark.parametrize("seed", range(8))
def test_colour_of_one_bit_does_not_stand_in_for_what_every_codec_takes(seed: int) -> None:
    odd = {"bits_allocated": 8, "bits_stored": 1, "photometric": "RGB"}
    assert not takes("jpeg2000", (100, 100), "RGB", 1)
    mixed = [*many("odd", 20, (100, 100), **odd), *many("plain", 2, (100, 100))]
    assert {"F-plain0", "F-plain1"} & chosen(mixed, 5.0, seed)


def test_a_frame_that_all_codecs_take_serves_them_all() -> None:
    assert len(chosen(many("large", 20, (100, 100)))) == 1


def test_where_a_codec_takes_no_frame_nothing_is_owed_to_it() -> None:
    small = many("small", 20, (16, 16))
    assert len(chosen(small)) == 1
    assert chosen(small) == chosen(small, codecs=("tiled",))


def test_a_stratum_that_no_codec_takes_still_gives_a_frame() -> None:
    assert len(chosen(many("small", 20, (16, 16)), codecs=("jpeg2000",))) == 1
    assert len(chosen(many("wide", 20, (100, 100), bits_allocated=32, bits_stored=32))) == 1


@pytest.mark.parametrize("seed", range(8))
def test_frames_with_room_for_the_over_compressed_control_come_first(seed: int) -> None:
    # Two sizes that both codecs take.
    assert takes("jpeg2000", (63, 200))
    mixed = [*many("low", 30, (63, 200)), *many("room", 10, (64, 64))]
    assert all(name.startswith("F-room") for name in chosen(mixed, 25.0, seed))
    assert len(chosen(mixed, 25.0, seed)) == 10


def test_frames_without_room_are_drawn_where_the_stratum_has_no_other() -> None:
    assert len(chosen(many("low", 30, (63, 200)), 10.0)) == 3


def test_a_larger_share_keeps_the_frames_of_a_smaller_one_and_all_is_all() -> None:
    mixed = [*many("small", 20, (16, 16)), *many("large", 20, (100, 100))]
    shares = [chosen(mixed, share) for share in (0.0, 5.0, 20.0, 60.0, 100.0)]
    assert all(less <= more for less, more in itertools.pairwise(shares))
    assert len(shares[-1]) == 40


def test_the_order_of_inputs_and_of_candidates_does_not_matter() -> None:
    mixed = [*many("small", 20, (16, 16)), *many("large", 20, (100, 100))]
    shuffled = random.Random(3).sample(mixed, len(mixed))
    assert chosen(mixed, 10.0) == chosen(shuffled, 10.0, codecs=CODECS[::-1])


def test_each_codec_counts_once_with_the_settings_of_its_first_candidate() -> None:
    settings = [(("size", 16),), (("size", 8),)]
    run = Assignment(tuple(Candidate(f"{s}", "tiled", 10.0, SizeBasis.BITS_STORED, s) for s in settings))
    found: tuple[Codec, ...] = codecs_of(run)
    assert [each.settings["size"] for each in found] == [16]


def test_a_codec_that_this_machine_lacks_is_owed_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(full_controls, "available", lambda name: name != "jpeg2000")
    assert [each.name for each in codecs_of(assignment())] == ["tiled"]
