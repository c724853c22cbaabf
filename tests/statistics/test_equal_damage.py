"""Equal damage over rows made by hand, whose power laws are known."""

from __future__ import annotations

import math
import random
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from safecheck.documents import from_mapping
from safecheck.measures.catalogue import MEASURES
from safecheck.policy.plan import CandidatePlan, Plan
from safecheck.record.equal_damage import Between, EqualDamageEntry
from safecheck.statistics.counts import candidate_entries
from safecheck.statistics.curve_rows import codec_of
from safecheck.statistics.equal_damage import equal_damage, reference_of
from safecheck.statistics.groups import Groups
from safecheck.statistics.values import damage_of
from tests.statistics.tables import measured, reader, row
from tests.statistics.test_summary import limit, plan

RATIOS = (5.0, 10.0, 20.0)
ONE = "jpeg2000 10:1"
LAWS = {"jpeg2000": (0.5, 0.8), "tiled": (0.4, 0.8)}
"""Codec -> (a, b) of RMSE = a ratio^b."""


def a_plan(**changes: Any) -> Plan:
    """Two codecs at three ratios each, JPEG 2000 at 10:1 named as the reference."""
    made = [{"codec": codec, "ratio": ratio} for codec in ("jpeg2000", "tiled") for ratio in RATIOS]
    return plan(**({"candidates": made, "reference": ONE} | changes))


def law(codec: str, ratio: float, scale: float = 1.0) -> float:
    a, b = LAWS[codec]
    return a * scale * float(ratio**b)


def one_frame(study: str, *, off: float = 1.01, scale: float = 1.0, **given: Any) -> list[Any]:
    """Rows of a frame: each ratio achieved `off` times the asked one, `scale` the factor of tiled's law."""
    return [
        measured(
            f"{codec} {ratio:g}:1",
            study=study,
            ratio_bits_stored=off * ratio,
            **({"rmse_content": law(codec, off * ratio, scale if codec == "tiled" else 1.0)} | given),
        )
        for codec in LAWS
        for ratio in RATIOS
    ]


Found = Callable[..., list[EqualDamageEntry]]


@pytest.fixture
def found(tmp_path: Path) -> Found:
    def of(
        measures: list[Any],
        made: Plan | None = None,
        *,
        windows: list[Any] | None = None,
        regions: list[Any] | None = None,
    ) -> list[EqualDamageEntry]:
        rows = {"measures": measures, "windows": windows or [], "regions": regions or []}
        groups = {table: Groups.of(reader(tmp_path, table, each)) for table, each in rows.items()}
        declared = made or a_plan()
        candidates = tuple(candidate_entries(declared, groups["measures"], frozenset({"jpeg2000", "jpeg"})))
        return list(equal_damage(declared, groups, candidates))

    return of


def test_the_ratio_of_equal_damage_follows_from_the_laws_of_two_codecs(found: Found) -> None:
    scales = {"S-1": 0.9, "S-2": 1.0, "S-3": 1.1, "S-4": 1.2}
    rows = [each for study, scale in scales.items() for each in one_frame(study, scale=scale)]
    (entry,) = found(rows)
    # 0.5 R^0.8 = 0.4 s r^0.8, so r = R (0.5 / (0.4 s))^(1 / 0.8), R = 10.1: straight in both logarithms, so exact.
    ratios = np.array([10.1 * (0.5 / (0.4 * scale)) ** 1.25 for scale in scales.values()])
    median, low, high = np.percentile(ratios, (50, 5, 95))
    assert entry.ratio_median.least == entry.ratio_median.most == pytest.approx(median, rel=1e-12)
    assert entry.ratio_p05.least == entry.ratio_p05.most == pytest.approx(low, rel=1e-12)
    assert entry.ratio_p95.least == entry.ratio_p95.most == pytest.approx(high, rel=1e-12)
    # 12 bits stored, one channel.
    assert entry.bits_per_pixel_median.least == pytest.approx(np.median(12 / ratios), rel=1e-12)
    assert entry.reference_ratio == pytest.approx(10.1)
    assert entry.reference_bits_per_pixel == pytest.approx(12 / 10.1)
    assert entry.reference_value == pytest.approx(0.5 * 10.1**0.8)
    assert (entry.reference, entry.codec, entry.measure, entry.unit) == (ONE, "tiled", "rmse_content", "HU")
    assert (entry.frames, entry.frames_below, entry.frames_above, entry.candidates) == (4, 0, 0, 3)


def test_frames_beyond_what_was_run_are_counted_on_their_side_and_never_extrapolated(found: Found) -> None:
    # Equal damage at 10.1 / s^1.25 x 1.25^1.25; tiled was run from 5.05 to 20.2.
    rows = [each for n, scale in enumerate((9.0, 1.0, 1.0, 1.0, 0.1)) for each in one_frame(f"S-{n}", scale=scale)]
    (entry,) = found(rows)
    assert (entry.frames, entry.frames_below, entry.frames_above) == (5, 1, 1)
    assert entry.ratio_median.least == entry.ratio_median.most == pytest.approx(10.1 * 1.25**1.25)
    assert entry.ratio_p05.least is None
    assert entry.ratio_p95.most is None


@pytest.mark.parametrize(
    ("scale", "ratio", "bits"),
    [
        (0.1, Between(least=20.2), Between(most=12 / 20.2)),
        (9.0, Between(most=5.05), Between(least=12 / 5.05)),
    ],
    ids=["above", "below"],
)
def test_where_most_frames_lie_beyond_so_does_the_median(
    found: Found, scale: float, ratio: Between, bits: Between
) -> None:
    rows = [each for n, each_scale in enumerate((scale, scale, 1.0)) for each in one_frame(f"S-{n}", scale=each_scale)]
    (entry,) = found(rows)
    assert entry.ratio_median == ratio
    assert entry.bits_per_pixel_median == bits


def test_where_most_frames_lie_beyond_on_both_sides_there_is_no_median(found: Found) -> None:
    rows = [each for n, scale in enumerate((0.1, 9.0, 1.0)) for each in one_frame(f"S-{n}", scale=scale)]
    (entry,) = found(rows)
    assert entry.ratio_median == entry.bits_per_pixel_median == Between()
    assert (entry.frames, entry.frames_below, entry.frames_above) == (3, 1, 1)


def test_a_codec_beside_itself_under_another_name_has_its_own_ratio(found: Found) -> None:
    made = a_plan(
        candidates=[
            *({"codec": "jpeg2000", "ratio": ratio} for ratio in RATIOS),
            *({"codec": "jpeg2000", "ratio": ratio, "settings": {"levels": 5}} for ratio in RATIOS),
        ]
    )
    rows = [
        measured(f"jpeg2000 {ratio:g}:1{rest}", study=study, ratio_bits_stored=off * ratio, rmse_content=off * ratio)
        for study, off in (("S-1", 0.99), ("S-2", 1.0), ("S-3", 1.02))
        for ratio in RATIOS
        for rest in ("", ", levels 5")
    ]
    (entry,) = found(rows, made)
    assert entry.codec == "jpeg2000, levels 5"
    assert entry.ratio_median == Between(least=10.0, most=10.0)
    assert entry.reference_ratio == 10.0


def test_permuting_studies_and_rows_changes_nothing(found: Found) -> None:
    scales = (0.9, 1.0, 1.13, 9.0, 0.1, 1.3)
    rows = [each for n, scale in enumerate(scales) for each in one_frame(f"S-{n}", scale=scale)]
    renamed = [each for n, scale in enumerate(scales) for each in one_frame(f"S-{5 - n}", scale=scale)]
    shuffled = renamed.copy()
    random.Random(4).shuffle(shuffled)
    assert found(rows) == found(renamed) == found(shuffled)


def test_each_stratum_stands_alone(found: Found) -> None:
    rows = one_frame("S-1") + one_frame("S-2", scale=1.2, stratum="CT, CHEST", body_part="CHEST")
    assert [(entry.stratum, entry.frames) for entry in found(rows)] == [("CT, CHEST", 1), ("CT, HEAD", 1)]


def test_with_one_codec_there_is_nothing(found: Found) -> None:
    made = plan(candidates=[{"codec": "jpeg2000", "ratio": ratio} for ratio in RATIOS])
    assert found([each for each in one_frame("S-1") if each.codec == "jpeg2000"], made) == []


def test_where_only_one_codec_ran_there_is_nothing(found: Found) -> None:
    assert found([each for each in one_frame("S-1") if each.codec == "jpeg2000"]) == []


def test_controls_and_delivered_copies_are_no_points(found: Found) -> None:
    rows = one_frame("S-1")
    others = [
        measured("over-compressed, tiled", role="over-compressed", codec="tiled", rmse_content=3.0),
        measured("delivered copies", role="delivered", codec="delivered", rmse_content=3.0),
    ]
    assert found(rows + others) == found(rows)


def test_the_neighbour_of_an_integer_dial_is_a_point_of_its_codec(found: Found) -> None:
    made = plan(candidates=[{"codec": "jpeg2000", "ratio": 10}, {"codec": "jpeg", "ratio": 10}], reference=ONE)
    rows = [
        measured(ONE, ratio_bits_stored=10.0, rmse_content=4.0),
        measured("jpeg 10:1", ratio_bits_stored=12.1, rmse_content=9.0, reached="bracket"),
        measured("jpeg 10:1", role="bracket", ratio_bits_stored=4.9, rmse_content=1.0, reached="bracket"),
    ]
    (entry,) = found(rows, made)
    # log 4 / log 9 of the way from 4.9 to 12.1.
    ratio = 4.9 * (12.1 / 4.9) ** (math.log(4) / math.log(9))
    assert entry.ratio_median.least == entry.ratio_median.most == pytest.approx(ratio, rel=1e-12)
    assert (entry.frames, entry.candidates) == (1, 1)


def test_the_neighbour_of_the_reference_is_not_the_reference(found: Found) -> None:
    made = plan(candidates=[{"codec": "jpeg2000", "ratio": 10}, {"codec": "jpeg", "ratio": 10}], reference="jpeg 10:1")
    rows = [
        measured("jpeg 10:1", ratio_bits_stored=12.0, rmse_content=4.0),
        measured("jpeg 10:1", role="bracket", ratio_bits_stored=8.0, rmse_content=2.0),
        measured(ONE, ratio_bits_stored=11.0, rmse_content=4.0),
    ]
    (entry,) = found(rows, made)
    assert (entry.reference_ratio, entry.reference_value) == (12.0, 4.0)
    assert entry.ratio_median == Between(least=11.0, most=11.0)


def test_frames_that_tell_nothing_are_counted_by_why(found: Found) -> None:
    rows = one_frame("S-1")
    rows += [each for each in one_frame("S-2") if each.codec == "jpeg2000"]
    rows += one_frame("S-3", rmse_content=0.0)
    rows += one_frame("S-4", rmse_content=None)
    (entry,) = found(rows)
    assert (entry.frames, entry.frames_unchanged, entry.frames_without) == (1, 1, 2)


def test_a_measure_named_by_a_limit_is_taken_in_the_limits_scope(found: Found) -> None:
    made = a_plan(limits=[limit(name="worst", measure="worst_patch_rmse", modality="CT"), limit(name="all")])
    rows = one_frame("S-1", worst_patch_rmse=2.0) + one_frame("S-2", worst_patch_rmse=2.0, modality="MR", stratum="MR")
    assert [(entry.measure, entry.stratum, entry.limits) for entry in found(rows, made)] == [
        ("rmse_content", "CT, HEAD", ("all",)),
        ("rmse_content", "MR", ("all",)),
        ("worst_patch_rmse", "CT, HEAD", ("worst",)),
    ]


def of_window(study: str, values: dict[str, float], window: str = "brain") -> list[Any]:
    known = {"study": study, "instance": f"I of {study}", "frame": 1, "stratum": "CT, HEAD", "role": "candidate"}
    return [row("windows", candidate=name, window=window, ssim=value, **known) for name, value in values.items()]


def test_ssim_falls_and_its_ratio_is_found_from_what_is_missing_to_1(found: Found) -> None:
    lost = {codec: {ratio: 0.001 * a * ratio for ratio in RATIOS} for codec, a in (("jpeg2000", 2.0), ("tiled", 1.6))}
    values = {f"{codec} {ratio:g}:1": 1 - loss for codec, each in lost.items() for ratio, loss in each.items()}
    declared = limit(name="shape", measure="ssim", unit="1", at_least=0.9, window="brain")
    declared.pop("at_most")
    windows = of_window("S-1", values) + of_window("S-1", values, window="bone")
    made = a_plan(limits=[declared])
    rows = one_frame("S-1", off=1.0)
    _, entry = found(rows, made, windows=windows)
    assert (entry.measure, entry.window, entry.worse, entry.unit) == ("ssim", "brain", "lower", "1")
    # 0.002 x 10 = 0.0016 x r.
    assert entry.ratio_median.least == entry.ratio_median.most == pytest.approx(12.5, rel=1e-9)
    assert entry.reference_value == pytest.approx(0.98)


def of_region(study: str, label: str, name: str, values: dict[str, float]) -> list[Any]:
    known = {"study": study, "instance": f"I of {study}", "frame": 1, "stratum": "CT, HEAD", "role": "candidate"}
    return [
        row("regions", candidate=each, region=name, label=label, region_role="target", unit="HU", max=value, **known)
        for each, value in values.items()
    ]


def test_the_maximum_in_a_region_is_that_of_the_worst_of_its_label(found: Found) -> None:
    errors = {f"{codec} {ratio:g}:1": law(codec, ratio) for codec in LAWS for ratio in RATIOS}
    halved = {name: value / 2 for name, value in errors.items()}
    regions = of_region("S-1", "nucleus", "left", errors) + of_region("S-1", "nucleus", "right", halved)
    _, entry = found(one_frame("S-1", off=1.0), regions=regions)
    assert (entry.measure, entry.region, entry.region_role, entry.unit) == ("region_max", "nucleus", "target", "HU")
    assert entry.frames == 1
    assert entry.reference_value == pytest.approx(law("jpeg2000", 10))
    assert entry.ratio_median.least == pytest.approx(10 * 1.25**1.25, rel=1e-12)


def test_a_row_without_its_row_of_measures_takes_no_part(found: Found) -> None:
    errors = {f"{codec} {ratio:g}:1": law(codec, ratio) for codec in LAWS for ratio in RATIOS}
    regions = of_region("S-1", "nucleus", "left", errors)
    with_more = regions + of_region("S-9", "nucleus", "left", errors)
    rows = one_frame("S-1", off=1.0)
    assert found(rows, regions=with_more) == found(rows, regions=regions)


@pytest.mark.parametrize(
    ("measure", "values", "damage"),
    [
        ("bias_content", [-2.0, 3.0], [2.0, 3.0]),
        ("ssim", [1.0, 0.98], [0.0, 0.02]),
        ("noise_sd_kept_percent", [100.0, 91.0, 104.0], [0.0, 9.0, -4.0]),
        # 20 dB: an error of a tenth of the peak.
        ("psnr_peak_bits_db", [math.inf, 20.0, 40.0], [0.0, 0.1, 0.01]),
        ("padding_changed", [0.0, 7.0], [0.0, 7.0]),
    ],
    ids=lambda value: value if isinstance(value, str) else "",
)
def test_damage_grows_with_the_change_and_is_0_without(measure: str, values: list[float], damage: list[float]) -> None:
    assert damage_of(MEASURES[measure], np.array(values)) == pytest.approx(damage, abs=1e-12)


@pytest.mark.parametrize(
    ("given", "dial", "name"),
    [
        ({"codec": "tiled", "ratio": 10}, "step", "tiled"),
        ({"codec": "tiled", "ratio": 10, "settings": {"size": 16}}, "step", "tiled, size 16"),
        ({"codec": "jpeg", "settings": {"quality": 85}}, "quality", "jpeg"),
        ({"codec": "tiled", "ratio": 10, "outside": "flatten"}, "step", "tiled, outside flattened"),
        ({"codec": "tiled", "ratio": 10, "basis": "content"}, "step", "tiled"),
    ],
    ids=["by ratio", "with a setting", "by its dial", "air flattened", "another basis"],
)
def test_candidates_alike_but_for_their_size_lie_on_one_curve(given: dict[str, Any], dial: str, name: str) -> None:
    assert codec_of(from_mapping(CandidatePlan, given), dial) == name


@pytest.mark.parametrize(
    ("made", "name"),
    [
        ([{"codec": "tiled", "ratio": 8}, {"codec": "jpeg2000", "ratio": 20}], "jpeg2000 20:1"),
        ([{"codec": "jpeg2000", "ratio": 8, "status": "context"}, {"codec": "tiled", "ratio": 8}], "tiled 8:1"),
        ([{"codec": "jpeg", "settings": {"quality": 85}}, {"codec": "tiled", "ratio": 8}], "tiled 8:1"),
        ([{"codec": "jpeg", "settings": {"quality": 85}}], "jpeg, quality 85"),
        ([{"codec": "jpeg2000", "ratio": ratio} for ratio in (20, 5, 15, 10, 8)], "jpeg2000 10:1"),
        ([{"codec": "jpeg2000", "ratio": ratio} for ratio in (20, 5)], "jpeg2000 5:1"),
    ],
    ids=[
        "codecs of archives first",
        "proposed first",
        "at a ratio first",
        "a setting where there is no ratio",
        "the middle ratio",
        "the lower of two",
    ],
)
def test_without_a_name_the_reference_is_the_middle_ratio_of_the_first_codec_proposed(
    tmp_path: Path, made: list[dict[str, Any]], name: str
) -> None:
    declared = plan(candidates=made)
    groups = Groups.of(reader(tmp_path, "measures", [measured(ONE)]))
    entries = tuple(candidate_entries(declared, groups, frozenset({"jpeg2000", "jpeg"})))
    assert reference_of(declared, entries) == name


def test_a_codec_that_took_no_frame_is_no_reference(tmp_path: Path) -> None:
    declared = plan(candidates=[{"codec": "jpeg", "ratio": 10}, {"codec": "jpeg2000", "ratio": 10}])
    rows = [measured("jpeg2000 10:1", codec="jpeg2000")]
    groups = Groups.of(reader(tmp_path, "measures", rows))
    entries = tuple(candidate_entries(declared, groups, frozenset({"jpeg2000", "jpeg"})))
    assert reference_of(declared, entries) == "jpeg2000 10:1"
