"""Storey 2: small frozen objects that describe what the user has: materials, stack, emitters."""
