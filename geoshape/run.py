"""Measure a layer from file to file: read, measure in a pool, write. Prints nothing."""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import asdict, dataclass, field, replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyproj
import shapely

from geoshape.columns import Column, columns_for
from geoshape.errors import OptionError
from geoshape.geometry import read_wkb
from geoshape.ground.equal_area import plan_ground
from geoshape.ground.layer_crs import resolve_crs
from geoshape.layers.lineage import Lineage
from geoshape.layers.plan import LayerContent, OutputPlan, plan_output
from geoshape.layers.read import LayerBatch, LayerInfo, open_layer, read_batches
from geoshape.layers.tables import add_columns
from geoshape.layers.write import OutputBatch, write_batches
from geoshape.measuring import Measured
from geoshape.options import GROUND_CENTRED, Bounds, MeasureOptions, Parts, Source, Target
from geoshape.pool import Workers
from geoshape.task import prepare

NOTABLE_DISTORTION_DEG = 1.0
"""Angular deformation of the ground above which a shape is too wide to be trusted without a thought."""

ProgressCallback = Callable[[int, int | None], None]


@dataclass(frozen=True, kw_only=True)
class RunSummary:
    """What a run did.

    Attributes
    ----------
    rows : int
        Rows written.
    by_status : dict of str to int
        Rows by ``shape_status``.
    ground : str
        Ground used, in a line.
    largest_distortion_deg : float or None
        Largest ``ground_distortion``; None where it is not known.
    distorted_rows : int
        Rows whose distortion exceeds one degree.
    warnings : tuple of str
        What a reader of the numbers should know.
    seconds : float
        Time taken.
    output : str
        File written.
    extra_files : tuple of str
        Files written beside it.
    columns : tuple of str
        Names of the new columns.
    """

    rows: int
    by_status: dict[str, int]
    ground: str
    largest_distortion_deg: float | None
    distorted_rows: int
    warnings: tuple[str, ...]
    seconds: float
    output: str
    extra_files: tuple[str, ...]
    columns: tuple[str, ...]


@dataclass(eq=False)
class _Tally:
    """Counts what passes by."""

    options: MeasureOptions
    by_status: Counter[str] = field(default_factory=Counter)
    largest_distortion_deg: float = float("nan")
    distorted_rows: int = 0

    def add(self, measured: Measured) -> None:
        prefix = self.options.prefix
        self.by_status.update(measured.values[f"{prefix}shape_status"].tolist())
        distortion = np.asarray(measured.values[f"{prefix}ground_distortion"], dtype=np.float64)
        if not np.isnan(distortion).all():
            self.largest_distortion_deg = np.fmax(self.largest_distortion_deg, np.nanmax(distortion)).item()
            self.distorted_rows += int(np.count_nonzero(distortion > NOTABLE_DISTORTION_DEG))


def measure_file(
    source: str | Path | Source,
    target: str | Path | Target,
    *,
    options: MeasureOptions | None = None,
    jobs: int = 1,
    progress: ProgressCallback | None = None,
) -> RunSummary:
    """Measure a layer and write it with its new columns.

    Parameters
    ----------
    source, target : str, Path, or Source and Target
    options : MeasureOptions, optional
    jobs : int
        Processes that measure. More than 1 needs an importable main module (``if __name__ == "__main__":`` in a
        script), since processes are spawned.
    progress : callable, optional
        Called with rows done and rows in all (None where the format does not tell).

    Returns
    -------
    RunSummary

    Raises
    ------
    ReadError, LayerChoiceError
        The layer cannot be read.
    GroundError
        It has no CRS, or the ground named is not equal-area.
    WriteError, ColumnNameError
        The output cannot be written, exists, or has no room for the new columns.
    GeometryError
        A geometry is invalid and the options say to stop there.
    """
    started = datetime.now(UTC)
    begin = time.monotonic()
    if jobs < 1:
        raise OptionError(f"jobs = {jobs} cannot be used; give 1 or more")
    options = options or MeasureOptions()
    source = source if isinstance(source, Source) else Source(path=source)
    target = target if isinstance(target, Target) else Target(path=target)
    columns = columns_for(options)
    info = open_layer(source.path, layer=source.layer, where=source.where, bbox=source.bbox)
    crs = resolve_crs(pyproj.CRS(info.crs_wkt) if info.crs_wkt else None, options)
    plan = plan_output(
        target.path,
        _content(info, columns, crs, options),
        sources=(info,),
        output_layer=target.layer,
        overwrite=target.overwrite,
    )
    ground = plan_ground(crs, _bounds_for(info, options), options)
    tally = _Tally(options)
    warnings = (*info.warnings, *plan.warnings, *ground.warnings)

    def lineage() -> Lineage:
        return Lineage(
            command="measure",
            input=Path(info.path).name,
            layer=info.layer,
            crs=crs.to_wkt() if crs else None,
            options=asdict(options),
            rows_by_status=dict(tally.by_status),
            ground=ground.label,
            warnings=warnings,
            started=started.isoformat(timespec="seconds"),
            seconds=round(time.monotonic() - begin, 3),
        )

    workers = Workers(prepare, (ground, options), jobs)
    batches = _measured(info, plan, workers, tally, progress)
    result = write_batches(plan, batches, lineage)
    return RunSummary(
        rows=result.rows,
        by_status=dict(tally.by_status.most_common()),
        ground=ground.label,
        largest_distortion_deg=None if np.isnan(tally.largest_distortion_deg) else tally.largest_distortion_deg,
        distorted_rows=tally.distorted_rows,
        warnings=(*warnings, *result.warnings),
        seconds=time.monotonic() - begin,
        output=str(target.path),
        extra_files=tuple(str(path) for path in result.extra_files),
        columns=tuple(column.name for column in columns),
    )


def _content(
    info: LayerInfo, columns: tuple[Column, ...], crs: pyproj.CRS | None, options: MeasureOptions
) -> LayerContent:
    content = LayerContent.like(info, columns)
    # A layer that does not say its CRS gets the one it was measured in.
    wkt = info.crs_wkt or (crs.to_wkt() if crs else None)
    return replace(content, crs_wkt=wkt, geometry_type=split_type(content.geometry_type, options))


def split_type(geometry_type: str, options: MeasureOptions) -> str:
    """Name the geometry type of the output: parts of a multipart are single.

    Examples
    --------
    >>> split_type("MultiPolygon Z", MeasureOptions(parts="split")), split_type("MultiPolygon", MeasureOptions())
    ('Polygon Z', 'MultiPolygon')
    """
    return geometry_type.removeprefix("Multi") if options.parts is Parts.SPLIT else geometry_type


def _bounds_for(info: LayerInfo, options: MeasureOptions) -> Bounds | None:
    """Find the extent, where the ground depends on it, by reading if the format or a filter asks for that."""
    if options.ground == GROUND_CENTRED:
        return None
    if info.bounds is not None and info.where is None and info.bbox is None:
        return info.bounds
    boxes = []
    for batch in read_batches(info):
        geometries, _ = read_wkb(batch.geometry.to_pylist())
        bounds = shapely.bounds(geometries)
        bounds = bounds[np.isfinite(bounds).all(axis=1)]
        if len(bounds):
            boxes.append((*bounds[:, :2].min(axis=0).tolist(), *bounds[:, 2:].max(axis=0).tolist()))
    if not boxes:
        return None
    west, south, east, north = zip(*boxes, strict=True)
    return min(west), min(south), max(east), max(north)


def _measured(
    info: LayerInfo, plan: OutputPlan, workers: Workers, tally: _Tally, progress: ProgressCallback | None
) -> Iterator[OutputBatch]:
    done = 0
    tasks = ((batch, (batch.geometry.to_pylist(), batch.first_row)) for batch in read_batches(info))
    for batch, measured in workers.run(tasks):
        tally.add(measured)
        yield _output(batch, measured, plan)
        done += batch.n_rows
        if progress is not None:
            progress(done, info.row_count)


def _output(batch: LayerBatch, measured: Measured, plan: OutputPlan) -> OutputBatch:
    attributes, wkb = batch.attributes, batch.geometry
    if measured.geometry is not None:
        attributes = attributes.take(pa.array(measured.row))
        wkb = pa.array(measured.geometry, type=pa.binary())
    return OutputBatch(add_columns(attributes, plan.columns, measured.values, plan.schema), wkb)
