"""The parts of the record, one file each: from the record's entries to plain blocks."""
