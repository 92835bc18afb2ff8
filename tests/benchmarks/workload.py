"""Seeded workloads: layers of many polygons, made and written in a stream."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import geopandas as gpd
import numpy as np
import pyarrow as pa
import pyogrio
import shapely
from pyogrio.raw import write_arrow

SEED = 20240611
MEAN_VERTICES = 75
ROWS_PER_BATCH = 2_000
HOLE_SHARE = 0.10
MULTIPART_SHARE = 0.03
EXTENT = (-10.0, 36.0, 30.0, 60.0)
RADIUS_DEG = (0.004, 0.04)
SCHEMA = pa.schema([("site", pa.int64()), ("cover", pa.string()), ("height", pa.float64()), ("geom", pa.binary())])


def polygons(rng: np.random.Generator, count: int) -> np.ndarray:
    """Make star-shaped polygons with rough outlines, some with a hole, some with two parts."""
    sizes = np.clip(rng.lognormal(np.log(MEAN_VERTICES) - 0.125, 0.5, count), 8, 1_500).astype(np.int64)
    west, south, east, north = EXTENT
    centre = np.column_stack((rng.uniform(west, east, count), rng.uniform(south, north, count)))
    radius = np.exp(rng.uniform(*np.log(RADIUS_DEG), count))
    shells = _rings(rng, centre, radius, sizes)
    shapes = shapely.polygons(shells)
    holed = np.flatnonzero(rng.random(count) < HOLE_SHARE)
    hole_sizes = np.maximum(sizes[holed] // 4, 4)
    holes = _rings(rng, centre[holed], 0.2 * radius[holed], hole_sizes)
    shapes[holed] = [shapely.Polygon(shells[row], [hole]) for row, hole in zip(holed, holes, strict=True)]
    double = np.flatnonzero(rng.random(count) < MULTIPART_SHARE)
    beside = centre[double] + np.column_stack((5.0 * radius[double], np.zeros(len(double))))
    others = shapely.polygons(_rings(rng, beside, 0.5 * radius[double], np.maximum(sizes[double] // 2, 6)))
    shapes[double] = [shapely.MultiPolygon([shapes[row], other]) for row, other in zip(double, others, strict=True)]
    return shapes


def _rings(rng: np.random.Generator, centre: np.ndarray, radius: np.ndarray, sizes: np.ndarray) -> np.ndarray:
    """Lay rough rings round centres."""
    owner = np.repeat(np.arange(len(sizes)), sizes)
    number = np.arange(len(owner)) - np.repeat(np.cumsum(sizes) - sizes, sizes)
    angle = 2.0 * np.pi * (number + 0.8 * rng.random(len(owner))) / sizes[owner]
    rough = np.zeros(len(owner))
    for k in range(1, 6):
        phase, weight = rng.uniform(0, 2 * np.pi, len(sizes)), rng.normal(0, 0.25 / k, len(sizes))
        rough += weight[owner] * np.cos(k * angle + phase[owner])
    rough += rng.normal(0.0, 0.04, len(owner))
    distance = radius[owner] * np.exp(np.clip(rough, -0.9, 0.9))
    points = centre[owner] + distance[:, None] * np.column_stack((1.4 * np.cos(angle), np.sin(angle)))
    return shapely.linearrings(points, indices=owner)


def batches(count: int) -> Iterator[pa.RecordBatch]:
    """Yield a layer's rows."""
    rng = np.random.default_rng(SEED)
    for start in range(0, count, ROWS_PER_BATCH):
        n = min(ROWS_PER_BATCH, count - start)
        yield pa.RecordBatch.from_arrays(
            [
                pa.array(np.arange(start, start + n)),
                pa.array(rng.choice(["wood", "heath", "marsh", "meadow"], n)),
                pa.array(rng.uniform(0, 2_000, n)),
                pa.array(shapely.to_wkb(polygons(rng, n)), type=pa.binary()),
            ],
            schema=SCHEMA,
        )


def layer(folder: Path, count: int) -> Path:
    """Give a GeoPackage of ``count`` polygons, made once and used again."""
    path = folder / f"polygons_{count}_{SEED}.gpkg"
    if not path.exists():
        unfinished = path.with_suffix(".part.gpkg")
        unfinished.unlink(missing_ok=True)
        reader = pa.RecordBatchReader.from_batches(SCHEMA, batches(count))
        write_arrow(
            reader, unfinished, driver="GPKG", geometry_name="geom", geometry_type="Unknown", crs="EPSG:4326",
            layer="polygons",
        )  # fmt: skip
        unfinished.rename(path)
    return path


def coast(folder: Path, vertices: int) -> Path:
    """Give a GeoPackage of one polygon with a rough coast of ``vertices`` vertices."""
    path = folder / f"coast_{vertices}_{SEED}.gpkg"
    if not path.exists():
        rng = np.random.default_rng(SEED)
        angle = 2.0 * np.pi * np.arange(vertices) / vertices
        rough = np.zeros(vertices)
        for octave in range(1, 16):
            rough += rng.normal(0, 0.3 / 1.7**octave) * np.cos(2**octave * angle + rng.uniform(0, 2 * np.pi))
        distance = 3.0 * np.exp(rough)
        points = np.column_stack((10.0 + 1.5 * distance * np.cos(angle), 48.0 + distance * np.sin(angle)))
        frame = gpd.GeoDataFrame({"site": [0]}, geometry=[shapely.Polygon(points)], crs="EPSG:4326")
        pyogrio.write_dataframe(frame, path)
    return path


def small(folder: Path) -> Path:
    """Give a GeoPackage of 30 polygons."""
    return layer(folder, 30)
