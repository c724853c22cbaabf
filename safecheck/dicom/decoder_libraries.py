"""Decoding libraries, loaded on first use: a machine that lacks one still reads what does not need it."""

from __future__ import annotations

import importlib
import importlib.util
from types import ModuleType

__all__ = ["OPENJPEG", "is_here", "load_imagecodecs", "load_openjpeg"]

OPENJPEG = "openjpeg"
"""Stands for pylibjpeg-openjpeg where a part of imagecodecs is named otherwise."""


def load_imagecodecs() -> ModuleType:
    """Load imagecodecs.

    Raises
    ------
    ImportError
        If it is not on this machine.
    """
    return importlib.import_module("imagecodecs")


def load_openjpeg() -> ModuleType:
    """Load the binding of pylibjpeg-openjpeg.

    Raises
    ------
    ImportError
        If it is not on this machine.
    """
    return importlib.import_module("openjpeg")


def is_here(part: str) -> bool:
    """Whether this machine has a part of imagecodecs, e.g. JPEGXL, of which builds may lack some; or `OPENJPEG`."""
    if part == OPENJPEG:
        return importlib.util.find_spec("openjpeg") is not None
    try:
        return bool(getattr(load_imagecodecs(), part).available)
    except ImportError:
        return False
