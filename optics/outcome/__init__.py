"""Storey 3: the physics of a device in the terms of the trade."""
