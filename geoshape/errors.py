"""Errors and warnings: one root each, a subclass for the place where it failed.

A message gives the value, the reason and the remedy, in that order, on one line.
"""


class GeoshapeError(Exception):
    """Root of every error that geoshape raises on purpose."""


class OptionError(GeoshapeError):
    """An option has a value that cannot be used, or two options contradict each other."""


class ReadError(GeoshapeError):
    """A layer cannot be opened or read."""


class LayerChoiceError(ReadError):
    """The file holds several layers and none was named, or the named one is not there."""


class WriteError(GeoshapeError):
    """The output cannot be written, exists already, or cannot hold the result."""


class ColumnNameError(WriteError):
    """A new column's name clashes with one that is there, or is reserved by the format."""


class GroundError(GeoshapeError):
    """No equal-area ground can be laid under the layer: CRS missing, unusable or not equal-area."""


class GeometryError(GeoshapeError):
    """A geometry is invalid and the options say to stop there."""


class GeoshapeWarning(UserWarning):
    """Root of every warning that geoshape issues."""


class GroundWarning(GeoshapeWarning):
    """Numbers are computed, but the ground bends or scales them noticeably."""
