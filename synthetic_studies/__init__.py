"""Seeded DICOM studies of an invented hospital, with the truth that measurements of them must find."""

from synthetic_studies.big import big_multiframe
from synthetic_studies.ct import ct_body
from synthetic_studies.delivered import Manner, already_lossy, deliver, delivered_pair
from synthetic_studies.identity import Patient
from synthetic_studies.truth import Circle, Disc, Edge, Grid, PairTruth, Truth

__all__ = [
    "Circle",
    "Disc",
    "Edge",
    "Grid",
    "Manner",
    "PairTruth",
    "Patient",
    "Truth",
    "already_lossy",
    "big_multiframe",
    "ct_body",
    "deliver",
    "delivered_pair",
]
