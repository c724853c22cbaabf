"""Reading DICOM: from paths to instances and frames; the only room with pydicom, and the last with identifiers."""
