"""Storey 1: compiled physics on plain arrays, in nanometers, free of objects and files."""
