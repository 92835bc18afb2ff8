"""Measured layers for the tests of the report."""

import warnings
from dataclasses import asdict, replace
from functools import cache
from pathlib import Path

import geopandas as gpd
import numpy as np
import pandas as pd
import pyarrow as pa
import shapely

import geoshape
from geoshape.columns import Column, Kind, columns_for
from geoshape.errors import GroundWarning
from geoshape.options import MeasureOptions
from geoshape.report import ReportData

FOLDER = Path(__file__).parents[2] / "sample_layers"

MARKUP = "<img src=x onerror=\"document.title='broken'\"> & </script><b>bold</b> $x$ {{ 1 }}"
"""A name that would do harm if it were taken for more than text."""


def report_data(polygons, options=None, **lineage):
    """Measure a GeoDataFrame and lay it out as a report takes it."""
    options = options or MeasureOptions()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", GroundWarning)
        measured = geoshape.measure(polygons, options=options)
    table = pa.Table.from_pandas(pd.DataFrame(measured.drop(columns="geometry")), preserve_index=False)
    known = {
        "command": "measure",
        "input": "made.gpkg",
        "layer": "made",
        "options": asdict(options),
        "ground": "centred: a plane for each shape",
        "warnings": (),
        "started": "2026-03-09T10:00:00+00:00",
        "seconds": 1.5,
        "versions": {"geoshape": geoshape.__version__, "shapely": shapely.__version__},
    }
    wkb = np.asarray(shapely.to_wkb(np.asarray(measured.geometry.values, dtype=object)), dtype=object)
    crs = measured.crs.to_wkt() if measured.crs else None
    return ReportData(table, wkb, crs, known | lineage, columns_for(options))


@cache
def sample(name):
    """One of the sample layers, measured."""
    return report_data(gpd.read_file(FOLDER / name), input=name, layer=name.partition(".")[0])


def with_column(data, name, values, column=None):
    """Add a column, described where ``column`` is given."""
    table = data.table.append_column(name, pa.array(values, from_pandas=True))
    columns = (*data.columns, replace(column, name=name)) if column else data.columns
    return replace(data, table=table, columns=columns)


@cache
def decided():
    """The lakes with groups, flags, standard errors, and a name full of markup."""
    data = sample("lakes.gpkg")
    n = data.n_rows
    names = data.table.column("name").to_pylist()
    names[int(np.argmin(data.table.column("polsby_popper").to_numpy()))] = MARKUP
    table = data.table.set_column(data.table.column_names.index("name"), "name", pa.array(names))
    table = table.set_column(table.column_names.index("lake_type"), "lake <i>type</i>", table.column("lake_type"))
    data = replace(data, table=table)
    ratio = data.table.column("axis_ratio").to_numpy()
    group = np.where(ratio > np.median(ratio), 1, 2)
    prototype = np.isin(np.arange(n), [np.flatnonzero(group == 1)[0], np.flatnonzero(group == 2)[0]])
    flag = ratio < 0.35
    for name, values in {
        "polsby_popper_se": 0.01 * (1 + np.arange(n) / n),
        "polsby_popper_bias": np.full(n, -0.025),
        "group": group,
        "group_distance": np.abs(ratio - np.median(ratio)),
        "is_prototype": prototype,
        "flag": flag,
        "flag_reasons": np.where(flag, "narrow; <i>odd</i>; unusual", None),
        "flag_score": np.where(flag, 1.0 / ratio, np.nan),
    }.items():
        data = with_column(data, name, values)
    rules = [{"name": "narrow", "rule": "axis_ratio < 0.35", "message": "too <b>narrow</b>"}]
    unusual = {"columns": ["axis_ratio", "reock"]}
    options = {"rules": rules, "unusual": unusual, "measure": data.lineage["options"]}
    return replace(data, lineage={**data.lineage, "options": options})


@cache
def few():
    """A few lakes."""
    data = sample("lakes.gpkg")
    return replace(data, table=data.table.slice(0, 12), geometry=data.geometry[:12])


def squares(n, *, crs="EPSG:32633", side=10.0):
    """Squares in a row."""
    west = 500_000.0 + 2.0 * side * np.arange(n)
    return gpd.GeoDataFrame(geometry=shapely.box(west, 6_000_000.0, west + side, 6_000_000.0 + side), crs=crs)


def table_of(columns, kinds=None, lineage=None):
    """A layer of values alone, without geometries; columns are named as in the registry."""
    table = pa.table(columns)
    registry = {column.name: column for column in columns_for(MeasureOptions(log_moments=True))}
    described = tuple(registry[name] for name in columns if name in registry)
    empty = np.full(len(table), None, dtype=object)
    return ReportData(table, empty, None, lineage or {}, described)


NUMBER = Column("value", "value", Kind.NUMBER, "m", 0.0, None, "a value", "Someone 1999", "extent")


@cache
def many(n):
    """A large layer of simple outlines whose columns are drawn at random."""
    random = np.random.default_rng(5)
    options = MeasureOptions()
    columns = columns_for(options)
    values = {"cover": pa.array(random.choice(["wood", "heath", "marsh"], n))}
    for column in columns:
        if column.kind is Kind.TEXT:
            text = "ok" if column.name == "shape_status" else None
            values[column.name] = pa.array([text] * n, pa.string())
        elif column.kind is Kind.COUNT:
            values[column.name] = pa.array(random.integers(1, 40, n))
        else:
            values[column.name] = pa.array(random.random(n))
    values["flag"] = pa.array((random.random(n) < 0.005).astype(np.int64))
    corners = np.exp(2j * np.pi * np.arange(24) / 24)[None, :] * random.uniform(0.5, 1.0, (n, 24))
    at = random.uniform(0, 1e6, (n, 2)) + 4_000_000.0
    points = at[:, None, :] + 400.0 * np.stack((corners.real, corners.imag), axis=2)
    wkb = np.asarray(shapely.to_wkb(shapely.polygons(points)), dtype=object)
    lineage = {"layer": "many", "options": asdict(options)}
    return ReportData(pa.table(values), wkb, "EPSG:3035", lineage, columns)
