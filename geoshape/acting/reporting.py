"""Report on a layer: one page, and figures if wanted."""

from __future__ import annotations

import time
from dataclasses import asdict, dataclass
from pathlib import Path

import pyarrow as pa

from geoshape.acting.opened import ActOptions, Opened, open_for
from geoshape.columns import Column, columns_for
from geoshape.decide.known import STATUS
from geoshape.errors import WriteError
from geoshape.layers.lineage import read_lineage
from geoshape.layers.staging import publish, staged
from geoshape.options import MeasureOptions, Source, Target
from geoshape.report import ReportData, ReportOptions, build_report, write_figures

PAGE_SUFFIXES = frozenset({".html", ".htm"})


@dataclass(frozen=True, kw_only=True)
class FileReport:
    """A report that was written.

    Attributes
    ----------
    rows : int
        Rows of the layer.
    measured : tuple of str
        Columns that were measured on the way.
    output : str or None
        The page; None where only figures were asked for.
    figures : tuple of str
        Files of figures.
    bytes : int
        Size of the page.
    warnings : tuple of str
        What a reader of the numbers should know.
    seconds : float
        Time taken.
    """

    rows: int
    measured: tuple[str, ...]
    output: str | None
    figures: tuple[str, ...]
    bytes: int
    warnings: tuple[str, ...]
    seconds: float


def report_file(
    source: str | Path | Source,
    target: str | Path | Target | None,
    *,
    options: ReportOptions | None = None,
    figures: Path | None = None,
    how: ActOptions | None = None,
) -> FileReport:
    """Write the report of a layer.

    Parameters
    ----------
    source : str, Path or Source
        A layer that was measured is taken as it is; any other is measured first, in all default families.
    target : str, Path, Target or None
        The page, ending in ``.html``; None for figures only.
    options : ReportOptions, optional
    figures : Path, optional
        Folder for figures as SVG and PNG; made where it is not there.
    how : ActOptions, optional

    Returns
    -------
    FileReport

    Raises
    ------
    WriteError
        The page exists, or its folder does not, or its name does not end in ``.html``.
    OptionError
        A column named in the options is not there.
    ReadError, GroundError
        As for `measure_file`.
    """
    begin = time.monotonic()
    how = how or ActOptions()
    page = None if target is None else page_path(target if isinstance(target, Target) else Target(path=target))
    options = options or ReportOptions()
    opened = open_for(source, how)
    if _prefix(opened.info.schema.names) is None:
        opened = open_for(source, how, [column.name for column in columns_for(MeasureOptions())])
    data = _gathered(opened)
    size = 0
    if page is not None:
        text = build_report(data, options).encode()
        size = len(text)
        with staged(page) as folder:
            (folder / page.name).write_bytes(text)
            publish(folder, page, ())
    drawn = [] if figures is None else write_figures(data, figures, options)
    return FileReport(
        rows=data.n_rows,
        measured=tuple(column.name for column in opened.missing),
        output=None if page is None else str(page),
        figures=tuple(map(str, drawn)),
        bytes=size,
        warnings=(*opened.info.warnings, *(opened.ground.warnings if opened.ground else ())),
        seconds=time.monotonic() - begin,
    )


def page_path(target: Target) -> Path:
    """Check that a page can be written.

    Raises
    ------
    WriteError
        It exists, or its folder does not, or its name does not end in ``.html``.
    """
    path = Path(target.path)
    if path.suffix.lower() not in PAGE_SUFFIXES:
        raise WriteError(f"{path}: the report is a page; give it a name that ends in .html")
    if not path.parent.is_dir():
        raise WriteError(f"{path}: the folder {path.parent} does not exist; make it first")
    if path.exists() and not target.overwrite:
        raise WriteError(f"{path}: exists already; use --overwrite to replace it, or write to another file")
    return path


def _gathered(opened: Opened) -> ReportData:
    """Take all rows into memory: attributes, columns and geometries."""
    attributes, geometries = [], []
    for batch in opened.batches():
        attributes.append(batch.attributes)
        geometries.append(batch.geometry)
    table = pa.Table.from_batches(attributes, opened.schema)
    geometry = pa.chunked_array(geometries, pa.binary())
    made = asdict(opened.lineage("report", {}, opened.ground.warnings if opened.ground else ()))
    kept = read_lineage(opened.info.source, opened.info.layer)
    # Numbers that were in the layer were made by the run that its lineage tells of.
    lineage = kept if kept is not None and not opened.missing else made
    return ReportData(table, geometry, opened.crs_wkt, lineage, _known(table.column_names))


def _prefix(names: list[str]) -> str | None:
    """Find the prefix of the columns of a layer that was measured; None where it was not."""
    return next((name.removesuffix(STATUS) for name in names if name.endswith(STATUS)), None)


def _known(names: list[str]) -> tuple[Column, ...]:
    """Find the registry's columns among a table's, whatever prefix they share."""
    options = MeasureOptions(log_moments=True, harmonics=64, prefix=_prefix(names) or "", position_error_m=1.0)
    named = {column.name: column for column in columns_for(options)}
    return tuple(named[name] for name in names if name in named)
