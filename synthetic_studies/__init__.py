"""Seeded DICOM studies of an invented hospital, with the truth that measurements of them must find."""

from synthetic_studies.big import big_multiframe
from synthetic_studies.canary import CanaryTruth, canary_study
from synthetic_studies.ct import ct_body
from synthetic_studies.delivered import Manner, already_lossy, deliver, delivered_pair
from synthetic_studies.demo import demo_study
from synthetic_studies.identity import Patient
from synthetic_studies.mr import mr_head
from synthetic_studies.population import archive
from synthetic_studies.radiograph import radiograph
from synthetic_studies.truth import Circle, Disc, Edge, Grid, PairTruth, Truth
from synthetic_studies.ultrasound import us_cine

__all__ = [
    "CanaryTruth",
    "Circle",
    "Disc",
    "Edge",
    "Grid",
    "Manner",
    "PairTruth",
    "Patient",
    "Truth",
    "already_lossy",
    "archive",
    "big_multiframe",
    "canary_study",
    "ct_body",
    "deliver",
    "delivered_pair",
    "demo_study",
    "mr_head",
    "radiograph",
    "us_cine",
]
