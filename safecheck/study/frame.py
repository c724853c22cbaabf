"""One frame through all transforms, tile sizes, kept shares and ratios."""

from __future__ import annotations

from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial

import numpy as np

from safecheck.codecs.tile.codec import Tiled
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


def study_frame(frame: Frame, regions: RegionSet | None, *, with_images: bool, threads: int = 1) -> StudiedFrame | None:
    """Study one frame.

    Parameters
    ----------
    frame
        As it lies in the archive.
    regions
        None for content alone.
    with_images
        Whether pictures are taken; never of a frame that may show text.
    threads
        How many transforms are at work at once, at least 1; what is found does not depend on it.

    Returns
    -------
    StudiedFrame or None
        None where every pixel is padding.
    """
    subject = subject_of(frame, regions)
    if subject is None:
        return None
    shown = choose_part(subject) if with_images and not frame.origin.may_show_text else None
    refusal = Tiled().refuses(subject.raster.format, subject.raster.shape)
    correlations = _correlations(subject)
    found = list(_of_frame(subject, correlations).found)
    # Compiled code and sorting leave the interpreter's lock.
    with ThreadPoolExecutor(threads) as pool:
        for size in SIZES:
            work = _Work(subject, shown, size, subject.tiles(size), tile_areas(subject.areas, size), correlations)
            steps = [partial(step, transform) for step in (work.kept, work.coded) for transform in TRANSFORMS]
            if size not in CODED_SIZES or refusal:
                steps = steps[: len(TRANSFORMS)]
            for findings in pool.map(lambda step: step(), [work.of_size, *steps]):
                found += findings.found
    notes = (*subject.notes, f"No codes were written: {refusal}.") if refusal else subject.notes
    return _studied(subject, notes, (*found, *comparisons(found)), shown)


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


def _of_frame(subject: Subject, correlations: tuple[float | None, float | None]) -> Findings:
    """Figures that depend on no tile."""
    findings = Findings(subject)
    for name, value in zip(("correlation_down", "correlation_across"), correlations, strict=True):
        findings.add(name, value, area="content")
    return findings


@dataclass(frozen=True, slots=True, eq=False)
class _Work:
    """All that is done with tiles of one size."""

    subject: Subject
    shown: Shown | None
    size: int
    pixels: Reals
    """(tiles, size * size)."""
    areas: TiledAreas
    correlations: tuple[float | None, float | None]

    def of_size(self) -> Findings:
        """Figures that depend on no transform, and the gain of the complex form."""
        findings, inner = Findings(self.subject), self.areas.inner
        findings.add("inner_tiles", int(np.count_nonzero(inner)), area="inner tiles", size=self.size)
        _add_gain(findings, "gain_complex", complex_variances(self.pixels[inner], self.size), "fourier", self.size)
        return findings

    def kept(self, transform: str) -> Findings:
        """Kept shares and gains of a transform."""
        findings, table = Findings(self.subject), basis(transform, self.size)
        tiles = forward(self.pixels, table)
        counts = {share: count for share in SHARES_PERCENT if (count := kept_count(self.size, share))}
        for (share, count), kept in zip(counts.items(), keep(tiles, table, list(counts.values())), strict=True):
            fixed = _fixed("kept share", share)
            findings.add("kept_coefficients", count, transform=transform, size=self.size, fixed=fixed)
            findings.add("kept_share", 100 * count / self.size**2, transform=transform, size=self.size, fixed=fixed)
            errors = self.areas.root_mean_squares(kept.dropped_energies, kept.errors)
            findings.add_errors(errors, transform, self.size, fixed)
            if self.shown and share == PICTURED_PERCENT:
                self.shown.see_kept(kept.errors, transform, self.size)
        _add_gain(findings, "gain", variances(tiles[self.areas.inner]), transform, self.size)
        _add_models(findings, transform, self.size, self.correlations)
        return findings

    def coded(self, transform: str) -> Findings:
        """Codes of a transform at all ratios."""
        findings, inner = Findings(self.subject), self.areas.inner
        coefficients = forward(self.pixels[inner], basis(transform, self.size))
        for ratio in RATIOS:
            coded = code_at(self.subject, transform, self.size, ratio)
            _add_code(findings, coded, split_error(coefficients, inner, coded))
            if self.shown and ratio == PICTURED_RATIO:
                self.shown.see_coded(coded.error, transform, self.size)
        return findings


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
