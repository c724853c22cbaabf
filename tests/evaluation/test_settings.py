"""Candidates by setting, per series, and where two settings bracket a ratio; promised errors; how samples are carried.

Sizes and errors of the codecs here follow from their definition in `tests.evaluation.fake_codecs`.
"""

from __future__ import annotations

import dataclasses
from typing import Any

import numpy as np
import pytest

from safecheck.codecs import registry
from safecheck.errors import CodecUnavailable
from safecheck.evaluation import Assignment, Candidate, SeriesDial, controls, evaluate, find_dials
from safecheck.frames import PixelFormat, Raster, SizeBasis
from safecheck.policy.plan import CandidatePlan
from safecheck.record.rows import FrameResult, MeasureRow
from tests.evaluation.fake_codecs import Near, register
from tests.evaluation.frames import body, frame


@pytest.fixture(autouse=True)
def fakes(monkeypatch: pytest.MonkeyPatch) -> None:
    register(monkeypatch)


def candidate(**plan: Any) -> Candidate:
    return Candidate.of(CandidatePlan(**({"codec": "near"} | plan)))


def rows(result: FrameResult, role: str) -> list[MeasureRow]:
    return [row for row in result.measures if row.role == role]


def run(*candidates: Candidate, full_controls: bool = False) -> FrameResult:
    return evaluate(frame(), Assignment(candidates), full_controls=full_controls)


@pytest.mark.parametrize("near", [0, 3, 17])
def test_a_setting_is_used_as_it_stands(near: int) -> None:
    (row,) = rows(run(candidate(settings={"near": near})), "candidate")
    assert (row.candidate, row.asked, row.reached) == (f"near, near {near}", "setting", "setting")
    assert (row.dial, row.dial_value, row.ratio_asked, row.basis) == ("near", near, None, "")
    assert row.code_bytes == len(Near(near).encode(frame().raster))
    assert row.max_frame is not None
    assert row.max_frame <= near


def test_two_settings_around_the_ratio_have_a_row_each_and_one_name() -> None:
    result = run(candidate(ratio=6))
    (own,), (beside,) = rows(result, "candidate"), rows(result, "bracket")
    assert own.candidate == beside.candidate == "near 6:1"
    assert own.reached == beside.reached == "bracket"
    assert own.dial_value is not None
    assert beside.dial_value == own.dial_value - 1
    assert beside.ratio_bits_stored < 6 <= own.ratio_bits_stored
    assert [row.role for row in result.windows] == ["candidate", "bracket"]


def test_the_neighbour_is_no_candidate_for_the_controls() -> None:
    result = run(candidate(ratio=6), full_controls=True)
    (own,), (over,), (again,) = (rows(result, role) for role in ("candidate", "over-compressed", "repeat"))
    assert again.code_crc32 == own.code_crc32
    # The definition of the control: an eighth of the smallest candidate, or as near as the codec comes.
    assert over.code_bytes < own.code_bytes
    assert all(row.control_held for row in result.measures if row.control_held is not None)


def test_a_setting_per_series_is_that_of_the_reference_frame() -> None:
    per_series = candidate(ratio=6, per="series")
    reference, other = frame(body(seed=9)), frame(body(seed=2))
    dials = find_dials(reference, [per_series])
    on_reference = Near().encode_to_size(reference.raster, reference.raster.size_bytes(SizeBasis.BITS_STORED) / 6)
    assert dials == {"near 6:1 per series": SeriesDial(on_reference.settings)}
    result = evaluate(other, Assignment((per_series,)).in_series(dials), full_controls=True)
    (row,) = rows(result, "candidate")
    assert (row.asked, row.reached, row.ratio_asked, row.encodes) == ("ratio per series", "setting", 6.0, 1)
    assert row.dial_value == on_reference.settings["near"]
    near = on_reference.settings["near"]
    assert isinstance(near, int)
    assert row.code_bytes == len(Near(near).encode(other.raster))
    assert not rows(result, "bracket")
    assert [row.control_held for row in rows(result, "repeat")] == [True]


def test_a_reference_frame_that_misses_the_ratio_is_said_on_every_frame() -> None:
    per_series = candidate(ratio=1000, per="series")
    dials = find_dials(frame(), [per_series])
    result = evaluate(frame(), Assignment((per_series,)).in_series(dials), full_controls=False)
    assert result.notes == ("near 1000:1 per series: codec floor on the reference frame of the series",)
    assert len(rows(result, "candidate")) == 1


def test_a_series_without_a_setting_has_no_row_and_says_why() -> None:
    per_series = candidate(ratio=6, per="series")
    colour = frame(np.zeros((64, 64, 3), np.uint8), PixelFormat(8, 8, False, "RGB"), unit="luma level", displays=())
    dials = find_dials(colour, [per_series])
    result = evaluate(frame(), Assignment((per_series,)).in_series(dials), full_controls=False)
    assert result.notes == ("near 6:1 per series not run: near: colour, expected grey",)
    assert not rows(result, "candidate")


@pytest.mark.parametrize(("codec", "held"), [("near", True), ("liar", False)])
@pytest.mark.parametrize("asked", [{"ratio": 6}, {"settings": {"near": 5}}], ids=["ratio", "setting"])
def test_a_promised_largest_error_is_held_against_every_row(codec: str, held: bool, asked: dict[str, Any]) -> None:
    result = run(candidate(codec=codec, **asked))
    found = [row for row in result.measures if row.role in ("candidate", "bracket")]
    assert [row.control_held for row in found] == [held] * len(found)
    for row in found:
        assert row.dial_value is not None
        assert row.control_found.endswith(f"at most {row.dial_value:.0f} promised")


def test_a_promise_is_held_against_what_was_coded_and_not_against_what_was_flattened_before() -> None:
    result = run(candidate(settings={"near": 2}, outside="flatten"))
    (row,) = rows(result, "candidate")
    assert row.max_frame is not None
    assert row.max_frame > 2
    assert row.control_held is True


def test_rows_say_how_samples_were_carried() -> None:
    signed = PixelFormat(16, 12, True, "MONOCHROME2")
    samples = (body().astype(np.int16) - 1024).astype(np.int16)
    original = frame(samples, signed, raster=Raster(samples, signed))
    assignment = Assignment((candidate(settings={"near": 1}),))
    result = evaluate(original, assignment, full_controls=True)
    (row,) = rows(result, "candidate")
    assert (row.bits_stored, row.code_precision, row.sample_offset, row.sample_scale) == (12, 16, 2048, 1.0)
    assert row.clipped_on_reading is True
    (planted,) = rows(result, "planted")
    assert planted.clipped_on_reading is None
    assert (planted.code_precision, planted.dial, planted.asked) == (None, "", "")


def test_all_reversible_codecs_of_this_machine_run_where_the_full_controls_do() -> None:
    result = run(candidate(settings={"near": 1}), full_controls=True)
    here = {name for name in registry.reversible_names() if registry.available(name)}
    assert {row.codec for row in rows(result, "reversible")} == here
    assert all(row.max_frame == 0 and row.dial == "" for row in rows(result, "reversible"))


def test_an_assignment_without_its_series_cannot_be_carried_out() -> None:
    per_series = dataclasses.replace(candidate(ratio=6, per="series"), dial=None)
    result = run(per_series)
    assert result.notes == ("near 6:1 per series not run: no setting was sought for its series",)


def test_a_reversible_codec_that_its_library_was_built_without_is_left_out(monkeypatch: pytest.MonkeyPatch) -> None:
    class Lacking(registry.codec("jpeg2000-reversible").__class__):  # type: ignore[misc]
        @property
        def version(self) -> str:
            raise CodecUnavailable("built without it")

    honest = registry.codec
    monkeypatch.setattr(controls, "codec", lambda name: Lacking() if name == "jpeg2000-reversible" else honest(name))
    result = run(candidate(settings={"near": 1}), full_controls=True)
    assert "jpeg2000-reversible" not in {row.codec for row in rows(result, "reversible")}
    assert all(row.control_held for row in result.measures if row.control_held is not None)
