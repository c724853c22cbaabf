"""Measures: pure functions of arrays; what depends on the original alone is prepared once for all candidates."""
