"""Transfer syntaxes and what each says about loss."""

from __future__ import annotations

import pydicom.uid
import pytest

from safecheck.dicom.syntaxes import SYNTAXES, Coding, Loss, syntax_named, syntax_of

ROOT = "1.2.840.10008.1.2"


@pytest.mark.parametrize(
    ("suffix", "loss"),
    # Loss classes of the table of transfer syntaxes (PS3.5 chapter 10, PS3.6 Annex A).
    [
        *[(suffix, Loss.REVERSIBLE) for suffix in ("", ".1", ".1.98", ".1.99", ".2", ".5")],
        *[(f".4.{n}", Loss.REVERSIBLE) for n in (57, 70, 80, 90, 92, 201, 202, 110)],
        *[(f".4.{n}", Loss.IRREVERSIBLE) for n in (50, 51, 53, 55, 100, 103, 106, 107, 108)],
        *[(f".4.{n}", Loss.EITHER) for n in (81, 91, 93, 203, 112)],
        (".4.111", Loss.IRREVERSIBLE),
        *[(f".4.{n}", Loss.UNKNOWN) for n in (94, 95, 204, 205)],
    ],
)
def test_syntax_has_the_loss_class_of_the_standard(suffix: str, loss: Loss) -> None:
    assert syntax_of(ROOT + suffix).loss is loss


def test_every_transfer_syntax_of_the_library_is_known() -> None:
    # PS3.6 Table A-1 as pydicom carries it.
    assert {str(uid) for uid in pydicom.uid.AllTransferSyntaxes} <= set(SYNTAXES)


def test_names_lead_back_to_the_syntax() -> None:
    assert all(syntax_named(each.name) is each for each in SYNTAXES.values())


def test_a_private_syntax_shows_neither_uid_nor_name() -> None:
    found = syntax_of("1.2.3.CANARY")
    assert (found.uid, found.coding) == ("", Coding.UNKNOWN)
    assert "CANARY" not in found.name
