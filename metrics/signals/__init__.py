"""Raw channels to beats."""
