"""What works on this machine."""

from __future__ import annotations

from collections.abc import Iterator

from safecheck.codecs import selftest

__all__ = ["selftest_lines"]


def selftest_lines() -> Iterator[tuple[str, bool]]:
    """Yield a line per codec, and whether what was asked of it held; a codec that is not here holds nothing up."""
    for check in selftest.run():
        state = check.version if check.available else "not available here"
        exact = {True: ", bit-exact", False: ", NOT bit-exact", None: ""}[check.reversible_exact]
        yield f"{check.codec}: {state}{exact} ({check.detail})", check.available or not check.version
