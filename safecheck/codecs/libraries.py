"""Codec libraries, loaded on first use, and what they call themselves."""

from __future__ import annotations

import functools
import importlib
import importlib.metadata
from types import ModuleType

from safecheck.errors import CodecUnavailable

__all__ = ["carried_by", "imagecodecs_with", "openjpeg", "openjpeg_version"]


def imagecodecs_with(part: str) -> ModuleType:
    """Load imagecodecs, of which builds may lack a part.

    Parameters
    ----------
    part
        Name of the part as the library gives it, e.g. JPEGLS.

    Raises
    ------
    CodecUnavailable
        If the library or the part is missing.
    """
    try:
        library = importlib.import_module("imagecodecs")
    except ImportError as error:
        raise CodecUnavailable("imagecodecs is not on this machine") from error
    if not getattr(library, part).available:
        raise CodecUnavailable(f"imagecodecs on this machine was built without {part}")
    return library


def openjpeg(codec: str) -> ModuleType:
    """Load OpenJPEG's binding.

    Parameters
    ----------
    codec
        Name of the codec that asks, for the message.

    Raises
    ------
    CodecUnavailable
        If the library is missing.
    """
    try:
        return importlib.import_module("openjpeg.utils")
    except ImportError as error:
        raise CodecUnavailable(f"{codec}: pylibjpeg-openjpeg is not on this machine") from error


def openjpeg_version(codec: str) -> str:
    """Version of OpenJPEG, and that of the package that carries it.

    Parameters
    ----------
    codec
        Name of the codec that asks, for the message.

    Raises
    ------
    CodecUnavailable
        If the library is missing.
    """
    numbers = openjpeg(codec).get_openjpeg_version()
    return carried_by(f"OpenJPEG {'.'.join(str(number) for number in numbers)}", "pylibjpeg-openjpeg")


@functools.cache
def carried_by(library: str, distribution: str) -> str:
    """'charls 2.4.3', 'imagecodecs' -> 'charls 2.4.3 in imagecodecs 2026.3.6'; kept, since every row asks."""
    return f"{library} in {distribution} {importlib.metadata.version(distribution)}"
