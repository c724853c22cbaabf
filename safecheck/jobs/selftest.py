"""What works on this machine: codecs, and the decoders of the syntaxes that are read."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from safecheck.codecs import selftest
from safecheck.dicom.decoder_check import DecoderCheck, check_decoders
from safecheck.record.document import CodecCheckEntry

__all__ = ["lines_of", "run_selftest"]

_NOT_AVAILABLE = "not available here"


def run_selftest() -> tuple[CodecCheckEntry, ...]:
    """Check every codec, and every reading syntax that something here can write."""
    return (*map(_of_codec, selftest.run()), *map(_of_decoder, check_decoders()))


def _of_codec(check: selftest.CodecCheck) -> CodecCheckEntry:
    """A codec that recompresses."""
    return CodecCheckEntry(
        codec=check.codec,
        library=check.library,
        version=check.version,
        available=check.available,
        reversible_exact=check.reversible_exact,
        detail=check.detail,
    )


def _of_decoder(check: DecoderCheck) -> CodecCheckEntry:
    """A decoder that reads files; two that disagree count as not exact."""
    details = {
        None: "nothing here writes this syntax to check it",
        True: "a coded pattern came back bit for bit",
        False: "a coded pattern did not come back",
    }
    agreed = {None: "", True: "; a second decoder agrees", False: "; a second decoder disagrees"}
    found = details[check.exact] + agreed[check.agree] if check.available else _NOT_AVAILABLE
    return CodecCheckEntry(
        codec=f"reads {check.syntax}",
        library=check.library + (f", {check.second_library}" if check.second_library else ""),
        version="",
        available=check.available,
        reversible_exact=None if check.exact is None else check.exact and check.agree is not False,
        detail=found,
    )


def lines_of(checks: Iterable[CodecCheckEntry]) -> Iterator[str]:
    """Yield a line per check."""
    for check in checks:
        state = check.version or check.library if check.available else _NOT_AVAILABLE
        exact = {True: ", bit-exact", False: ", NOT bit-exact", None: ""}[check.reversible_exact]
        # What is missing says which library would bring it.
        detail = check.library if check.detail == _NOT_AVAILABLE else check.detail
        yield f"{check.codec}: {state}{exact} ({detail})"
