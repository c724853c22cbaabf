"""Measures what irreversible recompression does to a hospital's own DICOM images and records it."""

__version__ = "0.1.0"
