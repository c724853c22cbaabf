"""Names and numbers of the settings, as plans say them and as they stand in the code."""

from __future__ import annotations

__all__ = ["ADAPTIVE", "ADAPTIVE_VERSION", "BITSTREAM_VERSION", "SIZES", "TRANSFORMS", "VERSIONS", "WEIGHTINGS"]

SIZES = (4, 8, 16, 32, 64)
"""Tile sizes, in pixels along each side."""
TRANSFORMS = ("cosine", "walsh-hadamard", "fourier")
"""Names as in plans; their order gives the number in the code."""
WEIGHTINGS = ("flat", "perceptual")
"""Names as in plans; their order gives the number in the code."""
ADAPTIVE = "adaptive"
"""In place of a size: tiles of all `SIZES`, chosen over the frame."""
BITSTREAM_VERSION = 1
"""Stands in codes of one tile size."""
ADAPTIVE_VERSION = 2
"""Stands in codes of chosen tiles."""
VERSIONS = (BITSTREAM_VERSION, ADAPTIVE_VERSION)
"""All that a decoder reads; a version once given out keeps its meaning."""
