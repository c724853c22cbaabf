"""The first pages of a transform study: what was studied, the answer in one table, definitions, cautions."""

from __future__ import annotations

from collections.abc import Sequence

from safecheck.record.transforms import StudiedFrame, TransformStudy
from safecheck.report.blocks import Block, Column, Facts, Heading, Numbered, Prose, Row, Section, Table, Title
from safecheck.report.numbers import aligned, count, plural
from safecheck.report.sections.study_words import AT_RATIO, RATIO, USUAL_SIZE, FrameFigures, fine
from safecheck.statistics.cautions import image_cautions
from safecheck.wording import ANALYSIS_CODEC, CAUTIONS, CAUTIONS_WHEN, SHORT_CAUTION, STUDY_TITLE, sentence_of

__all__ = ["TABLE_NAME", "study_cautions", "study_front", "study_meanings"]

TABLE_NAME = "transforms.csv"

DEFINITIONS = (
    "RMS error: root mean square of after minus before, over content pixels (or over a drawn region, each pixel with "
    "the share of it that is covered), in the unit of the image.",
    "Kept share: each tile keeps its constant and, of its other coefficients, those of largest magnitude, of equal "
    "ones the lower frequency; their number is the share of all, rounded down. The rest are set to nothing and the "
    "tile is transformed back. No quantiser is at work. A share under one coefficient a tile does not exist.",
    "Every coefficient is one real number. Fourier is taken in its real form: a complex coefficient and its conjugate "
    "are one cosine and one sine, counted each. So at one share all transforms keep equally many real numbers.",
    f"Ratio: a code of the codec tiled ({ANALYSIS_CODEC}) at that ratio on the bits-stored basis, written and "
    "decoded, flat weighting. It has no tiles of 2 by 2 pixels.",
    "The transform's part: RMS error over that of the cosine transform at the same tile size and the same kept share "
    "or ratio.",
    "The tile size's part: RMS error over the least that any tile size gives with the same transform and the same "
    "kept share or ratio.",
    "The quantiser's part: a code's squared error is told apart by coefficient. Dropped: in coefficients that came "
    "back as nothing (under half a step), which is what the basis cannot hold in so few numbers. Rounding: in those "
    "that came back, which is the quantiser's alone; over the law of fine quantisation, step squared over 12 for each, "
    "it is 1 where the law holds, and more where whole sample values (1/12 of a stored value squared) weigh beside a "
    "fine step. Both parts are over inner tiles and sum to 100 %.",
    "Inner tiles have every pixel in the frame and in its content: no padding, no surrounding air. Coding gains and "
    "the quantiser's part are taken over them alone; gains over at least 16 of them.",
    "Coding gain: ten times the decimal logarithm of the arithmetic over the geometric mean of the variances of all "
    "coefficients over inner tiles, in dB; it shows how unevenly a transform spreads what varies. For Fourier it is "
    "given for the real cosines and sines and for the complex coefficients. Beside it the gain of a separable "
    "first-order Markov field: with the correlations of neighbours that the frame itself has, and with 0.95.",
    "Tiles that reach over padding or beyond the frame are filled from their own pixels before they are transformed, "
    "as the codec does; what was filled counts in no error.",
)


def study_front(study: TransformStudy, figures: Sequence[FrameFigures], table_sha256: str) -> tuple[Block, ...]:
    """Blocks of the first pages."""
    return (
        _title(study, table_sha256),
        Facts((("Studied", _studied(study)), ("Left aside", _left_aside(study)))),
        Heading("Which part of the loss is whose"),
        Prose(SHORT_CAUTION, "caution"),
        *_answer(figures),
        Heading("Cautions"),
        *_cautions(study.frames),
    )


def study_meanings() -> Section:
    """What the figures mean, after the frames, so that cautions and the answer share the first page."""
    return Section("What the figures mean", (Numbered(DEFINITIONS),), room_mm=100.0)


def _title(study: TransformStudy, table_sha256: str) -> Title:
    """The head of the first page."""
    facts = (
        ("Frames studied", count(len(study.frames))),
        ("Transforms", "cosine, Walsh-Hadamard, Fourier"),
        ("Tiles", "2 to 64 pixels a side"),
        ("Codec", f"tiled, {study.codec_version}"),
    )
    return Title(STUDY_TITLE, "Cosine, Walsh-Hadamard and Fourier on these images", facts, table_sha256, TABLE_NAME)


def _studied(study: TransformStudy) -> tuple[str, ...]:
    """What was studied."""
    left = study.series - len(study.frames)
    rest = f" {plural(left, 'series was', 'series were')} not studied." if left else ""
    return (
        f"{plural(len(study.frames), 'frame')} of {plural(study.series, 'series', 'series')} with images to study: the "
        f"middle frame of each, for at most {plural(study.most_frames, 'series', 'series')}.{rest}",
        f"Every figure of these pages and many more stand in {TABLE_NAME}, each with its unit; what they mean "
        "stands after the frames.",
    )


def _left_aside(study: TransformStudy) -> tuple[str, ...]:
    """What was not studied, and why."""
    lines = [
        f"{plural(item.number, item.what)}: {sentence_of(item.reason)}." for item in study.left_aside if item.number
    ]
    total = f"{plural(study.files, 'file')} read"
    return (f"{total}.", *lines) if lines else (f"{total}; none was excluded, no frame refused.",)


def _answer(figures: Sequence[FrameFigures]) -> tuple[Block, ...]:
    """One line a frame at one ratio."""
    coded = [item for item in figures if item.coded_sizes]
    if not coded:
        return (Prose("No code was written of any frame."),)
    side = f"{USUAL_SIZE} by {USUAL_SIZE}"
    columns = (
        Column("Frame"),
        Column("Unit"),
        Column("RMS error", number=True, over=f"Cosine {side}"),
        Column("over the best size", number=True, over=f"Cosine {side}"),
        Column("best size", number=True, over=f"Cosine {side}"),
        Column("Walsh- Hadamard", number=True, over=f"{side}, over cosine"),
        Column("Fourier", number=True, over=f"{side}, over cosine"),
        Column("dropped", "%", number=True, over=f"Squared error, cosine {side}"),
        Column("rounding", "%", number=True, over=f"Squared error, cosine {side}"),
    )
    cells = [_answer_cells(item) for item in coded]
    numbers = [
        fine(values) if places is None else aligned(values, places)
        for values, places in zip(zip(*cells, strict=True), _DECIMALS, strict=True)
    ]
    rows = tuple(
        Row((f"{item.number}: {item.frame.stratum}", item.frame.unit, *line))
        for item, line in zip(coded, zip(*numbers, strict=True), strict=True)
    )
    note = (
        f"At {RATIO:g}:1 on the bits-stored basis, over content. Tile size: how much larger the error is than with the "
        "best size. Transform: how much larger than with cosine. Quantiser: the rounding of what came back; the rest "
        "of the squared error lies in what the basis could not hold."
    )
    return (Table(columns, rows, note=note),)


_DECIMALS = (None, 2, 0, 2, 2, 0, 0)


def _answer_cells(item: FrameFigures) -> tuple[float | None, ...]:
    """Figures of one line."""
    errors = {size: item.at("rmse", "cosine", size, AT_RATIO, "content") for size in item.coded_sizes}
    known = {size: value for size, value in errors.items() if value is not None}
    return (
        known.get(USUAL_SIZE),
        item.at("rmse_over_best_size", "cosine", USUAL_SIZE, AT_RATIO, "content"),
        min(known, key=lambda size: known[size]) if known else None,
        item.at("rmse_over_cosine", "walsh-hadamard", USUAL_SIZE, AT_RATIO, "content"),
        item.at("rmse_over_cosine", "fourier", USUAL_SIZE, AT_RATIO, "content"),
        item.at("dropped_part", "cosine", USUAL_SIZE, AT_RATIO, "inner tiles"),
        item.at("rounding_part", "cosine", USUAL_SIZE, AT_RATIO, "inner tiles"),
    )


def study_cautions(frames: Sequence[StudiedFrame]) -> tuple[str, ...]:
    """Cautions in full, those that always stand first."""
    keys = set(
        image_cautions(
            [(frame.modality, frame.stratum) for frame in frames],
            under_18=any(frame.under_18 for frame in frames),
            source_lossy=any(frame.source_lossy for frame in frames),
            may_show_text=any(frame.may_show_text for frame in frames),
        )
    )
    return CAUTIONS + tuple(text for key, text in CAUTIONS_WHEN.items() if key in keys)


def _cautions(frames: Sequence[StudiedFrame]) -> tuple[Block, ...]:
    """Cautions on the page."""
    extra = study_cautions(frames)[len(CAUTIONS) :]
    more = (Prose("Because of what these images are:", "strong"), Numbered(extra, first=len(CAUTIONS) + 1))
    return (Numbered(CAUTIONS), *(more if extra else ()))
