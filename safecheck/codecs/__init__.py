"""Codecs behind one protocol: ways to turn a raster into bytes and back."""
