from __future__ import annotations

import hashlib
import io
import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import numpy as np
import pypdfium2
import pytest
from pypdf import PdfReader
from pypdf.generic import DictionaryObject

from safecheck.errors import DossierError
from safecheck.record.canonical import document_bytes
from safecheck.record.crops import CropMeta, write_crop
from safecheck.record.document import RecordDocument
from safecheck.report.attach import taken_out
from safecheck.report.theme import LEFT, PAGE_WIDTH
from safecheck.wording import CAUTIONS, CAUTIONS_WHEN, RECORD_TITLE, SHORT_CAUTION, lint
from tests.report.made_records import CT, make_record, make_run, outcomes, stratum_of
from tests.report.pages import draw, page_boxes, page_texts

Box = tuple[float, float, float, float]

LONG = "MR, LOWER EXTREMITY WITH A VERY LONG BODY PART NAME, thickness {0} to {1} mm, source already lossy"


def only(record: RecordDocument, *names: str) -> RecordDocument:
    """The record with a few of its candidates."""
    lists = ("candidates", "figures", "ledger", "worst_places", "regions", "outcomes")
    kept = {name: tuple(item for item in getattr(record, name) if item.candidate in names) for name in lists}
    return record.model_copy(update=kept)


def twelve_strata() -> RecordDocument:
    strata = tuple(stratum_of(LONG.format(n, n + 1), "MR", 40 + n) for n in range(12))
    return only(make_record(strata=strata), "jpeg2000 5:1", "tiled 20:1")


def twenty_limits() -> RecordDocument:
    lines = [item.model_copy(update={"limit": f"limit {n}"}) for n in range(20) for item in outcomes()[:10]]
    return only(make_record(limits=lines), "jpeg2000 5:1", "jpeg2000 10:1", "jpeg2000 20:1", "tiled 10:1")


def bare() -> RecordDocument:
    """Nothing assessed, nothing to show."""
    empty: dict[str, Any] = dict.fromkeys(
        ("ledger", "figures", "candidates", "worst_places", "regions", "regions_without_frame", "controls"), ()
    )
    return make_record(strata=(), limits=[], delivered=None, notes={}, content_rules={}, **empty)


def one_frame() -> RecordDocument:
    return only(make_record(strata=(stratum_of(CT, "CT", 1),), limits=[]), "jpeg2000 10:1")


def everything_at_once() -> RecordDocument:
    return make_record(held=False, cautions=(*CAUTIONS, *CAUTIONS_WHEN.values()))


CASES = {
    "rich": make_record,
    "no limits": lambda: make_record(limits=[]),
    "one frame": one_frame,
    "twelve strata": twelve_strata,
    "twenty limits": twenty_limits,
    "no worst places": lambda: make_record(worst_places=()),
    "run invalid": everything_at_once,
    "nothing assessed": bare,
}


@pytest.fixture(scope="module")
def drawn() -> dict[str, bytes]:
    return {name: draw(make()) for name, make in CASES.items()}


@pytest.mark.parametrize("case", CASES)
def test_no_page_holds_a_forbidden_word(drawn: dict[str, bytes], case: str) -> None:
    for number, text in enumerate(page_texts(drawn[case]), 1):
        assert [(number, found.word) for found in lint(text)] == []


@pytest.mark.parametrize("case", CASES)
def test_every_foot_has_the_caution_the_page_number_and_the_hash(drawn: dict[str, bytes], case: str) -> None:
    sha256 = make_sha256(CASES[case]())
    texts = page_texts(drawn[case])
    for number, text in enumerate(texts, 1):
        assert f"Page {number} of {len(texts)}" in text
        assert f"SHA-256 of the record {sha256}" in text
        assert SHORT_CAUTION in text
    assert sha256 in texts[0]


def test_the_hash_in_the_foot_is_at_least_six_points_high(drawn: dict[str, bytes]) -> None:
    with pypdfium2.PdfDocument(drawn["one frame"]) as document:
        for page in document:
            text = page.get_textpage()
            start = text.get_text_range().rindex(make_sha256(one_frame()))
            assert pypdfium2.raw.FPDFText_GetFontSize(text, start) >= 6


def make_sha256(record: RecordDocument) -> str:
    return hashlib.sha256(document_bytes(record)).hexdigest()


@pytest.mark.parametrize("case", CASES)
def test_the_cautions_stand_in_full_on_the_first_pages(drawn: dict[str, bytes], case: str) -> None:
    first_pages = " ".join(page_texts(drawn[case])[:3])
    for caution in CASES[case]().cautions:
        assert caution in first_pages


def test_the_cautions_fit_the_first_page_where_they_can_and_the_contents_share_the_second(
    drawn: dict[str, bytes],
) -> None:
    first, second = page_texts(drawn["one frame"])[:2]
    assert all(caution in first for caution in one_frame().cautions)
    assert "In this record" in first + second
    assert "Groups of like images Group of like images" in second


def test_further_measures_stand_after_all_that_a_board_reads(drawn: dict[str, bytes]) -> None:
    texts = page_texts(drawn["rich"])
    first = next(number for number, text in enumerate(texts) if "Further measures: CT" in text)
    for words in ("Opinion of the signatory", "What to keep to recompute", "Errors in regions", "Ledger: CR"):
        assert max(number for number, text in enumerate(texts) if words in text) <= first


def test_the_main_figures_of_a_group_share_a_page(drawn: dict[str, bytes]) -> None:
    texts = page_texts(drawn["rich"])
    for title in (f"Figures: {CT}", "Figures: CR, CHEST"):
        page = next(text for text in texts[3:] if title in text)
        assert "Errors: after minus before" in page
        assert "On the display windows" in page


@pytest.mark.parametrize("case", CASES)
def test_no_text_leaves_the_margins_or_runs_into_other_text(drawn: dict[str, bytes], case: str) -> None:
    if case == "run invalid":
        pytest.skip("the words across the page lie over the text on purpose")
    for number, boxes in enumerate(page_boxes(drawn[case]), 1):
        for left, _, right, _ in boxes:
            assert left >= LEFT - 1.5, (number, left)
            assert right <= PAGE_WIDTH - LEFT + 1.5, (number, right)
        assert overlaps(boxes) == [], number


def overlaps(boxes: list[Box]) -> list[tuple[Box, Box]]:
    """Pairs of boxes that cover each other by more than a point each way."""
    found = []
    ordered = sorted(boxes)
    for index, one in enumerate(ordered):
        for other in ordered[index + 1 :]:
            if other[0] >= one[2] - 1:
                break
            if min(one[3], other[3]) - max(one[1], other[1]) > 1.2:
                found.append((one, other))
    return found


@pytest.mark.parametrize("case", ["rich", "one frame"])
def test_the_same_record_gives_the_same_bytes(drawn: dict[str, bytes], case: str) -> None:
    assert draw(CASES[case]()) == drawn[case]


def test_the_record_lies_inside_and_comes_out_equal(drawn: dict[str, bytes]) -> None:
    assert taken_out(drawn["rich"]) == document_bytes(make_record())


def test_without_attachment_the_pdf_carries_no_file() -> None:
    pdf = draw(one_frame(), attachment=False)
    assert not PdfReader(io.BytesIO(pdf)).attachments
    with pytest.raises(DossierError, match="carries no record"):
        taken_out(pdf)


def resources_and_contents(holder: DictionaryObject, content: bytes) -> Iterator[tuple[DictionaryObject, bytes]]:
    """Yield the resources and the content stream of a page or form, then those of all forms placed on it."""
    resources = holder["/Resources"].get_object()
    assert isinstance(resources, DictionaryObject)
    yield resources, content
    for reference in resources.get("/XObject", {}).values():
        inner = reference.get_object()
        if inner["/Subtype"] == "/Form":
            yield from resources_and_contents(inner, inner.get_data())


def fonts_and_contents(pdf: bytes) -> Iterator[tuple[dict[str, DictionaryObject], bytes]]:
    """Yield the fonts by their name in the resources, with the content that may use them, of pages and forms."""
    for page in PdfReader(io.BytesIO(pdf)).pages:
        contents = page.get_contents()
        assert contents is not None
        for resources, content in resources_and_contents(page, contents.get_data()):
            fonts = resources.get("/Font", DictionaryObject()).get_object()
            yield {name: reference.get_object() for name, reference in fonts.items()}, content


def fonts_by_embedding(pdf: bytes) -> dict[bool, set[str]]:
    """Names of the fonts that pages and forms name, with a font file inside and without."""
    found: dict[bool, set[str]] = {True: set(), False: set()}
    for fonts, _ in fonts_and_contents(pdf):
        for font in fonts.values():
            descriptor = font.get("/FontDescriptor", DictionaryObject()).get_object()
            found["/FontFile2" in descriptor].add(str(font["/BaseFont"]).rpartition("+")[2])
    return found


@pytest.mark.parametrize("case", CASES)
def test_every_font_named_on_a_page_or_form_is_embedded_and_ours(drawn: dict[str, bytes], case: str) -> None:
    ours = {"Roboto-Regular", "Roboto-Medium", "Roboto-Italic", "Roboto-Light"}
    assert fonts_by_embedding(drawn[case]) == {True: ours, False: set()}


@pytest.mark.parametrize("case", CASES)
def test_no_content_uses_a_font_that_its_resources_lack(drawn: dict[str, bytes], case: str) -> None:
    used = set()
    for fonts, content in fonts_and_contents(drawn[case]):
        here = {name.decode() for name in re.findall(rb"(/[^\s/]+) [\d.]+ Tf", content)}
        assert here <= set(fonts)
        used |= here
    assert len(used) >= 4


def test_sections_have_bookmarks_and_the_contents_name_their_pages(drawn: dict[str, bytes]) -> None:
    reader = PdfReader(io.BytesIO(drawn["rich"]))
    titles = {str(item.title): reader.get_destination_page_number(item) for item in reader.outline}  # type: ignore[union-attr, arg-type]
    assert {
        "Recompression record", "Limits and outcomes", "Groups of like images", f"Figures: {CT}", "Worst places",
        "Regions", "Ratio ledger", "Controls", "Files left out, and what was noticed", "Delivered copies",
        "Definitions", "Versions and selftest", "Plan as read", "What to keep, and review", "Opinions",
    } <= set(titles)  # fmt: skip
    texts = page_texts(drawn["rich"])
    contents = " ".join(texts[:3])
    for title, page in titles.items():
        if page is not None and title != RECORD_TITLE:
            assert title in texts[page]
            assert re.search(rf"{re.escape(title)} {page + 1}\b", contents), title


def test_the_title_is_the_record_and_never_the_program(drawn: dict[str, bytes]) -> None:
    about = PdfReader(io.BytesIO(drawn["rich"])).metadata
    assert about is not None
    assert about.title == RECORD_TITLE
    assert "safecheck" not in " ".join(str(value) for value in about.values())


@pytest.mark.parametrize("case", CASES)
def test_the_programs_name_stands_in_the_table_of_versions_only(drawn: dict[str, bytes], case: str) -> None:
    pages = [text for text in page_texts(drawn[case]) if "safecheck" in text.lower()]
    assert len(pages) == 1
    assert "Program or library" in pages[0]
    assert pages[0].lower().count("safecheck") == 1


def test_an_invalid_run_says_so_across_every_page(drawn: dict[str, bytes]) -> None:
    for text in page_texts(drawn["run invalid"]):
        # In the strip at the head and across the page.
        assert text.count("RUN INVALID: controls not held") >= 2
        assert "SECOND GENERATION" in text
    for text in page_texts(drawn["rich"]):
        assert "RUN INVALID" not in text
        assert "SECOND GENERATION" not in text


def test_a_report_drawn_again_says_so_on_every_page(drawn: dict[str, bytes]) -> None:
    for text in page_texts(draw(one_frame(), redrawn=True)):
        assert "REDRAWN from the record, without images" in text
    for text in page_texts(drawn["one frame"]):
        assert "REDRAWN" not in text


def test_the_machines_name_is_never_printed(drawn: dict[str, bytes]) -> None:
    run = make_run(host="pacs-workstation-9")
    assert all("pacs-workstation-9" not in text for text in page_texts(draw(one_frame(), run)))


def test_characters_that_the_font_lacks_are_seen_as_missing() -> None:
    record = one_frame()
    plan = record.plan.model_copy(update={"content": {"change": {"title": "頭部 CT <b>&amp; Thorax"}}})
    first = page_texts(draw(record.model_copy(update={"plan": plan})))[0]
    assert "CT <b>&amp; Thorax" in first


def with_crop(folder: Path) -> None:
    (folder / "places").mkdir()
    rng = np.random.default_rng(5)
    meta = CropMeta(
        unit="HU", window="brain (centre 40 HU, width 80 HU)", first_row=0, first_column=0, patch_row=24,
        patch_column=24, patch_rows=8, patch_columns=8,
    )  # fmt: skip
    before, after = rng.uniform(0, 255, (64, 64)), rng.uniform(0, 255, (64, 64))
    write_crop(folder / "places", "place-001", before, after, (after - before) / 7, meta)


def images_on(pdf: bytes) -> int:
    with pypdfium2.PdfDocument(pdf) as document:
        return sum(len(list(page.get_objects([pypdfium2.raw.FPDF_PAGEOBJ_IMAGE]))) for page in document)


def test_pictures_stand_only_where_the_dossier_has_them_and_never_where_text_may_show(tmp_path: Path) -> None:
    with_crop(tmp_path)
    record = only(make_record(crop="place-001", strata=(stratum_of(CT, "CT", 9),)), "jpeg2000 10:1")
    shown, hidden = record.worst_places[0], record.worst_places[2]
    assert (shown.may_show_text, hidden.may_show_text) == (False, True)
    both = record.model_copy(update={"worst_places": (shown, hidden)})
    pdf = draw(both, folder=tmp_path)
    texts = " ".join(page_texts(pdf))
    assert images_on(pdf) == 3
    assert not fonts_by_embedding(pdf)[False]
    assert "brain (centre 40 HU, width 80 HU)" in texts
    assert "after minus before" in texts
    assert "No picture: the frame may carry text." in texts
    assert "The scale of the difference is another on each card" in texts
    assert images_on(draw(both)) == 0
    assert images_on(draw(both, folder=tmp_path, redrawn=True)) == 0
    assert draw(both, folder=tmp_path) == pdf


def test_a_crop_that_is_missing_is_an_error_and_not_a_gap(tmp_path: Path) -> None:
    (tmp_path / "places").mkdir()
    with pytest.raises(DossierError, match="crop place-001 of the dossier cannot be read"):
        draw(make_record(crop="place-001", strata=(stratum_of(CT, "CT", 9),)), folder=tmp_path)


def test_the_size_stays_far_below_five_megabytes(drawn: dict[str, bytes], tmp_path: Path) -> None:
    with_crop(tmp_path)
    record = only(make_record(crop="place-001"), "jpeg2000 5:1", "jpeg2000 10:1")
    assert len(draw(record, folder=tmp_path)) < 5_000_000
    assert max(len(pdf) for pdf in drawn.values()) < 5_000_000
