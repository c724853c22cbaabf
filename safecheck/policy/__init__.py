"""Plans, limits, outcomes and exit conditions: what is declared, and how values are held against it."""
