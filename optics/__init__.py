"""Light outcoupling of thin-film light-emitting devices."""

__version__ = "0.1.0"
