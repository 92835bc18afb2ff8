"""Write layers: a plan that checks everything first, then rows in a stream, then one rename."""

from __future__ import annotations

import errno
import os
import sqlite3
import sys
from collections import Counter
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from itertools import chain
from pathlib import Path

import pyarrow as pa

from geoshape.errors import WriteError
from geoshape.layers.complaints import one_line
from geoshape.layers.csv_writer import write_csv
from geoshape.layers.formats import CSV, FLATGEOBUF, GEOPACKAGE, GEOPARQUET, SHAPEFILE
from geoshape.layers.lineage import Lineage, lineage_path, store_in_geopackage
from geoshape.layers.parquet_writer import write_parquet
from geoshape.layers.plan import LayerContent, OutputPlan, plan_output
from geoshape.layers.rfc7946 import LongitudeLatitude
from geoshape.layers.shapefile import CROSSWALK_SUFFIX, declare_numbers, write_crosswalk
from geoshape.layers.shapes import ShapeFit, written_type
from geoshape.layers.staging import copy_database, has_room, publish, staged
from geoshape.layers.storage import Losses, is_dbf_number, loss_texts, stored_arrays, stored_schema
from geoshape.layers.vector_reader import is_whole
from geoshape.layers.vector_writer import write_vector
from geoshape.layers.wkb import GeometryType

__all__ = ["LayerContent", "OutputBatch", "OutputPlan", "OutputResult", "plan_output", "write_batches"]

LineageSource = Lineage | Callable[[], Lineage]

_FULL_DISK = ("No space left", "disk is full", "disk full")

Failure = (OSError, RuntimeError, ValueError, sqlite3.Error, pa.ArrowException)


@dataclass(frozen=True, eq=False)
class OutputBatch:
    """Rows to write, in the order in which they stand in the output.

    Attributes
    ----------
    attributes : pyarrow.RecordBatch, (n,)
        In the plan's schema: attributes, then columns.
    geometry : pyarrow.BinaryArray, (n,)
        Well-known binary in the plan's CRS; null where missing.
    """

    attributes: pa.RecordBatch
    geometry: pa.BinaryArray


@dataclass(frozen=True)
class OutputResult:
    """What was written.

    Attributes
    ----------
    path : str
        The output; ``-`` for standard output.
    rows : int
        Rows written.
    extra_files : tuple of str
        Files of ours beside it: a lineage, a table of short names. A shapefile's own parts are not among them.
    warnings : tuple of str
        What the format could not hold, beyond what the plan warned of.
    """

    path: str
    rows: int
    extra_files: tuple[str, ...]
    warnings: tuple[str, ...]


class _Producer:
    """Batches from the caller, counted; remembers what they raised, since writers lose it on their way back."""

    def __init__(self, batches: Iterable[OutputBatch]) -> None:
        self._batches = batches
        self.rows = 0
        self.error: BaseException | None = None

    def __iter__(self) -> Iterator[OutputBatch]:
        try:
            for batch in self._batches:
                self.rows += len(batch.geometry)
                yield batch
        except GeneratorExit:
            raise
        except BaseException as error:
            self.error = error
            raise


def write_batches(
    plan: OutputPlan, batches: Iterable[OutputBatch], lineage: LineageSource | None = None
) -> OutputResult:
    """Write a layer as its rows come.

    Everything is made in a folder beside the target, ``.geoshape-<name>-<process>``, and moved in place when it is
    whole; whatever goes wrong, what was there before stays as it was.

    Parameters
    ----------
    plan : OutputPlan
        From `plan_output`.
    batches : iterable of OutputBatch
        Taken one by one; what it raises comes back as it is.
    lineage : Lineage or callable, optional
        Where the result comes from; a callable is asked after the last batch, when the counts are known. It goes
        into a GeoPackage or GeoParquet, else into ``<target>.lineage.json``; standard output has none.

    Returns
    -------
    OutputResult

    Raises
    ------
    WriteError
        The disk is full, or the format refuses something.
    """
    producer = _Producer(batches)
    losses: Losses = Counter()
    try:
        if plan.path is None:
            _write_csv(plan, producer, losses, None)
            sys.stdout.flush()
            return OutputResult(plan.target, producer.rows, (), loss_texts(losses))
        told = _Told(lineage)
        extra, complaints = _write_file(plan, plan.path, producer, losses, told)
    except Failure as error:
        if producer.error is not None:
            raise producer.error from None
        if isinstance(error, BrokenPipeError):
            raise
        raise _failure(plan, error) from None
    return OutputResult(plan.target, producer.rows, extra, (*loss_texts(losses), *complaints))


def _failure(plan: OutputPlan, error: BaseException) -> WriteError:
    text = one_line(error)
    is_full = getattr(error, "errno", None) == errno.ENOSPC or any(sign in text for sign in _FULL_DISK)
    if is_full:
        return WriteError(f"{plan.target}: the disk is full; make room and run again (what was there is untouched)")
    return WriteError(
        f"{plan.target}: cannot be written as {plan.format.name} ({text}); try another format "
        "(what was there is untouched)"
    )


class _Told:
    """The lineage as JSON, asked for once all rows are written."""

    def __init__(self, source: LineageSource | None) -> None:
        self._source = source

    def __call__(self) -> str | None:
        found = self._source() if callable(self._source) else self._source
        return None if found is None else found.to_json()


def _write_file(
    plan: OutputPlan, path: Path, producer: _Producer, losses: Losses, told: _Told
) -> tuple[tuple[str, ...], tuple[str, ...]]:
    """Make the output beside its target and move it there; give files of ours and the driver's complaints."""
    complaints: tuple[str, ...] = ()
    crosswalk = path.with_name(path.stem + CROSSWALK_SUFFIX)
    beside = [lineage_path(path), *([crosswalk] if plan.format is SHAPEFILE else [])]
    with staged(path) as folder:
        made = folder / path.name
        try:
            if plan.keeps_layers:
                copy_database(path, made)
            complaints = _write_rows(plan, producer, losses, made, told)
            if plan.format is SHAPEFILE:
                write_crosswalk(folder / crosswalk.name, plan)
            if plan.format is not GEOPARQUET:
                _keep_lineage(plan, made, told())
        except Failure as error:
            if producer.error is None and not has_room(folder):
                raise OSError(errno.ENOSPC, one_line(error)) from error
            raise
        names = publish(folder, path, beside)
    # Named as the user names the output, unless that is a link to another folder.
    given = Path(plan.target).parent
    folder_name = given if os.path.realpath(given) == str(path.parent) else path.parent
    return tuple(str(folder_name / file.name) for file in beside if file.name in names), complaints


def _write_rows(plan: OutputPlan, producer: _Producer, losses: Losses, made: Path, told: _Told) -> tuple[str, ...]:
    """Write the layer itself; give the driver's complaints."""
    if plan.format is CSV:
        _write_csv(plan, producer, losses, made)
        return ()
    if plan.format is GEOPARQUET:
        schema = stored_schema(plan.schema, plan.written_names, plan.format)
        rows = ((batch.attributes.columns, batch.geometry) for batch in producer)
        write_parquet(made, schema, plan.crs_wkt, rows, told)
        return ()
    complaints = _write_through_gdal(plan, producer, losses, made)
    if plan.format is FLATGEOBUF and not is_whole(made, producer.rows):
        raise OSError(errno.ENOSPC, "the file is not whole")
    return complaints


def _keep_lineage(plan: OutputPlan, made: Path, text: str | None) -> None:
    if text is None:
        return
    if plan.format is GEOPACKAGE:
        store_in_geopackage(made, plan.layer, text)
    else:
        lineage_path(made).write_text(text + "\n", encoding="utf-8")


def _write_csv(plan: OutputPlan, producer: _Producer, losses: Losses, made: Path | None) -> None:
    schema = stored_schema(plan.schema, plan.written_names, CSV)
    rows = (stored_arrays(batch.attributes, schema, CSV, losses) for batch in producer)
    if made is None:
        write_csv(sys.stdout.buffer, schema, rows)
        return
    with made.open("wb") as file:
        write_csv(file, schema, rows)


def _write_through_gdal(plan: OutputPlan, producer: _Producer, losses: Losses, made: Path) -> tuple[str, ...]:
    schema = stored_schema(plan.schema, plan.written_names, plan.format)
    stream = iter(producer)
    first = next(stream, None)
    kind = written_type(GeometryType.parse(plan.geometry_type), plan.format, first.geometry if first else None)
    degrees = LongitudeLatitude(plan.crs_wkt) if plan.format.is_rfc7946 else None
    fit = ShapeFit(plan.format, kind, degrees)
    whole = chain([] if first is None else [first], stream)
    rows = (
        (stored_arrays(batch.attributes, schema, plan.format, losses), fit.fit(batch.geometry, losses))
        for batch in whole
    )
    complaints = write_vector(made, plan, schema, kind, rows)
    if plan.format is SHAPEFILE:
        numbers = [i for i, field in enumerate(plan.schema) if is_dbf_number(field.type)]
        declare_numbers(made.with_suffix(".dbf"), numbers)
    return complaints
