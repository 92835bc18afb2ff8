"""The report: one page that opens offline, and its figures.

The names are loaded when first asked for: options alone need neither bokeh nor matplotlib.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from geoshape.report.data import ReportData as ReportData
    from geoshape.report.data import ReportOptions as ReportOptions
    from geoshape.report.figures import write_figures as write_figures
    from geoshape.report.page import build_report as build_report

_HOMES = {"ReportData": "data", "ReportOptions": "data", "build_report": "page", "write_figures": "figures"}

__all__ = ["ReportData", "ReportOptions", "build_report", "write_figures"]


def __getattr__(name: str) -> object:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{home}"), name)
