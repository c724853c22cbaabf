"""Frame -> candidates and controls -> measures per region -> rows. The only place where they meet."""

from safecheck.evaluation.assignment import Assignment, Candidate, SeriesDial, SeriesDials
from safecheck.evaluation.frame import evaluate, find_dials, load_kernels

__all__ = ["Assignment", "Candidate", "SeriesDial", "SeriesDials", "evaluate", "find_dials", "load_kernels"]
