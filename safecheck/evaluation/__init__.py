"""Frame -> candidates and controls -> measures per region -> rows. The only place where they meet."""

from safecheck.evaluation.assignment import Assignment, Candidate
from safecheck.evaluation.frame import evaluate, load_kernels

__all__ = ["Assignment", "Candidate", "evaluate", "load_kernels"]
