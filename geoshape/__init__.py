"""Measure the shape of every polygon in a map layer, on equal-area ground.

The public names are loaded when first asked for, so that ``import geoshape`` costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from geoshape.columns import Column as Column
    from geoshape.columns import Status as Status
    from geoshape.columns import columns_for as columns_for
    from geoshape.errors import GeoshapeError as GeoshapeError
    from geoshape.errors import GeoshapeWarning as GeoshapeWarning
    from geoshape.frames import measure as measure
    from geoshape.options import Family as Family
    from geoshape.options import MeasureOptions as MeasureOptions
    from geoshape.options import Source as Source
    from geoshape.options import Target as Target
    from geoshape.run import RunSummary as RunSummary
    from geoshape.run import measure_file as measure_file

__version__ = "0.1.0"

_HOMES = {
    "Column": "columns",
    "Status": "columns",
    "columns_for": "columns",
    "GeoshapeError": "errors",
    "GeoshapeWarning": "errors",
    "measure": "frames",
    "Family": "options",
    "MeasureOptions": "options",
    "RunSummary": "run",
    "Source": "options",
    "Target": "options",
    "measure_file": "run",
}

__all__ = [
    "Column",
    "Family",
    "GeoshapeError",
    "GeoshapeWarning",
    "MeasureOptions",
    "RunSummary",
    "Source",
    "Status",
    "Target",
    "__version__",
    "columns_for",
    "measure",
    "measure_file",
]


def __getattr__(name: str) -> object:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{home}"), name)


def __dir__() -> list[str]:
    return __all__
