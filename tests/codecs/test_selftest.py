"""What the selftest says on a machine where everything works."""

from __future__ import annotations

import dataclasses

import imagecodecs
import pytest

from safecheck import wording
from safecheck.codecs import registry, selftest


def test_every_codec_is_checked_in_the_registrys_order() -> None:
    checks = selftest.run()
    assert tuple(check.codec for check in checks) == registry.names()
    for check in checks:
        assert check.available, check.detail
        assert check.version


def test_reversible_codecs_are_exact_and_others_are_not_asked() -> None:
    assert selftest.check("jpegls-reversible").reversible_exact is True
    assert selftest.check("jpeg2000-reversible").reversible_exact is True
    assert selftest.check("jpeg2000").reversible_exact is None


def test_the_two_jpeg_2000_decoders_are_compared() -> None:
    assert "second decoder agrees" in selftest.check("jpeg2000").detail


def test_a_promised_error_is_held(monkeypatch: pytest.MonkeyPatch) -> None:
    assert selftest.check("jpegls").detail.startswith("no sample off by more than promised")
    honest = imagecodecs.jpegls_decode

    def far_off(code: bytes) -> object:
        samples = honest(code).copy()
        samples.flat[7] ^= 16
        return samples

    monkeypatch.setattr(imagecodecs, "jpegls_decode", far_off)
    assert "came back off by" in selftest.check("jpegls").detail


def test_what_it_says_holds_no_forbidden_word_and_no_path() -> None:
    for check in selftest.run():
        for value in dataclasses.astuple(check):
            assert not list(wording.lint(str(value)))
            assert "/" not in str(value)
