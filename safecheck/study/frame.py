"""One frame through all transforms, tile sizes, kept shares and ratios."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor

import numpy as np

from safecheck.errors import CannotEncode
from safecheck.frames import Frame, SizeBasis
from safecheck.record.transforms import Finding, Fixed, StudiedFrame
from safecheck.regions.region import RegionSet
from safecheck.study.areas import TiledAreas, tile_areas
from safecheck.study.coded import CODED_SIZES, RATIOS, Coded, Split, code_at, split_error
from safecheck.study.findings import Findings, comparisons
from safecheck.study.gains import complex_variances, gain_db, markov_gain_db, neighbour_correlation, variances
from safecheck.study.kept import SHARES_PERCENT, keep, kept_count
from safecheck.study.pictures import PICTURED_PERCENT, PICTURED_RATIO, Shown, choose_part
from safecheck.study.subject import Subject, subject_of
from safecheck.study.tiles import SIZES, TRANSFORMS, Reals, basis, forward

__all__ = ["CORRELATION", "study_frame"]

CORRELATION = 0.95
"""Of the Markov field that frames are set beside."""


def study_frame(frame: Frame, regions: RegionSet | None, *, with_images: bool) -> StudiedFrame | None:
    """Study one frame.

    Parameters
    ----------
    frame
        As it lies in the archive.
    regions
        None for content alone.
    with_images
        Whether pictures are taken; never of a frame that may show text.

    Returns
    -------
    StudiedFrame or None
        None where every pixel is padding.
    """
    subject = subject_of(frame, regions)
    if subject is None:
        return None
    shown = choose_part(subject) if with_images and not frame.origin.may_show_text else None
    kept, coded = Findings(subject), Findings(subject)
    correlations = _correlations(subject)
    for name, value in zip(("correlation_down", "correlation_across"), correlations, strict=True):
        kept.add(name, value, area="content")
    # Compiled code, linear algebra and sorting leave the interpreter's lock, so the two go on beside each other.
    with ThreadPoolExecutor(1) as beside:
        coding = beside.submit(_study_codes, coded, shown)
        _study_tiles(kept, shown, correlations)
        notes = coding.result()
    found = (*kept.found, *coded.found)
    return _studied(subject, (*subject.notes, *notes), (*found, *comparisons(found)), shown)


def _studied(
    subject: Subject, notes: tuple[str, ...], findings: tuple[Finding, ...], shown: Shown | None
) -> StudiedFrame:
    """Put together what is known of a frame."""
    frame, format_ = subject.frame, subject.raster.format
    return StudiedFrame(
        key=frame.key,
        modality=frame.origin.modality,
        stratum=frame.stratum,
        unit=subject.unit,
        rows=subject.raster.shape[0],
        columns=subject.raster.shape[1],
        bits_stored=format_.bits_stored,
        content_rule=subject.content.rule,
        content_pixels=subject.content.pixels,
        may_show_text=frame.origin.may_show_text,
        under_18=frame.origin.under_18,
        source_lossy=frame.origin.history.lossy,
        notes=notes,
        findings=findings,
        pictures=shown.taken() if shown else None,
    )


def _correlations(subject: Subject) -> tuple[float | None, float | None]:
    """Correlation of content pixels with the next, down and across."""
    samples = subject.raster.samples.astype(np.float64)
    down, across = (neighbour_correlation(samples, subject.content.mask, axis) for axis in (0, 1))
    return down, across


def _study_tiles(findings: Findings, shown: Shown | None, correlations: tuple[float | None, float | None]) -> None:
    """Kept shares and gains of every tile size and transform."""
    for size in SIZES:
        pixels, areas = findings.subject.tiles(size), tile_areas(findings.subject.areas, size)
        findings.add("inner_tiles", int(np.count_nonzero(areas.inner)), area="inner tiles", size=size)
        for transform in TRANSFORMS:
            tiles = forward(pixels, basis(transform, size))
            _study_kept(findings, shown, tiles, areas, transform, size)
            _add_gain(findings, "gain", variances(tiles[areas.inner]), transform, size)
            _add_models(findings, transform, size, correlations)
        _add_gain(findings, "gain_complex", complex_variances(pixels[areas.inner], size), "fourier", size)


def _study_kept(
    findings: Findings, shown: Shown | None, tiles: Reals, areas: TiledAreas, transform: str, size: int
) -> None:
    """Errors at every share of which a tile of this size keeps at least one coefficient."""
    counts = {share: count for share in SHARES_PERCENT if (count := kept_count(size, share))}
    every = keep(tiles, basis(transform, size), list(counts.values()))
    for (share, count), kept in zip(counts.items(), every, strict=True):
        fixed = _fixed("kept share", share)
        findings.add("kept_coefficients", count, transform=transform, size=size, fixed=fixed)
        findings.add("kept_share", 100 * count / size**2, transform=transform, size=size, fixed=fixed)
        errors = areas.root_mean_squares(kept.dropped_energies, kept.errors)
        findings.add_errors(errors, transform, size, fixed)
        if shown and share == PICTURED_PERCENT:
            shown.see_kept(kept.errors, transform, size)


def _fixed(what: Fixed, at: float) -> tuple[Fixed, float]:
    return what, at


def _add_gain(findings: Findings, measure: str, spread: Reals | None, transform: str, size: int) -> None:
    """Gain measured over inner tiles, where there are enough."""
    value = None if spread is None else gain_db(spread)
    findings.add(measure, value, area="inner tiles", transform=transform, size=size)


def _add_models(findings: Findings, transform: str, size: int, correlations: tuple[float | None, float | None]) -> None:
    """Gains of Markov fields: of the frame's own correlations, and of one that is usual in the literature."""
    forms = ((transform, ""), ("fourier, complex", "_complex")) if transform == "fourier" else ((transform, ""),)
    for form, ending in forms:
        for name, pair in (("own", correlations), (f"{CORRELATION}", (CORRELATION, CORRELATION))):
            parts = [None if each is None else markov_gain_db(form, size, each) for each in pair]
            known = [part for part in parts if part is not None]
            value = sum(known) if len(known) == 2 else None
            findings.add(f"gain_model_{name}{ending}", value, transform=transform, size=size)


def _study_codes(findings: Findings, shown: Shown | None) -> list[str]:
    """Write codes at all ratios; return why not, where the codec does not take the frame."""
    subject = findings.subject
    try:
        for size in CODED_SIZES:
            inner = tile_areas(subject.areas[:1], size).inner
            pixels = subject.tiles(size)[inner]
            for transform in TRANSFORMS:
                coefficients = forward(pixels, basis(transform, size))
                for ratio in RATIOS:
                    coded = code_at(subject, transform, size, ratio)
                    _add_code(findings, coded, split_error(coefficients, inner, coded))
                    if shown and ratio == PICTURED_RATIO:
                        shown.see_coded(coded.error, transform, size)
    except CannotEncode as error:
        return [f"No codes were written: {error}."]
    return []


def _add_code(findings: Findings, coded: Coded, split: Split | None) -> None:
    """Figures of one code."""
    subject, fixed = findings.subject, _fixed("ratio", coded.ratio)
    transform, size = coded.transform, coded.size
    reached = subject.raster.size_bytes(SizeBasis.BITS_STORED) / coded.code_bytes
    for measure, value in (("ratio_bits_stored", reached), ("code_bytes", coded.code_bytes), ("step", coded.step)):
        findings.add(measure, value, transform=transform, size=size, fixed=fixed)
    errors = {area.name: area.root_mean_square(coded.error) for area in subject.areas}
    findings.add_errors(errors, transform, size, fixed)
    if split is None:
        return
    parts = {
        "kept_share": 100 * split.kept_share,
        "dropped_part": None if split.dropped is None else 100 * split.dropped,
        "rounding_part": None if split.dropped is None else 100 * (1 - split.dropped),
        "rounding_over_law": split.rounding_over_law,
    }
    for measure, part in parts.items():
        findings.add(measure, part, area="inner tiles", transform=transform, size=size, fixed=fixed)
