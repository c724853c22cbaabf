"""Versions of all that numbers depend on."""

from __future__ import annotations

import importlib.metadata
import platform

import safecheck

__all__ = ["LIBRARIES", "versions"]

LIBRARIES = (
    "imagecodecs",
    "numba",
    "numpy",
    "pyarrow",
    "pydicom",
    "pyjpegls",
    "pylibjpeg-openjpeg",
    "pypdf",
    "reportlab",
    "scikit-image",
    "scipy",
)


def versions() -> dict[str, str]:
    """Name -> version of the package, Python and the libraries."""
    found = {"safecheck": safecheck.__version__, "Python": platform.python_version()}
    for name in LIBRARIES:
        try:
            found[name] = importlib.metadata.version(name)
        except importlib.metadata.PackageNotFoundError:
            found[name] = "not available here"
    return found
