"""One file a revision of the catalogue's tables."""
