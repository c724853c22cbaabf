"""pydicom's own warnings and log lines quote values and paths of the file: in this room they are not heard.

What they warn of is looked at by our own rules and preflight, and named by reason there.
"""

from __future__ import annotations

import contextlib
import logging
import warnings
from collections.abc import Iterator

import pydicom.config

__all__ = ["quiet_library"]


@contextlib.contextmanager
def quiet_library() -> Iterator[None]:
    """Within: no warning and no log line of pydicom, and no check of values that we do not use."""
    logger = logging.getLogger("pydicom")
    before = logger.disabled
    logger.disabled = True
    try:
        with warnings.catch_warnings(), pydicom.config.disable_value_validation():
            warnings.simplefilter("ignore")
            yield
    finally:
        logger.disabled = before
