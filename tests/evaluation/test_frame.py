"""One frame through candidates and controls: rows against plain NumPy, controls that find what is planted."""

from __future__ import annotations

import dataclasses
import json
from typing import Any

import numpy as np
import pytest

from safecheck.codecs import registry
from safecheck.codecs.base import Codec
from safecheck.evaluation import Assignment, Candidate, evaluate
from safecheck.evaluation import treatment as treatment_module
from safecheck.frames import Frame, LossHistory, PixelFormat, Raster, Samples, SizeBasis
from safecheck.policy.plan import CandidatePlan, WindowPlan
from safecheck.record.rows import FrameResult, MeasureRow
from safecheck.regions.region import OnFrames, Part, Region, RegionSet
from safecheck.regions.shapes import Rectangle
from tests.evaluation.frames import body, frame, origin

TWO = Assignment(
    (
        Candidate("jpeg2000 10:1", "jpeg2000", 10.0, SizeBasis.BITS_STORED),
        Candidate("tiled 10:1", "tiled", 10.0, SizeBasis.BITS_STORED),
    )
)


def rows(result: FrameResult, role: str) -> list[MeasureRow]:
    return [row for row in result.measures if row.role == role]


def only(result: FrameResult, candidate: str) -> MeasureRow:
    (row,) = [row for row in result.measures if row.candidate == candidate]
    return row


def exact_codecs() -> set[str]:
    """Names of the reversible controls on a frame that carries all of them: tiled is there by its reversible form."""
    codecs = [name for name in registry.reversible_names() if name != "jpegls-reversible" and registry.available(name)]
    return {"reversible", "reversible, tiled", *(f"reversible, {name}" for name in codecs)}


def test_every_candidate_and_the_reversible_control_give_a_row() -> None:
    result = evaluate(frame(), TWO, full_controls=False)
    assert [row.candidate for row in result.measures] == ["jpeg2000 10:1", "tiled 10:1", "reversible"]
    assert [row.candidate for row in result.windows] == ["jpeg2000 10:1", "tiled 10:1"]
    assert only(result, "reversible").control_held is True
    assert only(result, "tiled 10:1").control_held is None


@pytest.mark.parametrize("codec", ["jpeg2000", "tiled"])
def test_errors_are_those_of_the_code_read_back(codec: str) -> None:
    original = frame()
    row = only(evaluate(original, TWO, full_controls=False), f"{codec} 10:1")
    again = registry.from_settings(codec, json.loads(row.settings)) if codec == "tiled" else registry.rated(codec)
    code = (
        again.encode(original.raster)
        if codec == "tiled"
        else registry.rated(codec)
        .encode_to_size(original.raster, original.raster.size_bytes(SizeBasis.BITS_STORED) / 10)
        .code
    )
    error = again.decode(code, original.raster.format, original.raster.shape).astype(float) - original.raster.samples
    assert row.code_bytes == len(code)
    assert row.rmse_frame == pytest.approx(np.sqrt(np.mean(error**2)), rel=1e-9)
    assert row.bias_frame == pytest.approx(error.mean(), rel=1e-9, abs=1e-12)
    assert row.max_frame == np.abs(error).max()
    assert row.psnr_peak_bits_db == pytest.approx(20 * np.log10(4095 / np.sqrt(np.mean(error**2))), rel=1e-9)


def test_ratios_stand_on_every_basis() -> None:
    original = frame()
    row = only(evaluate(original, TWO, full_controls=False), "tiled 10:1")
    pixels = 128 * 160
    # Ratio definitions: PS3.3 C.7.6.1.1.5.2 leaves the size before open; each basis by its own statement.
    assert row.ratio_bits_stored == pytest.approx(pixels * 12 / 8 / row.code_bytes)
    assert row.ratio_bits_allocated == pytest.approx(pixels * 2 / row.code_bytes)
    assert row.ratio_content == pytest.approx(row.content_pixels * 12 / 8 / row.code_bytes)
    assert row.times_smaller_than_now == pytest.approx(2 * pixels / row.code_bytes)
    assert row.lossless_bytes is not None
    assert row.times_smaller_than_lossless == pytest.approx(row.lossless_bytes / row.code_bytes)
    assert row.bits_per_pixel == pytest.approx(8 * row.code_bytes / pixels)


@pytest.mark.parametrize("basis", list(SizeBasis))
def test_a_ratio_is_asked_on_any_basis(basis: SizeBasis) -> None:
    original = frame(body(rows=256, columns=256))
    asked = Assignment((Candidate("one", "tiled", 3.0, basis),))
    result = evaluate(original, asked, full_controls=False)
    row = only(result, "one")
    before = {
        SizeBasis.BITS_STORED: 256 * 256 * 12 / 8,
        SizeBasis.BITS_ALLOCATED: 256 * 256 * 2.0,
        SizeBasis.CONTENT: row.content_pixels * 12 / 8,
        SizeBasis.LOSSLESS: float(row.lossless_bytes or 0),
        SizeBasis.NOW: float(original.origin.source_bytes),
    }[basis]
    assert before / row.code_bytes == pytest.approx(3.0, rel=0.011)


def test_full_controls_hold_and_name_what_they_found() -> None:
    result = evaluate(frame(), TWO, full_controls=True)
    found = {row.candidate: row for row in result.measures if row.control_held is not None}
    assert set(found) == exact_codecs() | {
        "repeat, jpeg2000",
        "repeat, tiled",
        "over-compressed, jpeg2000",
        "over-compressed, tiled",
        "planted",
    }
    assert all(row.control_held for row in found.values())
    planted = found["planted"]
    assert planted.max_frame == planted.planted_size
    assert (planted.worst_patch_row, planted.worst_patch_column) == (planted.planted_row, planted.planted_column)
    over = {row.candidate for row in result.windows if row.role == "over-compressed"}
    assert over == {"over-compressed, jpeg2000", "over-compressed, tiled"}


def test_a_one_bit_fault_between_decoder_and_measures_is_found_by_the_controls(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = treatment_module.decode

    def faulty(codec: Codec, code: bytes, form: PixelFormat, shape: tuple[int, int]) -> Samples:
        samples = honest(codec, code, form, shape).copy()
        samples[40, 50] ^= 1
        return samples

    monkeypatch.setattr(treatment_module, "decode", faulty)
    result = evaluate(frame(), TWO, full_controls=True)
    assert {row.control_held for row in rows(result, "reversible")} == {False}
    assert len(rows(result, "reversible")) == len(exact_codecs())
    assert only(result, "reversible").control_found == "largest error 1 in stored values, at most 0 promised"


def test_a_codec_that_gives_another_code_the_second_time_is_found(monkeypatch: pytest.MonkeyPatch) -> None:
    honest = registry.rated
    calls = []

    def drifting(name: str, **settings: Any) -> Any:
        codec = honest(name, **settings)

        class Drifting(type(codec)):  # type: ignore[misc]
            def encode_to_size(self, raster: Raster, target_bytes: float) -> Any:
                calls.append(name)
                return super().encode_to_size(raster, target_bytes * (1 + 0.05 * len(calls)))

        return Drifting()

    monkeypatch.setattr(treatment_module, "rated", drifting)
    one = Assignment(TWO.candidates[1:])
    assert [row.control_held for row in rows(evaluate(frame(), one, full_controls=True), "repeat")] == [False]


def test_a_constant_frame_is_exempt_from_over_compression_and_not_planted_beyond_its_range() -> None:
    flat = frame(np.full((64, 64), 4095, dtype=np.uint16))
    result = evaluate(flat, TWO, full_controls=True)
    assert all(row.control_held for row in result.measures if row.control_held is not None)
    assert {row.control_found for row in rows(result, "over-compressed")} == {"constant frame, exempt"}
    row = only(result, "tiled 10:1")
    assert row.max_frame == 0
    assert row.psnr_peak_bits_db is None
    assert row.unchanged is True


def test_padding_stays_and_what_became_padding_is_counted() -> None:
    samples = body()
    samples[:20] = 0
    padding = np.zeros(samples.shape, dtype=np.bool_)
    padding[:20] = True
    padded = frame(samples, raster=Raster(samples, frame().raster.format, padding), padding_range=(0, 0))
    result = evaluate(padded, TWO, full_controls=False)
    assert only(result, "tiled 10:1").padding_changed == 0
    assert only(result, "tiled 10:1").padding_pixels == 20 * 160
    assert only(result, "jpeg2000 10:1").padding_changed > 0


def test_a_flattened_outside_says_its_largest_change() -> None:
    kept = Candidate("kept", "tiled", 10.0, SizeBasis.BITS_STORED)
    flat = dataclasses.replace(kept, name="flat", flatten_outside=True)
    original = frame()
    result = evaluate(original, Assignment((kept, flat)), full_controls=False)
    assert only(result, "kept").outside_flattened_max is None
    outside = original.raster.samples[original.raster.samples < 500].astype(float)
    assert only(result, "flat").outside_flattened_max == np.abs(outside - np.rint(np.median(outside))).max()
    kept_error, flat_error = only(result, "kept").rmse_content, only(result, "flat").rmse_content
    assert kept_error is not None
    assert flat_error is not None
    assert flat_error < kept_error


def test_plan_windows_come_first_and_only_in_their_unit() -> None:
    windows = (
        WindowPlan(label="brain", centre=40, width=80, unit="HU"),
        WindowPlan(label="counts", centre=40, width=80, unit="stored value"),
        WindowPlan(label="mr", centre=40, width=80, unit="HU", modality="MR"),
        WindowPlan(label="same as the file's", centre=40, width=400, unit="HU"),
    )
    result = evaluate(frame(), dataclasses.replace(TWO, windows=windows), full_controls=False)
    assert [row.window for row in result.windows if row.candidate == "tiled 10:1"] == ["brain", "same as the file's"]


def test_regions_are_measured_where_they_lie() -> None:
    def square(name: str, row: float, column: float, background: str = "") -> Region:
        part = Part(
            placement=OnFrames(rows=128, columns=160),
            shape=Rectangle(centre=(row, column), height=10.0, width=10.0),
        )
        return Region(name, f"label of {name}", "target", (part,), background)

    elsewhere = Region(
        "elsewhere",
        "elsewhere",
        "other",
        (Part(placement=OnFrames(rows=64, columns=64), shape=Rectangle(centre=(5, 5), height=2, width=2)),),
    )
    regions = RegionSet((square("inside", 63.5, 79.5, "around"), square("around", 80.5, 90.5), elsewhere), "0")
    original = frame()
    result = evaluate(original, dataclasses.replace(TWO, regions=regions), full_controls=False)
    found = [row for row in result.regions if row.candidate == "tiled 10:1"]
    assert [row.region for row in found] == ["inside", "around"]
    inside = original.raster.samples[59:69, 75:85].astype(float) - 1024
    around = original.raster.samples[76:86, 86:96].astype(float) - 1024
    assert found[0].area_pixels == pytest.approx(100)
    assert found[0].area_mm2 == pytest.approx(64)
    assert found[0].mean_before == pytest.approx(inside.mean(), rel=1e-9)
    assert found[0].sd_before == pytest.approx(inside.std(), rel=1e-9)
    assert found[0].cnr_before == pytest.approx(abs(inside.mean() - around.mean()) / around.std(), rel=1e-9)
    assert found[0].noise_removed_percent is not None
    assert found[1].background == ""
    assert found[1].cnr_before is None


def colour_frame() -> Frame:
    rng = np.random.default_rng(4)
    down, right = np.mgrid[:96, :96]
    base = 128 + 60 * np.sin(down / 11)[..., None] * np.cos(right / 13)[..., None] * np.array([1.0, 0.6, -0.4])
    samples = np.clip(base + rng.normal(0, 4, (96, 96, 3)), 0, 255).astype(np.uint8)
    return frame(
        samples,
        PixelFormat(8, 8, False, "RGB"),
        unit="luma level",
        origin=origin(modality="US"),
        displays=(),
    )


def test_colour_is_measured_on_luma_and_by_its_difference() -> None:
    result = evaluate(colour_frame(), TWO, full_controls=True)
    row = only(result, "tiled 10:1")
    assert row.channels == 3
    assert row.unit == "luma level"
    assert row.peak_bits == 255
    assert row.ciede2000_max is not None
    assert all(control.control_held for control in result.measures if control.control_held is not None)


def test_a_delivered_copy_is_measured_like_a_candidate() -> None:
    original = frame()
    changed = original.raster.samples.copy()
    changed[64, 80] += 30
    copy = dataclasses.replace(
        original,
        raster=Raster(changed, original.raster.format),
        origin=origin(source_bytes=4000, source_syntax="JPEG 2000", history=LossHistory(lossy=True)),
    )
    result = evaluate(original, TWO, full_controls=False, delivered=copy)
    (row,) = rows(result, "delivered")
    assert row.max_frame == 30
    assert (row.max_content_row, row.max_content_column) == (64, 80)
    assert row.code_bytes == 4000
    assert row.ratio_bits_allocated == pytest.approx(2 * 128 * 160 / 4000)
    assert result.delivered_differs == ""


@pytest.mark.parametrize(
    ("changes", "why"),
    [
        ({"raster": Raster(body(rows=64), frame().raster.format)}, "samples, the original has"),
        ({"unit": "stored value"}, "in 'stored value', the original is in 'HU'"),
        ({"raster": Raster(body(), PixelFormat(16, 12, False, "MONOCHROME1"))}, "MONOCHROME1, the original is"),
    ],
    ids=["size", "unit", "photometric"],
)
def test_a_delivered_copy_of_another_kind_is_not_measured(changes: dict[str, Any], why: str) -> None:
    original = frame()
    result = evaluate(original, TWO, full_controls=False, delivered=dataclasses.replace(original, **changes))
    assert why in result.delivered_differs
    assert not rows(result, "delivered")


def test_a_candidate_whose_codec_does_not_take_the_frame_is_said() -> None:
    tiny = frame(body(rows=7, columns=5))
    result = evaluate(tiny, TWO, full_controls=True)
    assert [row.candidate for row in rows(result, "candidate")] == ["tiled 10:1"]
    (note,) = result.notes
    assert note.startswith("jpeg2000 10:1 not run: ")


def test_a_second_generation_is_said_on_every_row() -> None:
    lossy = frame(origin=origin(history=LossHistory(lossy=True)))
    result = evaluate(lossy, TWO, full_controls=False)
    assert {row.generation for row in result.measures} == {"second"}
    assert all("source already lossy" in row.stratum for row in result.measures)


def test_a_candidate_of_the_plan_keeps_its_name_and_settings() -> None:
    plan = CandidatePlan(codec="tiled", ratio=8, settings={"size": 16, "transform": "fourier"}, outside="flatten")
    candidate = Candidate.of(plan)
    assert candidate.name == "tiled 8:1, size 16, transform fourier, outside flattened"
    assert candidate.settings == (("size", 16), ("transform", "fourier"))
    assert candidate.flatten_outside


NOISE = np.random.default_rng(1).integers(0, 4096, (32, 32)).astype(np.uint16)
TWO_LEVELS = np.where(np.indices((256, 256)).sum(0) < 250, 10, 900).astype(np.uint16)


@pytest.mark.parametrize(
    ("samples", "ratio", "basis"),
    [
        pytest.param(NOISE, 10.0, "bits-stored", id="noise"),
        pytest.param(TWO_LEVELS, 10.0, "bits-stored", id="two levels"),
        pytest.param(body(rows=256, columns=256) // 64 * 64, 5.0, "lossless", id="of lossless"),
        pytest.param(body(rows=96, columns=96), 1000.0, "bits-stored", id="thousand"),
    ],
)
def test_controls_hold_on_frames_that_cannot_be_made_smaller(samples: Any, ratio: float, basis: str) -> None:
    candidates = tuple(Candidate(f"{name} x", name, ratio, SizeBasis(basis)) for name in ("jpeg2000", "tiled"))
    result = evaluate(frame(samples), Assignment(candidates), full_controls=True)
    assert [row.control_found for row in result.measures if row.control_held is False] == []


def test_rows_do_not_depend_on_the_number_of_threads() -> None:
    one = evaluate(frame(), TWO, full_controls=True)
    assert evaluate(frame(), TWO, full_controls=True, threads=3) == one
