"""A machine that lacks a library, or a part of one: the selftest says so and goes on."""

from __future__ import annotations

import sys

import imagecodecs
import pytest

from safecheck.codecs import selftest as codec_selftest
from safecheck.dicom.decoder_check import check_decoders
from safecheck.jobs.selftest import lines_of, run_selftest
from safecheck.record.document import CodecCheckEntry

OF_JPEG_XL = {"jpegxl", "jpegxl-reversible"}


def built_without_jpeg_xl(monkeypatch: pytest.MonkeyPatch) -> None:
    """Let imagecodecs be built without JPEG XL, as its own stubs say it."""

    def stub(*_: object, **__: object) -> None:
        raise imagecodecs.DelayedImportError("jpegxl")

    monkeypatch.setattr(imagecodecs, "JPEGXL", type("JPEGXL", (), {"available": False}))
    for name in ("encode", "decode", "decode_jpeg", "version"):
        monkeypatch.setattr(imagecodecs, f"jpegxl_{name}", stub)


def hide(monkeypatch: pytest.MonkeyPatch, *modules: str) -> None:
    """Let modules be nowhere."""
    for module in modules:
        for known in [name for name in sys.modules if name == module or name.startswith(f"{module}.")]:
            monkeypatch.setitem(sys.modules, known, None)
        monkeypatch.setitem(sys.modules, module, None)
    if "openjpeg" in modules:
        monkeypatch.setitem(sys.modules, "openjpeg.utils", None)


def missing(checks: tuple[CodecCheckEntry, ...]) -> set[str]:
    """Names of what is not available; no other check found a fault."""
    assert all(check.reversible_exact is not False for check in checks)
    assert all(check.available or check.detail == "not available here" for check in checks)
    return {check.codec for check in checks if not check.available}


def test_a_library_built_without_a_part_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    built_without_jpeg_xl(monkeypatch)
    checks = run_selftest()
    gone = missing(checks)
    assert gone >= OF_JPEG_XL
    assert len(gone) == 5
    assert all("JPEG XL" in name for name in gone - OF_JPEG_XL)
    assert "jpegxl: not available here (imagecodecs)" in list(lines_of(checks))


def test_without_openjpegs_binding_the_rest_is_checked(monkeypatch: pytest.MonkeyPatch) -> None:
    hide(monkeypatch, "openjpeg")
    assert missing(run_selftest()) == {"jpeg2000", "htj2k", "htj2k-reversible"}
    second = {check.second_library for check in check_decoders()}
    assert "OpenJPEG (pylibjpeg-openjpeg)" not in second


def test_without_imagecodecs_the_rest_is_checked(monkeypatch: pytest.MonkeyPatch) -> None:
    hide(monkeypatch, "imagecodecs")
    gone = missing(run_selftest())
    assert {name for name in gone if not name.startswith("reads")} == {
        check.codec for check in codec_selftest.run() if check.codec not in ("jpeg2000", "tiled")
    }
    assert sum(name.startswith("reads") for name in gone) == 17
