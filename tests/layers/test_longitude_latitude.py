"""Geometries for GeoJSON: transformed, turned and cut at 180 degrees."""

from collections import Counter

import numpy as np
import pyarrow as pa
import pyproj
import pytest
import shapely

from geoshape.layers.rfc7946 import LongitudeLatitude, is_wgs84
from tests.layers import samples


def fitted(
    crs: str | None, *shapes: shapely.Geometry | str | None
) -> tuple[list[shapely.Geometry | None], Counter[str]]:
    losses: Counter[str] = Counter()
    given = [shapely.from_wkt(shape) if isinstance(shape, str) else shape for shape in shapes]
    wkb = pa.array([None if s is None else shapely.to_wkb(s, output_dimension=4) for s in given], pa.binary())
    wkt = None if crs is None else pyproj.CRS(crs).to_wkt()
    found = LongitudeLatitude(wkt).fit(wkb, losses).to_pylist()
    return [None if value is None else shapely.from_wkb(value) for value in found], losses


def test_what_is_wgs84() -> None:
    names = ["EPSG:4326", "OGC:CRS84", "EPSG:4979", "EPSG:4269", "EPSG:4258", "EPSG:3857"]
    assert [is_wgs84(pyproj.CRS(name).to_wkt()) for name in names] == [True, True, True, False, False, False]


@pytest.mark.parametrize("crs", ["EPSG:4326", None])
def test_coordinates_pass_through(crs: str | None) -> None:
    shape = shapely.from_wkt(samples.MULTI)
    (found,), losses = fitted(crs, shape)
    assert found is not None
    assert shapely.equals_exact(shapely.normalize(found), shapely.normalize(shape))
    assert not losses


def test_rings_turn_by_the_right_hand() -> None:
    shape = shapely.from_wkt(samples.POLYGON).reverse()
    assert not shape.exterior.is_ccw
    (found,), _ = fitted("EPSG:4326", shape)
    assert isinstance(found, shapely.Polygon)
    assert found.exterior.is_ccw
    assert not found.interiors[0].is_ccw


def test_heights_stay_and_measures_go() -> None:
    found, losses = fitted("EPSG:4979", samples.POLYGON_Z, samples.POLYGON_ZM, samples.POLYGON_M)
    assert [(s.has_z, s.has_m) for s in found if s is not None] == [(True, False), (True, False), (False, False)]
    assert shapely.get_coordinates(found[1], include_z=True)[:, 2].tolist() == [5, 6, 7, 5]
    found, losses = fitted("EPSG:32632", samples.POLYGON_ZM, samples.POLYGON)
    assert shapely.get_coordinates(found[0], include_z=True)[:, 2].tolist() == [5, 6, 7, 5]
    assert found[1] is not None
    assert not found[1].has_z
    assert not losses


def test_other_geometries_and_nothing() -> None:
    found, losses = fitted("EPSG:32632", "POINT (500000 0)", None, samples.EMPTY)
    assert found[0] is not None
    assert shapely.equals_exact(found[0], shapely.Point(9, 0), 1e-9)
    assert found[1] is None
    assert found[2] is not None
    assert found[2].is_empty
    assert not losses


def test_what_cannot_be_transformed_is_null() -> None:
    far = shapely.box(1e12, 0, 2e12, 1000)
    found, losses = fitted("EPSG:32632", far, "POLYGON ((500000 0, 600000 0, 600000 1000, 500000 0))")
    assert [shape is None for shape in found] == [True, False]
    assert losses == {"geometries too far away to transform are null in GeoJSON": 1}


def test_coordinates_that_are_not_finite_are_null() -> None:
    bad = shapely.polygons([[0, 0], [1, 0], [np.inf, 1], [0, 0]])
    found, losses = fitted("EPSG:4326", bad, samples.POLYGON)
    assert [shape is None for shape in found] == [True, False]
    assert losses == {"geometries with coordinates that are not finite are null in GeoJSON": 1}


# EPSG:3832 is a Mercator whose centre lies at 150 degrees east: 180 degrees is nothing special there.
def pacific(west: float, south: float, east: float, north: float) -> shapely.Polygon:
    to_plane = pyproj.Transformer.from_crs("OGC:CRS84", "EPSG:3832", always_xy=True)
    (x_min, x_max), (y_min, y_max) = to_plane.transform([west, east], [south, north])
    return shapely.box(x_min, y_min, x_max, y_max)


def test_polygons_across_180_degrees_are_cut() -> None:
    (found,), _ = fitted("EPSG:3832", pacific(170, -10, -170, 10))
    assert isinstance(found, shapely.MultiPolygon)
    assert sorted(part.bounds for part in found.geoms) == [
        pytest.approx((-180, -10, -170, 10), abs=1e-9),
        pytest.approx((170, -10, 180, 10), abs=1e-9),
    ]
    assert found.area == pytest.approx(400, rel=1e-9)
    assert all(part.exterior.is_ccw for part in found.geoms)


def test_holes_are_cut_as_well() -> None:
    outer, inner = pacific(170, -10, -170, 10), pacific(175, -5, -179, 5)
    (found,), _ = fitted("EPSG:3832", outer.difference(inner))
    assert found is not None
    assert found.area == pytest.approx(400 - 60, rel=1e-9)
    assert found.is_valid


def test_a_hole_beyond_180_degrees_goes_with_its_shell() -> None:
    outer, inner = pacific(170, -10, -170, 10), pacific(-178, -5, -175, 5)
    (found,), _ = fitted("EPSG:3832", outer.difference(inner))
    assert found is not None
    assert found.area == pytest.approx(400 - 30, rel=1e-9)
    assert found.is_valid


def test_only_the_part_that_crosses_is_cut() -> None:
    both = shapely.MultiPolygon([pacific(120, 0, 130, 10), pacific(170, -10, -170, 10)])
    (found,), _ = fitted("EPSG:3832", both)
    assert isinstance(found, shapely.MultiPolygon)
    assert len(found.geoms) == 3
    assert found.area == pytest.approx(500, rel=1e-9)


def test_heights_of_cut_polygons_stay() -> None:
    flat = pacific(170, -10, -170, 10)
    (found,), _ = fitted("EPSG:3832", shapely.force_3d(flat, 7.0))
    assert found is not None
    assert set(shapely.get_coordinates(found, include_z=True)[:, 2].tolist()) == {7.0}


def test_wide_polygons_that_do_not_cross_stay() -> None:
    wide = shapely.segmentize(pacific(60, -10, -120, 10), 500_000.0)
    crossing, _ = fitted("EPSG:3832", wide)
    assert crossing[0] is not None
    assert crossing[0].area == pytest.approx(180 * 20, rel=1e-6)
    stays = shapely.segmentize(shapely.box(-1.7e7, -1e6, 1.7e7, 1e6), 500_000.0)
    (found,), _ = fitted("EPSG:3857", stays)
    assert isinstance(found, shapely.Polygon)


def test_round_a_pole_nothing_is_cut() -> None:
    cap = shapely.Point(0, 0).buffer(2_000_000, quad_segs=32)
    (found,), _ = fitted("EPSG:3413", cap)
    assert isinstance(found, shapely.Polygon)
    assert shapely.get_num_coordinates(found) == shapely.get_num_coordinates(cap)


def test_lines_across_180_degrees_stay() -> None:
    line = shapely.LineString(np.asarray(pacific(170, -10, -170, 10).exterior.coords)[:3])
    (found,), _ = fitted("EPSG:3832", line)
    assert isinstance(found, shapely.LineString)


def test_invalid_polygons_are_not_cut() -> None:
    to_plane = pyproj.Transformer.from_crs("OGC:CRS84", "EPSG:3832", always_xy=True)
    xs, ys = to_plane.transform([170, -170, 170, -170], [-10, 10, 10, -10])
    bow = shapely.Polygon(np.column_stack([xs, ys]))
    (found,), losses = fitted("EPSG:3832", bow)
    assert found is not None
    assert not losses
