"""Regions: shapes, where they lie, and the exact fraction of each pixel that they cover."""
