"""A layer opened for a decision: which columns it has, which must be measured first, and its rows with both."""

from __future__ import annotations

import time
from collections import Counter
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import asdict, dataclass, field, replace
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

import numpy as np
import pyarrow as pa
import pyproj
import shapely

from geoshape.acting.wanted import highest_harmonic, missing_columns, prefixed
from geoshape.columns import RECORD, Column
from geoshape.decide.known import STATUS
from geoshape.errors import OptionError
from geoshape.geometry import read_wkb
from geoshape.ground.equal_area import GroundPlan, plan_ground
from geoshape.ground.layer_crs import resolve_crs
from geoshape.layers.layer import LayerBatch, LayerInfo
from geoshape.layers.lineage import Lineage
from geoshape.layers.plan import LayerContent, OutputPlan, plan_output
from geoshape.layers.read import open_layer, read_batches
from geoshape.layers.spool import Spool
from geoshape.layers.tables import column_fields, columns_to_arrow
from geoshape.layers.write import OutputBatch, write_batches
from geoshape.options import GROUND_CENTRED, Bounds, Family, MeasureOptions, Parts, Source, Target
from geoshape.pool import Workers
from geoshape.task import prepare

ProgressCallback = Callable[[int, int | None], None]


@dataclass(frozen=True, kw_only=True)
class ActOptions:
    """How a decision measures what it needs, and how it works.

    Attributes
    ----------
    measure : MeasureOptions
        Ground and the rest, for columns that the layer does not have yet; ``families`` and ``harmonics`` follow from
        those columns. ``prefix`` is put before the name of every new column.
    jobs : int
        Processes that measure.
    progress : callable or None
        Called with rows done and rows in all (None where the format does not tell).

    Raises
    ------
    OptionError
        Parts are to be split, which makes other rows, or ``jobs`` is below 1.
    """

    measure: MeasureOptions = field(default_factory=MeasureOptions)
    jobs: int = 1
    progress: ProgressCallback | None = None

    def __post_init__(self) -> None:
        if self.jobs < 1:
            raise OptionError(f"jobs = {self.jobs} cannot be used; give 1 or more")
        if self.measure.parts is Parts.SPLIT:
            raise OptionError("parts = 'split' makes a row of each part; measure the layer so first, then decide")


@dataclass(frozen=True, kw_only=True)
class Written:
    """What a run read and wrote.

    Attributes
    ----------
    rows : int
        Rows written.
    by_status : dict of str to int
        Rows by ``shape_status``; empty where nothing was measured and the layer has no such column.
    ground : str or None
        Ground on which missing columns were measured, in a line; None where none was missing.
    measured : tuple of str
        Columns that were measured on the way.
    warnings : tuple of str
        What a reader of the result should know.
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
    ground: str | None
    measured: tuple[str, ...]
    warnings: tuple[str, ...]
    seconds: float
    output: str
    extra_files: tuple[str, ...]
    columns: tuple[str, ...]


@dataclass(frozen=True, eq=False)
class Opened:
    """A layer opened for a decision.

    Attributes
    ----------
    info : LayerInfo
    crs : pyproj.CRS or None
        Its CRS, or the one assumed.
    how : ActOptions
    missing : tuple of Column
        Measured columns that the layer does not have and the decision needs, without prefix.
    ground : GroundPlan or None
        Where shapes are measured; None where nothing needs to be.
    """

    info: LayerInfo
    crs: pyproj.CRS | None
    how: ActOptions
    missing: tuple[Column, ...]
    ground: GroundPlan | None
    by_status: Counter[str] = field(default_factory=Counter)
    started: datetime = field(default_factory=lambda: datetime.now(UTC))
    begin: float = field(default_factory=time.monotonic)

    @property
    def schema(self) -> pa.Schema:
        """Attributes and, behind them, the columns that are measured on the way."""
        return pa.schema([*self.info.schema, *column_fields(self.missing)])

    @property
    def options(self) -> MeasureOptions:
        """Options of measuring the missing columns, without prefix."""
        families = tuple(Family(name) for name in dict.fromkeys(c.family for c in self.missing) if name in set(Family))
        return replace(
            self.how.measure,
            prefix="",
            # A row's status alone needs no family; this is the quickest.
            families=families or (Family.AXES,),
            harmonics=highest_harmonic((c.name for c in self.missing), self.how.measure.harmonics),
            log_moments=any(c.name.endswith("_log") for c in self.missing),
        )

    def batches(self) -> Iterator[LayerBatch]:
        """Read the rows, with the missing columns measured, in the layer's order; progress is told."""
        for batch in self._measured() if self.missing else read_batches(self.info):
            self.count(batch)
            yield batch

    def count(self, batch: LayerBatch) -> None:
        """Count the rows of a batch by status, and tell how far the run is."""
        if STATUS in batch.attributes.schema.names:
            statuses = batch.attributes.column(batch.attributes.schema.get_field_index(STATUS))
            self.by_status.update(str(status) for status in statuses.to_pylist())
        if self.how.progress is not None:
            self.how.progress(batch.first_row + batch.n_rows, self.info.row_count)

    def answers(
        self, work: Callable[[Any], Callable[[Any], Any]], settings: object
    ) -> Iterator[tuple[LayerBatch, Any]]:
        """Send the geometries of each batch through workers; see `Workers`."""
        workers = Workers(work, settings, self.how.jobs)
        tasks = ((batch, (batch.geometry.to_pylist(), batch.first_row)) for batch in read_batches(self.info))
        yield from workers.run(tasks)

    def _measured(self) -> Iterator[LayerBatch]:
        for batch, measured in self.answers(prepare, (self.ground, self.options)):
            yield with_columns(batch, self.missing, measured.values, self.schema)

    def spooled(self, batches: Iterable[LayerBatch], schema: pa.Schema | None = None) -> Spool:
        """Keep all rows aside on disk, for a second pass; the caller closes the spool."""
        spool = Spool(schema or self.schema)
        try:
            for batch in batches:
                spool.write(batch.attributes, batch.geometry)
        except BaseException:
            spool.close()
            raise
        return spool

    @property
    def crs_wkt(self) -> str | None:
        """The layer's CRS, or the one assumed, as WKT."""
        return self.info.crs_wkt or (self.crs.to_wkt() if self.crs else None)

    def plan(self, target: Target, decided: Sequence[Column], geometry_type: str | None = None) -> OutputPlan:
        """Check all that can stop the output: attributes, measured columns, then those decided."""
        content = LayerContent.like(self.info, prefixed((*self.missing, *decided), self.how.measure.prefix))
        content = replace(content, crs_wkt=self.crs_wkt, geometry_type=geometry_type or content.geometry_type)
        return plan_for(target, content, (self.info,))

    def write(
        self,
        plan: OutputPlan,
        batches: Iterable[OutputBatch],
        command: str,
        options: dict[str, Any],
        notes: Sequence[str] = (),
    ) -> Written:
        """Write rows with their lineage, and sum up."""
        on_ground = self.ground.warnings if self.ground else ()
        warnings = (*self.info.warnings, *plan.warnings, *on_ground, *notes)

        def lineage() -> Lineage:
            return self.lineage(command, options, warnings)

        result = write_batches(plan, batches, lineage)
        return Written(
            rows=result.rows,
            by_status=dict(self.by_status.most_common()),
            ground=self.ground.label if self.ground else None,
            measured=tuple(self.how.measure.prefix + c.name for c in self.missing if c.family != RECORD),
            warnings=(*warnings, *result.warnings),
            seconds=time.monotonic() - self.begin,
            output=plan.target,
            extra_files=tuple(str(path) for path in result.extra_files),
            columns=tuple(column.name for column in plan.columns),
        )

    def lineage(self, command: str, options: dict[str, Any], warnings: tuple[str, ...]) -> Lineage:
        """Say where the result comes from."""
        measuring = {"measure": asdict(self.options)} if self.ground else {}
        return Lineage(
            command=command,
            input=Path(self.info.path).name,
            layer=self.info.layer,
            crs=self.crs.to_wkt() if self.crs else None,
            options={**options, "prefix": self.how.measure.prefix, **measuring},
            rows_by_status=dict(self.by_status),
            ground=self.ground.label if self.ground else "nothing was measured: columns as the layer has them",
            warnings=warnings,
            started=self.started.isoformat(timespec="seconds"),
            seconds=round(time.monotonic() - self.begin, 3),
        )


def open_for(
    source: str | Path | Source, how: ActOptions, wanted: Sequence[str] = (), *, needs_ground: bool = False
) -> Opened:
    """Open a layer and find out which of the wanted columns must be measured.

    Parameters
    ----------
    source : str, Path or Source
    how : ActOptions
    wanted : sequence of str
        Columns that the decision needs. Those that the layer has are used as they are; those that the registry knows
        are measured; any others are left to the decision, which refuses them.
    needs_ground : bool
        Whether outlines themselves are needed, whatever columns are there.

    Returns
    -------
    Opened

    Raises
    ------
    ReadError, LayerChoiceError
        The layer cannot be read.
    GroundError
        Something must be measured, and the layer has no CRS or the ground named is not equal-area.
    """
    source = source if isinstance(source, Source) else Source(path=source)
    info = open_layer(source.path, layer=source.layer, where=source.where, bbox=source.bbox)
    missing = missing_columns(wanted, info.schema.names, with_record=needs_ground)
    crs = resolve_crs(pyproj.CRS(info.crs_wkt) if info.crs_wkt else None, how.measure)
    ground = None
    if missing or needs_ground:
        ground = plan_ground(crs, extent(info, how.measure), how.measure)
    return Opened(info, crs, how, missing, ground)


def extent(info: LayerInfo, options: MeasureOptions) -> Bounds | None:
    """Find the extent where the ground depends on it, by reading if the format or a filter asks for that."""
    if options.ground == GROUND_CENTRED:
        return None
    if info.bounds is not None and info.where is None and info.bbox is None:
        return info.bounds
    return bounds_of(read_wkb(batch.geometry.to_pylist())[0] for batch in read_batches(info))


def bounds_of(arrays: Iterable[np.ndarray[Any, np.dtype[np.object_]]]) -> Bounds | None:
    """Take the extent of geometries that come in arrays; None where none has one."""
    found = [shapely.bounds(geometries) for geometries in arrays]
    boxes = np.concatenate([np.zeros((0, 4)), *found])
    boxes = boxes[np.isfinite(boxes).all(axis=1)]
    if not len(boxes):
        return None
    west, south = boxes[:, :2].min(axis=0).tolist()
    east, north = boxes[:, 2:].max(axis=0).tolist()
    return west, south, east, north


def plan_for(target: Target, content: LayerContent, sources: Sequence[LayerInfo]) -> OutputPlan:
    """Check all that can stop an output."""
    return plan_output(target.path, content, sources=sources, output_layer=target.layer, overwrite=target.overwrite)


def with_columns(batch: LayerBatch, columns: Sequence[Column], values: Any, schema: pa.Schema) -> LayerBatch:
    """Put columns behind the attributes of a batch."""
    arrays = [*batch.attributes.columns, *columns_to_arrow(columns, values)]
    return LayerBatch(pa.RecordBatch.from_arrays(arrays, schema=schema), batch.geometry, batch.first_row)


def output_batch(batch: LayerBatch, decided: Sequence[Column], values: Any, plan: OutputPlan) -> OutputBatch:
    """Put decided columns behind those of a batch, under the names of the output."""
    arrays = [*batch.attributes.columns, *columns_to_arrow(decided, values)]
    return OutputBatch(pa.RecordBatch.from_arrays(arrays, schema=plan.schema), batch.geometry)
