"""Records made by hand, rich in cases, for tests of what is drawn. Their figures are invented and plausible."""

from __future__ import annotations

import datetime
import hashlib
import math
from typing import Any

from safecheck.record.candidates import CandidateEntry, LedgerEntry
from safecheck.record.delivered import DeliveredEntry, DeliveredPairEntry, ExpectationEntry
from safecheck.record.document import CodecCheckEntry, PlanEntry, RecordDocument, TableEntry
from safecheck.record.equal_damage import Between, EqualDamageEntry
from safecheck.record.figures import FigureEntry, RegionEntry
from safecheck.record.inputs import CountEntry, InputCounts, StratumEntry
from safecheck.record.outcomes import Condition, ControlEntry, OutcomeEntry
from safecheck.record.place import Place
from safecheck.record.run import RunFacts
from safecheck.record.worst import WorstPlaceEntry
from safecheck.wording import (
    ANALYSIS_CODEC,
    CAUTIONS,
    CAUTIONS_WHEN,
    NO_BOUND,
    NO_LIMITS,
    RECORD_TITLE,
    sentence_of,
)

RATIOS = (5.0, 8.0, 10.0, 15.0, 20.0)
CT = "CT, HEAD, thickness 2 to 3 mm, kernel H31s"
CR = "CR, CHEST"
UNITS = {"CT": "HU", "CR": "stored value", "MR": "rescaled, unit unspecified"}
WINDOWS = {
    "CT": ("brain (centre 40, width 80)", "bone (centre 500, width 2000)"),
    "CR": ("file window 1 (centre 2048, width 4096)",),
    "MR": ("file window 1 (centre 300, width 700)",),
}

_MEASURES: tuple[tuple[str, str, Any, float], ...] = (
    ("rmse_content", "", "higher", 1.0),
    ("max_content", "", "higher", 7.0),
    ("worst_patch_rmse", "", "higher", 2.6),
    ("bias_content", "", "higher", -0.013),
    ("p999_content", "", "higher", 4.1),
    ("edge_band_rmse", "", "higher", 1.7),
    ("worst_outside_rmse", "", "higher", 2.4),
    ("noise_sd_kept_percent", "%", "lower", -1.0),
    ("psnr_peak_bits_content_db", "dB", "lower", -1.0),
    ("psnr_peak_range_content_db", "dB", "lower", -1.0),
    ("rmse_over_noise", "times", "higher", 0.2),
    ("padding_changed", "pixels", "higher", 0.0),
)


def a_place(number: int = 1, *, row: int | None = 203, column: int | None = 318) -> Place:
    """A place under pseudonyms."""
    return Place(
        patient=f"P-{number:04x}c2a9",
        study=f"S-{number:04x}71fe",
        series=f"E-{number:04x}09bd",
        instance=f"I-{number:04x}aa10",
        series_number=2 + number % 3,
        instance_number=17 + number,
        frame=1,
        slice_position_mm=-112.5 + 2.5 * number,
        row=row,
        column=column,
    )


def candidate_names() -> tuple[tuple[str, str, float], ...]:
    """(name, codec, ratio), the analysis codec first, as a plan may have it."""
    return tuple((f"{codec} {ratio:g}:1", codec, ratio) for codec in ("tiled", "jpeg2000") for ratio in RATIOS)


def candidates(frames: int) -> tuple[CandidateEntry, ...]:
    """Ten candidates; those at 5 and 8 for context."""
    return tuple(
        CandidateEntry(
            candidate=name,
            codec=codec,
            role="candidate",
            status="context" if ratio < 10 else "proposed",
            ratio_asked=ratio,
            basis="bits-stored",
            archive_can_write=codec == "jpeg2000",
            note="" if codec == "jpeg2000" else ANALYSIS_CODEC,
            frames=frames,
            reached={"asked": frames} if ratio > 5 else {"asked": frames - 3, "reversible is smaller": 3},
        )
        for name, codec, ratio in candidate_names()
    )


def error_at(codec: str, ratio: float, modality: str) -> float:
    """An invented RMSE that grows with the ratio."""
    base = {"CT": 2.2, "CR": 1.4, "MR": 3.1}[modality]
    return base * math.sqrt(ratio / 10) * (1.12 if codec == "tiled" else 1.0) * (1 + 0.03 * ratio)


def figures(stratum: StratumEntry) -> list[FigureEntry]:
    """Figures of every candidate in one stratum."""
    found = []
    for name, codec, ratio in candidate_names():
        error = error_at(codec, ratio, stratum.modality)
        for measure, unit, worse, factor in _MEASURES:
            middle = {"%": 100 - 4 * error, "dB": 62 - 20 * math.log10(error + 0.1)}.get(unit, error * factor)
            tails = sorted((middle * 0.62, middle * 0.8, middle * 1.31, middle * 1.9))
            found.append(
                FigureEntry(
                    candidate=name,
                    stratum=stratum.stratum,
                    measure=measure,
                    unit=unit or stratum.unit,
                    worse=worse,
                    frames=stratum.frames,
                    median=middle,
                    least=tails[0],
                    p05=tails[1],
                    p95=tails[2],
                    largest=tails[3],
                    worst=a_place(),
                )
            )
        found += window_figures(stratum, name, error)
    return found


def window_figures(stratum: StratumEntry, name: str, error: float) -> list[FigureEntry]:
    """SSIM and share changed at each window."""
    found = []
    for index, window in enumerate(WINDOWS[stratum.modality]):
        loss, share = 0.012 * error / (1 + 6 * index), 6.5 * error / (1 + 20 * index)
        common: dict[str, Any] = {"candidate": name, "stratum": stratum.stratum, "window": window, "frames": 10}
        found.append(
            FigureEntry(
                **common,
                measure="ssim",
                unit="1",
                worse="lower",
                median=1 - loss,
                p05=1 - 2.1 * loss,
                p95=1 - loss / 2,
                least=1 - 4 * loss,
                largest=1 - loss / 3,
                worst=a_place(3),
            )
        )
        found.append(
            FigureEntry(
                **common,
                measure="changed_5_levels_percent",
                unit="%",
                worse="higher",
                median=share,
                p05=share / 2,
                p95=min(share * 1.6, 100),
                least=share / 3,
                largest=min(share * 2.2, 100),
                worst=a_place(4),
            )
        )
    return found


def ledger(stratum: StratumEntry) -> list[LedgerEntry]:
    """Bytes of every candidate in one stratum."""
    bits_stored, pixels = (12, 512 * 512) if stratum.modality == "CT" else (15, 1955 * 1841)
    stored = stratum.frames * pixels * bits_stored / 8
    found = []
    for name, codec, ratio in candidate_names():
        code = int(stored / ratio * (1.004 if codec == "tiled" else 0.999))
        found.append(
            LedgerEntry(
                candidate=name,
                stratum=stratum.stratum,
                frames=stratum.frames,
                bits_stored_bytes=stored,
                bits_allocated_bytes=stored * 16 / bits_stored,
                content_bytes=stored * 0.44,
                lossless_bytes=stratum.lossless_bytes,
                lossless_codecs={"jpeg-ls": stratum.frames - 2, "jpeg2000 5/3": 2},
                bytes_now=stratum.bytes_now,
                code_bytes=code,
                ratio_bits_stored=stored / code,
                ratio_bits_allocated=stored * 16 / bits_stored / code,
                ratio_content=stored * 0.44 / code,
                times_smaller_than_lossless=(stratum.lossless_bytes or 0) / code,
                times_smaller_than_now=stratum.bytes_now / code,
                bits_per_pixel=code * 8 / stratum.frames / pixels,
                ratio_bits_stored_least=ratio * 0.993,
                ratio_bits_stored_median=ratio * (0.997 if codec == "tiled" else 1.001),
                ratio_bits_stored_largest=ratio * 1.009,
            )
        )
    return found


def equal_damages(stratum: StratumEntry) -> list[EqualDamageEntry]:
    """JPEG 2000 at 10:1 beside tiled, by the RMSE in content and by the largest error, some of it beyond the run."""
    common: dict[str, Any] = {"reference": "jpeg2000 10:1", "stratum": stratum.stratum, "unit": stratum.unit}
    common |= {"worse": "higher", "candidates": 5, "reference_ratio": 10.01, "reference_bits_per_pixel": 1.199}
    return [
        EqualDamageEntry(
            **common,
            codec="tiled",
            measure="rmse_content",
            frames=stratum.frames,
            frames_below=2,
            reference_value=2.86,
            ratio_median=Between(least=8.97, most=8.97),
            ratio_p05=Between(least=7.31, most=7.31),
            ratio_p95=Between(least=11.52, most=11.52),
            bits_per_pixel_median=Between(least=1.338, most=1.338),
        ),
        EqualDamageEntry(
            **common,
            codec="tiled, size 16",
            measure="rmse_content",
            frames=stratum.frames - 3,
            frames_above=stratum.frames - 5,
            frames_unchanged=1,
            frames_without=2,
            reference_value=2.86,
            ratio_median=Between(least=20.03),
            ratio_p05=Between(least=12.2, most=12.9),
            ratio_p95=Between(least=20.1),
            bits_per_pixel_median=Between(most=0.599),
        ),
        EqualDamageEntry(
            **common,
            codec="tiled",
            measure="region_max",
            region="left basal ganglia",
            region_role="target",
            limits=("largest error in the target",),
            frames=1,
            reference_value=17.4,
            ratio_median=Between(least=9.4, most=9.4),
            ratio_p05=Between(least=9.4, most=9.4),
            ratio_p95=Between(least=9.4, most=9.4),
            bits_per_pixel_median=Between(least=1.277, most=1.277),
        ),
    ]


def outcomes() -> list[OutcomeEntry]:
    """Two limits against ten candidates, all three outcomes among them."""
    found = []
    for limit, measure, bound, modality in (
        ("error inside the head", "rmse_content", 5.0, "CT"),
        ("worst place of the chest", "worst_patch_rmse", 9.0, "CR"),
    ):
        for name, codec, ratio in candidate_names():
            worst = 1.9 * error_at(codec, ratio, modality) * (2.6 if measure != "rmse_content" else 1)
            outcome: Any = "within declared limits" if worst <= bound else "outside declared limits"
            if modality == "CR" and ratio == 20:
                outcome = "not evaluated"
            outside = outcome == "outside declared limits"
            missing = outcome == "not evaluated"
            found.append(
                OutcomeEntry(
                    limit=limit,
                    measure=measure,
                    unit=UNITS[modality],
                    side="at most",
                    bound=bound,
                    scope=f"every frame, {modality}",
                    declared_by="medical physicist",
                    declared_on="2026-11-02",
                    candidate=name,
                    status="context" if ratio < 10 else "proposed",
                    outcome=outcome,
                    reason="no value in the limit's unit and scope" if missing else "",
                    values=0 if missing else 300,
                    values_outside=41 if outside else 0,
                    values_missing=0,
                    studies=0 if missing else 30,
                    studies_within=0 if missing else 30 - 7 * outside,
                    patients=0 if missing else 30,
                    patients_within=0 if missing else 30 - 7 * outside,
                    upper_bound_percent=None,
                    bound_text="at most 9.5 % of patients" if modality == "CT" and not outside else NO_BOUND,
                    worst_value=None if missing else worst,
                    worst=None if missing else a_place(5),
                    over_compressed_also_within=True if (modality, ratio) == ("CR", 10.0) else None,
                )
            )
    return found


def controls(*, held: bool) -> tuple[ControlEntry, ...]:
    """Every kind of control."""
    rows: tuple[tuple[Any, str, int, str], ...] = (
        ("reversible", "jpeg-ls", 312, "a reversible code gives back every sample: largest error exactly 0"),
        ("repeat", "jpeg2000", 17, "the same frame gives the same code again, byte for byte"),
        ("repeat", "tiled", 17, "the same frame gives the same code again, byte for byte"),
        ("over-compressed", "jpeg2000", 17, "RMSE in content above that of every candidate; constant frames exempt"),
        ("planted", "", 17, "a known displacement in one patch comes back with its size, row and column"),
        ("reversible", "tiled", 17, "a reversible code gives back every sample: largest error exactly 0"),
    )
    found = []
    for kind, codec, frames, text in rows:
        lost = 0 if held or codec != "jpeg-ls" else 1
        found.append(
            ControlEntry(
                control=kind,
                codec=codec,
                frames=frames,
                held=frames - lost,
                not_held=lost,
                text=text,
                first_not_held=a_place(9) if lost else None,
                found="largest error 1 HU at row 203, column 318" if lost else "",
            )
        )
    return tuple(found)


def worst_places(strata: tuple[StratumEntry, ...], *, crop: str = "") -> list[WorstPlaceEntry]:
    """Three per candidate and stratum."""
    found = []
    for stratum in strata:
        rows, columns = (512, 512) if stratum.modality != "CR" else (1955, 1841)
        for name, codec, ratio in candidate_names():
            for rank in (1, 2, 3):
                size = error_at(codec, ratio, stratum.modality) * 5 / rank
                row, column = int(37 * ratio * rank) % rows // 8 * 8, int(61 * ratio * rank) % columns // 8 * 8
                found.append(
                    WorstPlaceEntry(
                        candidate=name,
                        stratum=stratum.stratum,
                        rank=rank,
                        measure="worst_patch_rmse",
                        unit=stratum.unit,
                        value=size,
                        place=a_place(rank, row=row, column=column),
                        rows=rows,
                        columns=columns,
                        size_rows=8,
                        size_columns=8,
                        in_region="left basal ganglia" if rank == 2 else "",
                        crop=crop,
                        may_show_text=rank == 3,
                    )
                )
    return found


def regions() -> list[RegionEntry]:
    """A target with contrast, a uniform region without, and one with nulls."""
    found = []
    for name, codec, ratio in candidate_names():
        error = error_at(codec, ratio, "CT")
        common: dict[str, Any] = {"candidate": name, "unit": "HU", "frames": 24}
        found.append(
            RegionEntry(
                **common,
                region="r1",
                label="left basal ganglia, caudate head and lentiform nucleus, drawn by hand",
                role="target",
                area_mm2=412.4,
                area_pixels=1870.25,
                rmse_median=error * 0.9,
                rmse_largest=error * 1.6,
                bias_median=-0.02 * error,
                bias_largest_absolute=-0.31,
                max_largest=error * 6,
                mean_before=36.21,
                mean_after=36.18,
                sd_before=4.61,
                sd_after=4.61 - error * 0.1,
                background="r2",
                contrast_before=6.1,
                contrast_after=6.1 - error * 0.1,
                contrast_kept_percent=100 - error,
                contrast_kept_percent_p05=100 - 2 * error,
                contrast_kept_percent_least=100 - 3 * error,
                cnr_before=1.31,
                cnr_after=1.31 + error * 0.02,
                cnr_after_least=1.29,
                noise_removed_percent=3.1 * error,
                noise_removed_percent_largest=4.2 * error,
                worst=a_place(6),
            )
        )
        found.append(
            RegionEntry(
                **common,
                region="r2",
                label="white matter",
                role="background",
                area_pixels=904.0,
                rmse_median=error * 0.7,
                rmse_largest=error,
                bias_median=0.004,
                bias_largest_absolute=0.11,
                max_largest=error * 4,
            )
        )
    return found


def delivered() -> DeliveredEntry:
    """Five pairs; header values as found."""
    return DeliveredEntry(
        pairs=61,
        pairs_measured=56,
        pairs_unchanged=2,
        pairs_out_of_scope=4,
        originals_without_copy=2,
        copies_without_original=1,
        matched_by={"Source Image Sequence": 40, "series and instance number": 21},
        expectations=(
            ExpectationEntry(
                attribute="Lossy Image Compression (0028,2110)",
                asked="01 once an image has been compressed irreversibly",
                found={"01": 58, "00": 2, "": 1},
                as_asked=58,
                not_as_asked=3,
            ),
            ExpectationEntry(
                attribute="SOP Instance UID (0008,0018)",
                asked="a new one for a compressed version of another image",
                found={"new": 61},
                as_asked=61,
                not_as_asked=0,
            ),
        ),
        shown=tuple(
            DeliveredPairEntry(
                original=a_place(number, row=None, column=None),
                how="Source Image Sequence",
                ratio_header="338.6873" if number == 0 else "",
                ratio_bits_allocated=10.67 * (number + 1),
                ratio_bits_stored=10.0 * (number + 1),
                max_frame=2080.0 / (number + 1),
                rmse_frame=121.042 / (number + 1),
                unit="HU",
            )
            for number in range(5)
        ),
    )


def plan_content() -> dict[str, Any]:
    """A plan as read."""
    return {
        "version": 1,
        "change": {
            "title": "Recompress archive copies of head CT and chest radiographs after 90 days",
            "reference": "CHG-2026-0417",
            "declared_by": "medical physicist",
            "declared_on": "2026-11-02",
            "compressed_copy": "the archive copy",
            "compressed_when": "90 days after the report",
        },
        "sample": {"drawn": "random", "source": "CT head and CR chest of 2025, main site"},
        "candidates": [
            {"codec": codec, "ratio": ratio, "basis": "bits-stored", "status": "proposed"}
            for _, codec, ratio in candidate_names()
        ],
        "limits": [
            {
                "name": "error inside the head",
                "measure": "rmse_content",
                "unit": "HU",
                "at_most": 5.0,
                "modality": "CT",
                "declared_by": "medical physicist",
                "declared_on": "2026-11-02",
            }
        ],
        "claim": None,
        "allowed": {"refused_percent": 2.0, "excluded_percent": 100.0},
    }


def stratum_of(name: str, modality: str, frames: int) -> StratumEntry:
    """A stratum with bytes that suit its frames."""
    size = 512 * 512 * 2 if modality != "CR" else 1955 * 1841 * 2
    return StratumEntry(
        stratum=name,
        modality=modality,
        unit=UNITS[modality],
        patients=min(frames, 30),
        studies=min(frames, 31),
        series=min(frames, 33),
        frames=frames,
        bytes_now=frames * size // 2,
        lossless_bytes=frames * size * 3 // 10,
    )


def make_record(
    *,
    strata: tuple[StratumEntry, ...] | None = None,
    limits: list[OutcomeEntry] | None = None,
    held: bool = True,
    crop: str = "",
    **changed: Any,
) -> RecordDocument:
    """Make a rich record; `changed` replaces whole entries."""
    groups = strata if strata is not None else (stratum_of(CT, "CT", 288), stratum_of(CR, "CR", 24))
    frames = sum(item.frames for item in groups)
    lines = outcomes() if limits is None else limits
    outside = any(item.outcome == "outside declared limits" and item.status == "proposed" for item in lines)
    plan = plan_content()
    left = (("duplicate", 4), ("not-an-image", 6), ("palette", 2), ("range", 1), ("truncated", 2))
    counts = [
        CountEntry(
            side="original",
            status="refused" if reason in ("range", "truncated") else "excluded",
            reason=reason,
            sentence=sentence_of(reason),
            files=files,
        )
        for reason, files in left
    ]
    entries: dict[str, Any] = {
        "schema_version": "1",
        "title": RECORD_TITLE,
        "plan": PlanEntry(source="file", sha256=hashlib.sha256(repr(plan).encode()).hexdigest(), content=plan),
        "key_id": "7f3a90c1",
        "versions": {"safecheck": "0.1.0", "python": "3.11.7", "numpy": "2.4.6", "openjpeg": "2.5.3"},
        "selftest": (
            CodecCheckEntry(
                codec="jpeg2000", library="openjpeg", version="2.5.3", available=True, reversible_exact=True
            ),
            CodecCheckEntry(codec="tiled", library="own", version="1", available=True, reversible_exact=True),
            CodecCheckEntry(
                codec="jpeg-xl", library="imagecodecs", version="", available=False, detail="library is missing"
            ),
        ),
        "inputs": InputCounts(
            files=frames + 15,
            assessed=frames,
            excluded=12,
            refused=3,
            frames_assessed=frames,
            frames_refused=0,
            patients=52,
            studies=55,
            series=57,
            patient_unknown_studies=1,
            delivered_files=62,
            delivered_assessed=61,
            delivered_excluded=0,
            delivered_refused=1,
        ),
        "left_out": (
            *counts,
            CountEntry(side="delivered", status="refused", reason="syntax", sentence=sentence_of("syntax"), files=1),
        ),
        "strata": groups,
        "candidates": candidates(frames),
        "ledger": tuple(item for stratum in groups for item in ledger(stratum)),
        "figures": tuple(item for stratum in groups for item in figures(stratum)),
        "equal_damage": tuple(item for stratum in groups for item in equal_damages(stratum)),
        "outcomes": tuple(lines),
        "outcomes_text": "2 limits against 6 proposed candidates: 4 outside declared limits" if lines else NO_LIMITS,
        "controls": controls(held=held),
        "controls_held": held,
        "worst_places": tuple(worst_places(groups, crop=crop)),
        "regions": tuple(regions()),
        "regions_without_frame": ("cerebellum",),
        "delivered": delivered(),
        "content_rules": {"ct-air-1": 288, "padding-only-1": 24},
        "content_reasons": {"ct-air-1 leaves under 5 % of the frame": 2},
        "notes": {"overlay bits cleared from the unused high bits": 3},
        "cautions": (*CAUTIONS, CAUTIONS_WHEN["many_limits"], *(() if held else (CAUTIONS_WHEN["controls"],))),
        "conditions": (Condition(code=10, text="a proposed candidate outside a declared limit"),) if outside else (),
        "exit_code": 10 if outside else 0,
        "exit_text": "a proposed candidate outside a declared limit"
        if outside
        else "ran, controls held, no proposed candidate outside a declared limit",
        "tables": tuple(
            TableEntry(table=name, file=f"{name}.parquet", sha256=hashlib.sha256(name.encode()).hexdigest(), rows=3744)
            for name in ("measures", "regions", "windows", "inputs")
        ),
    }
    if not held:
        entries |= {
            "exit_code": 4,
            "exit_text": "controls not held, run invalid",
            "conditions": (Condition(code=4, text="controls not held, run invalid"), *entries["conditions"]),
        }
    return RecordDocument(**(entries | changed))


def make_run(**changed: Any) -> RunFacts:
    """Facts of a run of 12 minutes."""
    entries: dict[str, Any] = {
        "started": datetime.datetime(2026, 12, 1, 9, 14, 7, tzinfo=datetime.UTC),
        "finished": datetime.datetime(2026, 12, 1, 9, 26, 31, tzinfo=datetime.UTC),
        "workers": 2,
        "seconds": {"assess": 688.2, "statistics": 3.1},
        "host": "pacs-workstation-9",
        "system": "Linux x86_64, Python 3.11.7",
        "plan_declared": "before the first results",
    }
    return RunFacts(**(entries | changed))
