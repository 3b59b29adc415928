"""The version, in one place that every storey may read."""

VERSION = "0.1.0"
