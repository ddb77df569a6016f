"""Pieces of evidence, one module an exhibit: fits in, `Exhibit` out."""
