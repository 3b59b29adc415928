"""Storey 4: many outcomes of one device."""
