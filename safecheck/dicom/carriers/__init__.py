"""Carriers of regions: DICOM objects in which other programs hold what a person drew."""
