"""Storey 5: results for eyes and for other programs."""
