"""pydicom's own warnings and log lines quote values and paths of the file: in this room they are not heard.

What they warn of is looked at by our own rules and preflight, and named by reason there.
"""

from __future__ import annotations

import contextlib
import logging
import warnings
from collections.abc import Iterator
from contextvars import ContextVar

import pydicom.config

__all__ = ["quiet_library"]

_QUIET: ContextVar[bool] = ContextVar("quiet", default=False)


@contextlib.contextmanager
def quiet_library() -> Iterator[None]:
    """Within: no warning and no log line of pydicom, and no check of values that we do not use."""
    if _QUIET.get():
        # Each element that is read asks for quiet; within a call that asked already this costs nothing.
        yield
        return
    logger = logging.getLogger("pydicom")
    before = logger.disabled
    logger.disabled = True
    quiet = _QUIET.set(True)
    try:
        with warnings.catch_warnings(), pydicom.config.disable_value_validation():
            warnings.simplefilter("ignore")
            yield
    finally:
        _QUIET.reset(quiet)
        logger.disabled = before
