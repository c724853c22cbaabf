"""A frame's own transforms: what few coefficients cost, what a code at a ratio costs, and which part does what."""

from safecheck.study.frame import study_frame

__all__ = ["study_frame"]
