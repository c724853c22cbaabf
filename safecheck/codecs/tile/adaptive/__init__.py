"""Tiles of 4 to 64 pixels chosen over the frame by rate and distortion: `tiled` with the size "adaptive"."""
