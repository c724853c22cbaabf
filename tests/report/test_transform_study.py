from __future__ import annotations

import dataclasses
import io
import re
from functools import lru_cache

import numpy as np
import pytest
from pypdf import PdfReader

from safecheck.record.transforms import Finding, LeftAside, StudiedFrame, StudyBasis, TransformStudy
from safecheck.report.transform_study import cautions_text, draw_study
from safecheck.study import study_frame
from safecheck.study.tiles import TRANSFORMS, basis
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, SHORT_CAUTION, lint
from tests.evaluation.frames import frame, origin
from tests.report.pages import page_texts, squeezed
from tests.study.test_frame import region

HASH = "ab" * 32


@lru_cache(maxsize=1)
def ct() -> StudiedFrame:
    found = study_frame(frame(), region(20.0), with_images=True)
    assert found is not None
    return found


def study(*frames: StudiedFrame, bases: bool = False) -> TransformStudy:
    return TransformStudy(
        frames=frames or (ct(),),
        files=12,
        series=3,
        most_frames=6,
        left_aside=(LeftAside("file", "localizer", 2), LeftAside("frame", "every pixel is padding", 1)),
        codec_version="bitstream 1",
        bases=tuple(StudyBasis(name, basis(name, size)) for size in (4, 8) for name in TRANSFORMS) if bases else (),
    )


def draw(found: TransformStudy, *, with_images: bool = False) -> bytes:
    return draw_study(found, HASH, with_images=with_images)


def number_of_images(pdf: bytes) -> int:
    return sum(len(page.images) for page in PdfReader(io.BytesIO(pdf)).pages)


def changed(**changes: object) -> StudiedFrame:
    return dataclasses.replace(ct(), **changes)  # type: ignore[arg-type]


def test_the_same_study_gives_the_same_bytes() -> None:
    assert draw(study(bases=True), with_images=True) == draw(study(bases=True), with_images=True)


def test_the_first_page_says_what_was_studied_and_what_was_left_aside() -> None:
    text = page_texts(draw(study()))[0]
    for words in (
        "Transform study",
        "1 frame of 3 series",
        "2 series were not studied",
        "12 files read",
        "2 files: a localizer",
        "1 frame: every pixel is padding",
        HASH,
    ):
        assert words in text


def test_every_page_carries_the_short_caution_its_number_and_the_hash_of_the_table() -> None:
    texts = page_texts(draw(study(bases=True), with_images=True))
    for number, text in enumerate(texts, start=1):
        assert SHORT_CAUTION in text
        assert f"Page {number} of {len(texts)}" in text
        assert f"SHA-256 of transforms.csv {HASH}" in text


def test_cautions_stand_in_full_on_the_pages_and_in_the_companion() -> None:
    text = " ".join(page_texts(draw(study())))
    companion = cautions_text(study())
    for caution in (*CAUTIONS, CAUTIONS_WHEN["radiotherapy"], CAUTIONS_WHEN["ai_or_cad"]):
        assert squeezed(caution) in text
        assert caution in companion
    assert CAUTIONS_WHEN["paediatric"] not in companion


def test_what_images_are_brings_its_caution() -> None:
    companion = cautions_text(study(changed(under_18=True, source_lossy=True, may_show_text=True, modality="MG")))
    for key in ("paediatric", "already_lossy", "burned_in_text", "mammography"):
        assert CAUTIONS_WHEN[key] in companion


def test_second_generation_stands_on_every_page() -> None:
    texts = page_texts(draw(study(changed(source_lossy=True))))
    assert all("SECOND GENERATION" in text for text in texts)


def test_pages_keep_to_the_never_list() -> None:
    pdf = draw(study(ct(), changed(may_show_text=True, pictures=None), bases=True), with_images=True)
    assert [word for text in page_texts(pdf) for word in lint(text)] == []


def test_every_font_is_embedded() -> None:
    reader = PdfReader(io.BytesIO(draw(study(bases=True), with_images=True)))
    fonts = [font for page in reader.pages for font in dict(page["/Resources"]).get("/Font", {}).values()]  # type: ignore[call-overload]
    assert fonts
    for font in fonts:
        assert "/FontFile2" in font.get_object()["/FontDescriptor"]


def test_pictures_are_shown_only_where_they_were_taken() -> None:
    taken = ct().pictures
    assert taken is not None
    # Tiles of 2 with a quarter kept look alike in all transforms, and equal pictures are stored once.
    assert number_of_images(draw(study(), with_images=True)) == 1 + len(taken.kept) - 2 + len(taken.coded)
    without = draw(study(changed(pictures=None, may_show_text=True)), with_images=True)
    assert number_of_images(without) == 0
    assert any("it may show text" in text for text in page_texts(without))
    plain = draw(study(changed(pictures=None)))
    assert number_of_images(plain) == 0
    assert not any("No picture" in text for text in page_texts(plain))


def test_basis_functions_are_drawn_on_request() -> None:
    assert not any("Basis functions" in text for text in page_texts(draw(study(changed(pictures=None)))))
    drawn = draw(study(changed(pictures=None), bases=True))
    assert number_of_images(drawn) == 6
    assert "Basis functions" in page_texts(drawn)[-1]


def test_figures_of_the_table_stand_on_the_pages() -> None:
    figures = {
        (item.transform, item.tile_size, item.fixed_at): item.value
        for item in ct().findings
        if item.measure == "rmse" and item.area == "content" and item.fixed == "kept share"
    }
    text = " ".join(page_texts(draw(study())))
    table = text[text.index("the largest coefficients of each tile kept") :]
    for transform, name in (("cosine", "Cosine"), ("walsh-hadamard", "Walsh-Hadamard"), ("fourier", "Fourier")):
        table = table[table.index(name) :]
        for share in (50.0, 25.0, 10.0, 5.0):
            line = re.search(rf"(?<!\d){share:g} % ([\d.]+|–) ([\d.]+|–) ([\d.]+) ([\d.]+) ([\d.]+) ([\d.]+)", table)
            assert line is not None
            for shown, size in zip(line.groups(), (2, 4, 8, 16, 32, 64), strict=True):
                value = figures.get((transform, size, share))
                assert shown == "–" if value is None else float(shown) == pytest.approx(value, rel=0.005)


def test_regions_have_a_table_of_their_own() -> None:
    texts = page_texts(draw(study()))
    assert any("RMS error over drawn regions, HU" in text and "box" in text for text in texts)
    within = tuple(item for item in ct().findings if not item.area.startswith("region"))
    assert not any("drawn regions, HU" in text for text in page_texts(draw(study(changed(findings=within)))))


def without_codes() -> StudiedFrame:
    kept = tuple(item for item in ct().findings if item.fixed != "ratio")
    return changed(findings=kept, pictures=None, notes=("No codes were written: tiled: too large.",))


def small() -> StudiedFrame:
    samples = np.random.default_rng(1).integers(0, 4096, (3, 200)).astype(np.uint16)
    found = study_frame(frame(samples, origin=origin(modality="OT")), None, with_images=True)
    assert found is not None
    return found


def constant() -> StudiedFrame:
    found = study_frame(frame(np.full((64, 64), 7, np.uint16), origin=origin(modality="OT")), None, with_images=True)
    assert found is not None
    return found


def many_regions() -> StudiedFrame:
    areas = [f"region a region with a rather long name {number}" for number in range(40)]
    more = [
        dataclasses.replace(item, area=area) for area in areas for item in ct().findings if item.area == "region box"
    ]
    return changed(findings=(*ct().findings, *more))


@pytest.mark.parametrize("make", [without_codes, small, constant, many_regions], ids=lambda make: make.__name__)
def test_unusual_frames_are_drawn(make: object) -> None:
    assert callable(make)
    texts = page_texts(draw(study(make()), with_images=True))
    assert any("Coding gain" in text for text in texts)


def test_twenty_frames_are_drawn_each_from_a_page_of_its_own() -> None:
    texts = page_texts(draw(study(*[changed(pictures=None)] * 20)))
    firsts = [text for text in texts if "Cosine, by tile size" in text]
    assert len(firsts) == 20
    assert all(f"Frame {number}:" in text for number, text in enumerate(firsts, start=1))


def test_a_finding_that_is_missing_is_a_dash() -> None:
    def is_gain(item: Finding) -> bool:
        return item.measure == "gain"

    kept = tuple(item for item in ct().findings if not is_gain(item))
    texts = page_texts(draw(study(changed(findings=kept))))
    assert any("Coding gain" in text and "–" in text for text in texts)
