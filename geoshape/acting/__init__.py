"""Decisions from file to file: read a layer, measure what is missing, decide, write. Prints nothing."""
