"""What the rows show: strata, figures, bounds; patients and studies, not frames, are the unit."""
