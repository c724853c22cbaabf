"""The waist: the rows that workers write and reports read, and the canonical record."""
