"""Names and numbers of the settings, as plans say them and as they stand in the code."""

from __future__ import annotations

__all__ = ["BITSTREAM_VERSION", "SIZES", "TRANSFORMS", "WEIGHTINGS"]

SIZES = (4, 8, 16, 32, 64)
"""Tile sizes, in pixels along each side."""
TRANSFORMS = ("cosine", "walsh-hadamard", "fourier")
"""Names as in plans; their order gives the number in the code."""
WEIGHTINGS = ("flat", "perceptual")
"""Names as in plans; their order gives the number in the code."""
BITSTREAM_VERSION = 1
"""Stands in every code; a decoder reads this version only."""
