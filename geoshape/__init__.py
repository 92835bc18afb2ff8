"""Measure the shape of every polygon in a map layer, on equal-area ground.

The public names are loaded when first asked for, so that ``import geoshape`` costs next to nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from geoshape.acting.comparing import CompareSources as CompareSources
    from geoshape.acting.comparing import compare_files as compare_files
    from geoshape.acting.flagging import flag_file as flag_file
    from geoshape.acting.flagging import read_rules as read_rules
    from geoshape.acting.grouping import group_file as group_file
    from geoshape.acting.matching import TemplateSource as TemplateSource
    from geoshape.acting.matching import match_file as match_file
    from geoshape.acting.opened import ActOptions as ActOptions
    from geoshape.acting.redrawing import redraw_file as redraw_file
    from geoshape.acting.reporting import report_file as report_file
    from geoshape.acting.summarising import summarise_file as summarise_file
    from geoshape.columns import Column as Column
    from geoshape.columns import Status as Status
    from geoshape.columns import columns_for as columns_for
    from geoshape.decide.compare import CompareOptions as CompareOptions
    from geoshape.decide.group import GroupOptions as GroupOptions
    from geoshape.decide.match import MatchOptions as MatchOptions
    from geoshape.decide.outliers import UnusualOptions as UnusualOptions
    from geoshape.decide.redraw import RedrawOptions as RedrawOptions
    from geoshape.decide.rules import parse_rule as parse_rule
    from geoshape.decide.summarise import SummaryOptions as SummaryOptions
    from geoshape.errors import GeoshapeError as GeoshapeError
    from geoshape.errors import GeoshapeWarning as GeoshapeWarning
    from geoshape.frame_decisions import compare as compare
    from geoshape.frame_decisions import flag as flag
    from geoshape.frame_decisions import group as group
    from geoshape.frame_decisions import match as match
    from geoshape.frame_decisions import redraw as redraw
    from geoshape.frame_decisions import summarise as summarise
    from geoshape.frames import measure as measure
    from geoshape.options import Family as Family
    from geoshape.options import MeasureOptions as MeasureOptions
    from geoshape.options import Source as Source
    from geoshape.options import Target as Target
    from geoshape.report.data import ReportOptions as ReportOptions
    from geoshape.run import RunSummary as RunSummary
    from geoshape.run import measure_file as measure_file

__version__ = "0.1.0"

_HOMES = {
    "ActOptions": "acting.opened",
    "Column": "columns",
    "CompareOptions": "decide.compare",
    "CompareSources": "acting.comparing",
    "Family": "options",
    "GeoshapeError": "errors",
    "GeoshapeWarning": "errors",
    "GroupOptions": "decide.group",
    "MatchOptions": "decide.match",
    "MeasureOptions": "options",
    "RedrawOptions": "decide.redraw",
    "ReportOptions": "report.data",
    "RunSummary": "run",
    "Source": "options",
    "Status": "columns",
    "SummaryOptions": "decide.summarise",
    "Target": "options",
    "TemplateSource": "acting.matching",
    "UnusualOptions": "decide.outliers",
    "columns_for": "columns",
    "compare": "frame_decisions",
    "compare_files": "acting.comparing",
    "flag": "frame_decisions",
    "flag_file": "acting.flagging",
    "group": "frame_decisions",
    "group_file": "acting.grouping",
    "match": "frame_decisions",
    "match_file": "acting.matching",
    "measure": "frames",
    "measure_file": "run",
    "parse_rule": "decide.rules",
    "read_rules": "acting.flagging",
    "redraw": "frame_decisions",
    "redraw_file": "acting.redrawing",
    "report_file": "acting.reporting",
    "summarise": "frame_decisions",
    "summarise_file": "acting.summarising",
}

__all__ = [
    "ActOptions",
    "Column",
    "CompareOptions",
    "CompareSources",
    "Family",
    "GeoshapeError",
    "GeoshapeWarning",
    "GroupOptions",
    "MatchOptions",
    "MeasureOptions",
    "RedrawOptions",
    "ReportOptions",
    "RunSummary",
    "Source",
    "Status",
    "SummaryOptions",
    "Target",
    "TemplateSource",
    "UnusualOptions",
    "__version__",
    "columns_for",
    "compare",
    "compare_files",
    "flag",
    "flag_file",
    "group",
    "group_file",
    "match",
    "match_file",
    "measure",
    "measure_file",
    "parse_rule",
    "read_rules",
    "redraw",
    "redraw_file",
    "report_file",
    "summarise",
    "summarise_file",
]


def __getattr__(name: str) -> object:
    home = _HOMES.get(name)
    if home is None:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f"{__name__}.{home}"), name)


def __dir__() -> list[str]:
    return __all__
