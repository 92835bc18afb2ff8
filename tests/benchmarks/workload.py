"""Seeded workloads: layers of many polygons, made and written in a stream, so that making them takes little memory."""

from __future__ import annotations

import shutil
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyproj
import shapely
from pyogrio.raw import write_arrow

SEED = 20240611
VERSION = 2
"""Part of a file's name; raised when the same seed makes other polygons."""

MEAN_VERTICES = 72
"""Of an exterior ring; with holes and second parts a polygon has about 75."""

ROWS_PER_BATCH = 2_000
HOLE_SHARE = 0.10
MULTIPART_SHARE = 0.03
EXTENT = (-10.0, 36.0, 30.0, 60.0)
"""A continent in degrees."""

RADIUS_DEG = (0.004, 0.04)
GEOGRAPHIC = "EPSG:4326"
SCHEMA = pa.schema([("site", pa.int64()), ("cover", pa.string()), ("height", pa.float64()), ("geom", pa.binary())])

INPUT_BYTES, OUTPUT_BYTES = 1_450, 2_100
"""Of one polygon in a GeoPackage, as read and as measured, index included; rounded up."""


@dataclass(frozen=True)
class Workload:
    """A layer to measure.

    Attributes
    ----------
    folder : Path
        Where its file is kept.
    count : int
        Number of polygons.
    crs : str
        CRS that the polygons, drawn in degrees, are written in.
    """

    folder: Path
    count: int
    crs: str = GEOGRAPHIC

    @property
    def path(self) -> Path:
        """File of the layer; there once :func:`make` has run."""
        crs = self.crs.replace(":", "").lower()
        return self.folder / f"polygons_{self.count}_{crs}_v{VERSION}.gpkg"


def need_space(folder: Path, workloads: list[Workload]) -> None:
    """Stop early where the disk cannot take the workloads, the measured layer and a copy of it."""
    missing = sum(INPUT_BYTES * workload.count for workload in workloads if not workload.path.exists())
    largest = max((workload.count for workload in workloads), default=0)
    need, free = missing + 2 * OUTPUT_BYTES * largest, shutil.disk_usage(folder).free
    if free < need:
        raise SystemExit(
            f"{folder}: {free / 1e9:.1f} GB free, {need / 1e9:.1f} GB needed for {largest:,} polygons; "
            "name another folder with --work, or leave the largest layer out with --skip-2m"
        )


def polygons(rng: np.random.Generator, count: int) -> np.ndarray:
    """Make star-shaped polygons with rough outlines, some with a hole, some with two parts."""
    sizes = np.clip(rng.lognormal(np.log(MEAN_VERTICES) - 0.125, 0.5, count), 8, 1_500).astype(np.int64)
    west, south, east, north = EXTENT
    centre = np.column_stack((rng.uniform(west, east, count), rng.uniform(south, north, count)))
    radius = np.exp(rng.uniform(*np.log(RADIUS_DEG), count))
    shells = _rings(rng, centre, radius, sizes)
    shapes = shapely.polygons(shells)
    holed = np.flatnonzero(rng.random(count) < HOLE_SHARE)
    # Small enough to stay inside a shell at its narrowest.
    holes = _rings(rng, centre[holed], 0.11 * radius[holed], np.maximum(sizes[holed] // 4, 4))
    shapes[holed] = [shapely.Polygon(shells[row], [hole]) for row, hole in zip(holed, holes, strict=True)]
    double = np.flatnonzero(rng.random(count) < MULTIPART_SHARE)
    beside = centre[double] + np.column_stack((5.6 * radius[double], np.zeros(len(double))))
    others = shapely.polygons(_rings(rng, beside, 0.5 * radius[double], np.maximum(sizes[double] // 2, 6)))
    shapes[double] = [shapely.MultiPolygon([shapes[row], other]) for row, other in zip(double, others, strict=True)]
    return shapes


def _rings(rng: np.random.Generator, centre: np.ndarray, radius: np.ndarray, sizes: np.ndarray) -> np.ndarray:
    """Lay rough rings round centres."""
    owner = np.repeat(np.arange(len(sizes)), sizes)
    number = np.arange(len(owner)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    angle = 2.0 * np.pi * (number + 0.8 * rng.random(len(owner))) / sizes[owner]
    rough = rng.normal(0.0, 0.03, len(owner))
    # Amplitude falls with frequency as along a shore: few large lobes, many small bays.
    for k in (1, 2, 3, 5, 8, 13):
        phase, weight = rng.uniform(0, 2 * np.pi, len(sizes)), rng.normal(0, 0.25 / k, len(sizes))
        rough += weight[owner] * np.cos(k * angle + phase[owner])
    distance = radius[owner] * np.exp(np.clip(rough, -0.9, 0.9))
    points = centre[owner] + distance[:, None] * np.column_stack((1.4 * np.cos(angle), np.sin(angle)))
    return shapely.linearrings(points, indices=owner)


def batches(count: int, crs: str) -> Iterator[pa.RecordBatch]:
    """Yield a layer's rows."""
    rng = np.random.default_rng(SEED)
    transformer = pyproj.Transformer.from_crs(GEOGRAPHIC, crs, always_xy=True) if crs != GEOGRAPHIC else None
    for start in range(0, count, ROWS_PER_BATCH):
        n = min(ROWS_PER_BATCH, count - start)
        shapes = polygons(rng, n)
        if transformer is not None:
            shapes = shapely.transform(shapes, transformer.transform, interleaved=False)
        yield pa.RecordBatch.from_arrays(
            [
                pa.array(np.arange(start, start + n)),
                pa.array(rng.choice(["wood", "heath", "marsh", "meadow"], n)),
                pa.array(rng.uniform(0, 2_000, n)),
                pa.array(shapely.to_wkb(shapes), type=pa.binary()),
            ],
            schema=SCHEMA,
        )


def make(workload: Workload) -> Path:
    """Write a workload's GeoPackage, unless it is there from an earlier run."""
    return _write(workload.path, batches(workload.count, workload.crs), workload.crs)


def make_coast(folder: Path, vertices: int) -> Path:
    """Write a GeoPackage of one polygon with a rough coast, unless it is there from an earlier run."""
    return _write(folder / f"coast_{vertices}_v{VERSION}.gpkg", iter([_coast(vertices)]), GEOGRAPHIC)


def _coast(vertices: int) -> pa.RecordBatch:
    rng = np.random.default_rng(SEED)
    angle = 2.0 * np.pi * np.arange(vertices) / vertices
    rough = np.zeros(vertices)
    for octave in range(1, 18):
        rough += rng.normal(0, 0.3 / 1.7**octave) * np.cos(2**octave * angle + rng.uniform(0, 2 * np.pi))
    distance = 3.0 * np.exp(rough)
    shape = shapely.Polygon(np.column_stack((10.0 + 1.5 * distance * np.cos(angle), 48.0 + distance * np.sin(angle))))
    columns = [pa.array([0]), pa.array(["coast"]), pa.array([0.0]), pa.array([shapely.to_wkb(shape)], type=pa.binary())]
    return pa.RecordBatch.from_arrays(columns, schema=SCHEMA)


def _write(path: Path, rows: Iterator[pa.RecordBatch], crs: str) -> Path:
    if not path.exists():
        # Under another name until it is whole: an interrupted run leaves nothing that looks finished.
        unfinished = path.with_suffix(".part.gpkg")
        unfinished.unlink(missing_ok=True)
        write_arrow(
            pa.RecordBatchReader.from_batches(SCHEMA, rows),
            unfinished,
            driver="GPKG",
            layer="polygons",
            geometry_name="geom",
            geometry_type="Unknown",
            crs=crs,
        )
        unfinished.rename(path)
    return path
