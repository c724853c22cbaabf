"""The codec `tiled`: a block transform coder of our own, for analysis."""
