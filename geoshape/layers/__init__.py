"""Layers on disk: reading, writing, names and lineage."""
