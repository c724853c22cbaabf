"""From a record to paper: the PDF, the summary and the seal. Sees no pixels but the crops in the dossier."""
