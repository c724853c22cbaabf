"""Names, settings, and what loads when."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest

from safecheck.codecs import registry
from safecheck.codecs.jpeg2000 import Jpeg2000
from safecheck.codecs.jpegls import JpegLs
from safecheck.errors import CodecUnavailable, UsageError


def test_codecs_that_an_archive_can_write_stand_first() -> None:
    writable = [registry.entry(name).archive_can_write for name in registry.names()]
    assert writable == sorted(writable, reverse=True)
    assert registry.rated_names() == ("jpeg2000", "jpeg", "jpegls", "htj2k", "jpegxl", "tiled")
    assert all(registry.codec(name).reversible for name in registry.reversible_names())


def test_the_registry_loads_no_codec_library() -> None:
    script = (
        "import sys, safecheck.codecs.registry, safecheck.codecs.selftest;"
        "print([m for m in ('numba', 'imagecodecs', 'openjpeg', 'pydicom') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


def test_a_codec_is_made_by_name_and_settings() -> None:
    assert registry.codec("jpeg2000", ratio=8) == Jpeg2000(8.0)
    assert registry.from_settings("jpegls", JpegLs(3).settings) == JpegLs(3)


def test_a_whole_number_is_the_same_setting_as_its_float() -> None:
    assert registry.settings_text(Jpeg2000(10).settings) == registry.settings_text(Jpeg2000(10.0).settings)
    assert registry.from_settings("jpeg2000", {"ratio": 10}) == Jpeg2000(10.0)


def test_a_float_without_a_fraction_is_the_whole_number() -> None:
    assert registry.codec("jpeg", quality=85.0) == registry.codec("jpeg", quality=85)
    assert registry.settings_text(registry.codec("tiled", size=16.0).settings).startswith('{"size":16,')


def test_text_of_settings_is_sorted_and_without_spaces() -> None:
    assert registry.settings_text({"b": 1.5, "a": True, "c": "x"}) == '{"a":true,"b":1.5,"c":"x"}'


@pytest.mark.parametrize(
    ("name", "text", "message"),
    [
        ("gif", "{}", "codec 'gif' is unknown, expected one of"),
        ("jpeg2000", '{"rato":10}', "setting 'rato' is unknown"),
        ("jpeg2000", "{}", "setting 'ratio' is missing"),
        ("jpeg2000", '{"ratio":1}', r"ratio is 1, expected a number from 1\.001 to 1000000"),
        ("jpeg2000", '{"ratio":true}', "ratio is true, expected a number"),
        ("jpeg2000", '{"ratio":"ten"}', 'codec jpeg2000: ratio is "ten", expected a number'),
        ("jpeg2000", '{"ratio":NaN}', "ratio is not a number"),
        ("jpegls-reversible", '{"precision":"12 bits"}', "setting 'precision' is unknown, expected none"),
        ("jpeg", '{"quality":0}', "quality is 0, expected a whole number from 1 to 100"),
        ("jpeg", '{"quality":true}', "quality is true, expected a whole number"),
        ("tiled", '{"step":"8"}', 'step is "8", expected a number from 0.125 to 4194304'),
        ("tiled", '{"size":"8"}', 'size is "8", expected one of 4, 8, 16, 32, 64, "adaptive"'),
        ("jpeg", '{"quality":85.5}', r"quality is 85\.5, expected a whole number"),
        ("jpegls", '{"near":256}', "near is 256, expected a whole number from 1 to 255"),
        ("htj2k", '{"step":0}', "step is 0, expected a number from 1e-06 to 0.5"),
        (
            "jpegxl",
            '{"distance":0,"effort":7}',
            r"distance is 0, which would not be lossless, expected",
        ),
        ("jpegxl", '{"distance":1,"effort":10}', "effort is 10, expected a whole number from 1 to 9"),
    ],
)
def test_wrong_names_and_settings_are_named(name: str, text: str, message: str) -> None:
    with pytest.raises(UsageError, match=message):
        registry.from_settings(name, json.loads(text))


def test_a_codec_without_dial_cannot_be_asked_for_a_size() -> None:
    with pytest.raises(UsageError, match="cannot be asked for a size"):
        registry.rated("jpegls-reversible")
    assert registry.rated("jpeg2000").name == "jpeg2000"


def test_a_missing_library_makes_a_codec_unavailable(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "safecheck.codecs.jpeg2000", None)
    with pytest.raises(CodecUnavailable, match="pylibjpeg-openjpeg is missing"):
        registry.codec("jpeg2000")


def test_availability_is_told_without_loading() -> None:
    assert registry.available("jpeg2000")
    with pytest.raises(UsageError, match="unknown"):
        registry.available("gif")
