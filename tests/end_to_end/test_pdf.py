"""The PDF as a change board gets it: pages, cautions, hash, attachment, and the one drawn again."""

from __future__ import annotations

import hashlib
import json
import re
from pathlib import Path
from typing import Any

import pypdf
import pytest

from safecheck.wording import CAUTIONS, RECORD_TITLE, SHORT_CAUTION, lint
from tests.end_to_end.command import run
from tests.end_to_end.hospital import Hospital, Made, assess_here

LARGEST_BYTES = 5_000_000


def pages_of(pdf: Path) -> list[str]:
    """Text of each page; lines may break and words be cut at their ends."""
    return [flat(page.extract_text()) for page in pypdf.PdfReader(pdf).pages]


def flat(text: str) -> str:
    return re.sub(r"\s+", " ", text).strip()


@pytest.fixture(scope="module")
def again(made: Made) -> Path:
    """The report drawn again from the record."""
    out = made.folder.parent / "again.pdf"
    ended = run("report", made.folder, "--out", out, folder=made.folder.parent)
    assert ended.code == 0, ended.err
    return out


def test_it_names_itself_and_its_pages(made: Made) -> None:
    reader = pypdf.PdfReader(made.folder / "report.pdf")
    pages = pages_of(made.folder / "report.pdf")
    assert reader.metadata is not None
    assert reader.metadata.title == RECORD_TITLE
    assert RECORD_TITLE in pages[0]
    for number, page in enumerate(pages, start=1):
        assert re.search(rf"\b{number} of {len(pages)}\b", page), number
    assert len(reader.outline) > 5
    assert (made.folder / "report.pdf").stat().st_size < LARGEST_BYTES


def test_all_cautions_stand_in_full_on_the_first_pages_and_in_short_on_every_page(made: Made) -> None:
    pages = pages_of(made.folder / "report.pdf")
    first = " ".join(pages[:3])
    record = json.loads((made.folder / "record.json").read_bytes())
    assert record["cautions"][: len(CAUTIONS)] == list(CAUTIONS)
    assert [caution for caution in record["cautions"] if flat(caution) not in first] == []
    assert [number for number, page in enumerate(pages, 1) if flat(SHORT_CAUTION) not in page] == []
    summary = flat((made.folder / "summary.txt").read_text(encoding="utf-8"))
    assert [caution for caution in record["cautions"] if flat(caution) not in summary] == []
    companion = flat((made.folder / "CAUTIONS.txt").read_text(encoding="utf-8"))
    assert [caution for caution in record["cautions"] if flat(caution) not in companion] == []


def test_the_hash_of_the_record_stands_in_full_on_every_page(made: Made) -> None:
    sha256 = hashlib.sha256((made.folder / "record.json").read_bytes()).hexdigest()
    pages = pages_of(made.folder / "report.pdf")
    assert [number for number, page in enumerate(pages, 1) if sha256 not in page] == []


def test_the_record_is_attached_byte_for_byte(made: Made) -> None:
    attachments = pypdf.PdfReader(made.folder / "report.pdf").attachments
    assert list(attachments) == ["record.json"]
    assert attachments["record.json"] == [(made.folder / "record.json").read_bytes()]


def test_no_attachment_leaves_it_out(hospital: Hospital, tmp_path: Path) -> None:
    assess_here(hospital.request(tmp_path / "d", hospital.ct, attachment=False))
    reader = pypdf.PdfReader(tmp_path / "d" / "report.pdf")
    assert list(reader.attachments) == []
    assert len(reader.pages) > 3


def test_all_fonts_that_show_text_are_embedded(made: Made) -> None:
    shown: dict[str, bool] = {}

    def see(text: str, _matrix: object, _text_matrix: object, font: dict[str, Any] | None, _size: float) -> None:
        if text.strip() and font is not None:
            descriptor = font.get("/FontDescriptor")
            shown[font["/BaseFont"]] = descriptor is not None and "/FontFile2" in descriptor.get_object()

    for page in pypdf.PdfReader(made.folder / "report.pdf").pages:
        page.extract_text(visitor_text=see)
    assert len(shown) > 2
    assert {name for name, embedded in shown.items() if not embedded} == set()


def test_no_page_holds_a_word_that_no_output_may_hold(made: Made) -> None:
    texts = [*pages_of(made.folder / "report.pdf"), (made.folder / "summary.txt").read_text(encoding="utf-8")]
    assert [found for text in texts for found in lint(text)] == []


def test_limits_outcomes_and_regions_stand_in_it(made: Made) -> None:
    text = " ".join(pages_of(made.folder / "report.pdf")).lower()
    for words in ("within declared limits", "no bound: not a random sample", "opinion of the signatory", "change-17"):
        assert words in text, words


def test_drawn_again_every_page_says_so_and_there_are_no_images(made: Made, again: Path) -> None:
    pages = pages_of(again)
    assert [number for number, page in enumerate(pages, 1) if "REDRAWN" not in page] == []
    assert not [page for page in pages_of(made.folder / "report.pdf") if "REDRAWN" in page]
    images = [len(page.images) for page in pypdf.PdfReader(again).pages]
    assert sum(images) == 0
    assert sum(len(page.images) for page in pypdf.PdfReader(made.folder / "report.pdf").pages) > 0
    sha256 = hashlib.sha256((made.folder / "record.json").read_bytes()).hexdigest()
    assert all(sha256 in page for page in pages)


def test_drawn_again_it_is_never_written_over_a_file_or_into_the_dossier(made: Made, again: Path) -> None:
    before = again.read_bytes()
    for out, sentence in (
        (again, "the PDF to write exists already"),
        (made.folder / "report.pdf", "the PDF to write exists already"),
        (made.folder / "new.pdf", "the PDF would lie inside the dossier"),
    ):
        ended = run("report", made.folder, "--out", out, folder=made.folder.parent)
        assert (ended.code, sentence in ended.err) == (2, True), ended.err
    assert again.read_bytes() == before
    assert not (made.folder / "new.pdf").exists()


def test_crops_are_of_frames_without_text_alone(made: Made) -> None:
    record = json.loads((made.folder / "record.json").read_bytes())
    places = record["worst_places"]
    with_text = [place for place in places if place["may_show_text"]]
    assert {place["stratum"] for place in with_text} == {"US, ABDOMEN"}
    assert {place["crop"] for place in with_text} == {""}
    crops = {place["crop"] for place in places if not place["may_show_text"]}
    assert "" not in crops
    written = [path.name for path in (made.folder / "places").iterdir()]
    assert [crop for crop in crops if not any(name.startswith(crop) for name in written)] == []
    assert [name for name in written if not any(name.startswith(crop) for crop in crops)] == []
