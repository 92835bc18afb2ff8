"""Layers as they come: each fault gives a status, a reason and nulls, and never costs another row its numbers."""

import struct
import warnings

import geopandas as gpd
import numpy as np
import pandas as pd
import pytest
import shapely
from shapely import GeometryCollection, LineString, MultiPolygon, Point, Polygon, affinity, box

import geoshape
from geoshape import MeasureOptions, columns_for
from geoshape.errors import ColumnNameError, GeometryError, GroundError
from geoshape.geometry import read_wkb

UTM = "EPSG:32632"


def layer(*shapes, crs=UTM, **attributes):
    return gpd.GeoDataFrame(attributes, geometry=gpd.GeoSeries(list(shapes), crs=crs))


def measured(*shapes, crs=UTM, **options):
    return geoshape.measure(layer(*shapes, crs=crs), options=MeasureOptions(**options))


def with_coordinates(*points):
    body = b"".join(struct.pack("<dd", *point) for point in points)
    return read_wkb([struct.pack("<BIII", 1, 3, 1, len(points)) + body])[0][0]


SQUARE = box(500_000, 5_000_000, 500_100, 5_000_100)
BOW_TIE = Polygon([(500_000, 5_000_000), (500_010, 5_000_010), (500_010, 5_000_000), (500_000, 5_000_010)])


class TestEveryKindOfRow:
    SHAPES = (
        SQUARE,
        None,
        Polygon(),
        Point(500_000, 5_000_000),
        LineString([(0, 0), (1, 1)]),
        GeometryCollection([Point(500_000, 5_000_000), SQUARE]),
        BOW_TIE,
        with_coordinates((500_000, 5_000_000), (500_100, 5_000_000), (500_050, np.nan), (500_000, 5_000_000)),
        with_coordinates((500_000, 5_000_000), (500_100, 5_000_000), (500_050, np.inf), (500_000, 5_000_000)),
        Polygon([(500_000, 5_000_000), (500_100, 5_000_000), (500_050, 5_000_000)]),
        box(1e9, 1e9, 1e9 + 1, 1e9 + 1),
    )
    STATUS = ("ok", "missing", "empty", "not_polygon", "not_polygon", "repaired", "repaired", "invalid", "invalid",
              "collapsed", "invalid")  # fmt: skip

    @pytest.fixture(scope="class")
    @staticmethod
    def rows():
        return measured(*TestEveryKindOfRow.SHAPES)

    def test_statuses(self, rows):
        assert tuple(rows.shape_status) == self.STATUS

    def test_whatever_is_not_measured_says_why_and_is_null(self, rows):
        lost = ~rows.shape_status.isin(["ok", "repaired"])
        assert rows.shape_note[lost].notna().all()
        numbers = [c.name for c in columns_for(MeasureOptions()) if c.kind == "number"]
        assert rows.loc[lost, numbers].isna().all(axis=None)

    def test_whatever_is_measured_has_all_its_numbers(self, rows):
        numbers = [c.name for c in columns_for(MeasureOptions()) if c.kind != "text" and "azimuth" not in c.name]
        there = rows.shape_status.isin(["ok", "repaired"])
        assert rows.loc[there, numbers].notna().all(axis=None)

    def test_good_rows_are_what_they_are_alone(self, rows):
        alone = measured(SQUARE).iloc[0]
        pd.testing.assert_series_equal(rows.iloc[0], alone, check_names=False)
        assert rows.area_m2[5] == alone.area_m2

    def test_a_repair_says_what_it_did(self, rows):
        assert rows.shape_note[6] == (
            "self-intersection at 500005 5000005; repaired, area 0 -> 50 in the layer's units"
        )


class TestDegenerateShapes:
    @pytest.mark.parametrize(
        ("shape", "status", "area"),
        [
            # hole equal to the shell; overlapping and nested parts; a spike; repeated vertices
            (Polygon([(0, 0), (4, 0), (4, 4), (0, 4)], [[(0, 0), (4, 0), (4, 4), (0, 4)]]), "collapsed", np.nan),
            (MultiPolygon([box(0, 0, 4, 4), box(2, 2, 6, 6)]), "repaired", 28.0),
            (MultiPolygon([box(0, 0, 4, 4), box(1, 1, 2, 2)]), "repaired", 16.0),
            (Polygon([(0, 0), (4, 0), (4, 4), (2, 4), (2, 9), (2, 4), (0, 4)]), "repaired", 16.0),
            (Polygon([(0, 0), (4, 0), (4, 0), (4, 4), (4, 4), (4, 4), (0, 4), (0, 0)]), "ok", 16.0),
            (box(0, 0, 1e-3, 1e-3), "ok", 1e-6),
            (box(1e9, 1e9, 1e9 + 4, 1e9 + 4), "ok", 16.0),
            (Polygon([(0, 0), (10_000, 0), (10_000, 0.001), (0, 0.001)]), "ok", 10.0),
        ],
    )
    def test_on_the_plane(self, shape, status, area):
        row = measured(shape, crs=None, ground="plane").iloc[0]
        assert row.shape_status == status
        np.testing.assert_allclose(row.area_m2, area, rtol=1e-9)

    def test_a_small_square_far_away_keeps_its_digits(self):
        row = measured(box(1e9, 1e9, 1e9 + 4, 1e9 + 4), crs=None, ground="plane", spectrum="exact").iloc[0]
        near = measured(box(0, 0, 4, 4), crs=None, ground="plane", spectrum="exact").iloc[0]
        numbers = [
            c.name for c in columns_for(MeasureOptions()) if c.kind == "number" and c.name != "ground_distortion"
        ]
        np.testing.assert_allclose(row[numbers].astype(float), near[numbers].astype(float), rtol=1e-12, atol=1e-15)

    def test_latitude_beyond_the_pole(self):
        rows = measured(box(10, 89, 11, 91), box(10, 50, 11, 51), crs="EPSG:4326")
        assert rows.shape_status.tolist() == ["invalid", "ok"]
        assert rows.shape_note[0] == "latitude beyond 90 degrees"

    @pytest.mark.slow
    def test_a_ring_of_two_million_vertices(self):
        angle = np.linspace(0, 2 * np.pi, 2_000_000, endpoint=False)
        circle = Polygon(np.column_stack((5e5 + 1e4 * np.cos(angle), 5e6 + 1e4 * np.sin(angle))))
        row = measured(circle, crs=None, ground="plane").iloc[0]
        assert row.vertex_count == 2_000_000
        assert row.polsby_popper == pytest.approx(1.0, abs=1e-9)
        assert row.reock == pytest.approx(1.0, abs=1e-9)


class TestOptions:
    TWO = MultiPolygon([box(0, 0, 4, 4), Polygon(box(10, 0, 20, 10).exterior, [box(12, 2, 14, 4).exterior.coords])])

    def test_split_gives_a_row_a_part(self):
        rows = geoshape.measure(
            layer(self.TWO, None, box(0, 0, 1, 1), crs=None, site=["a", "b", "c"]),
            options=MeasureOptions(ground="plane", parts="split"),
        )
        assert rows.site.tolist() == ["a", "a", "b", "c"]
        assert rows.index.tolist() == [0, 0, 1, 2]
        np.testing.assert_array_equal(rows.part_number.astype(float), [1, 2, np.nan, 1])
        np.testing.assert_allclose(rows.area_m2, [16, 96, np.nan, 1])
        assert rows.geometry.geom_type.dropna().tolist() == ["Polygon"] * 3

    def test_filled_holes_count_as_area(self):
        whole = measured(self.TWO, crs=None, ground="plane", holes="fill").iloc[0]
        assert whole.area_m2 == pytest.approx(116.0)
        assert whole.perimeter_m == whole.outline_m == pytest.approx(56.0)
        assert whole.hole_count == 1

    def test_invalid_null_and_stop(self):
        assert measured(BOW_TIE, invalid="null").shape_status.tolist() == ["invalid"]
        with pytest.raises(GeometryError, match=r"row 2 is invalid: self-intersection"):
            measured(SQUARE, BOW_TIE, invalid="stop")

    def test_log_moments(self):
        row = measured(Polygon([(0, 0), (4, 0), (0, 3)]), crs=None, ground="plane", log_moments=True).iloc[0]
        assert row.hu_1_log == pytest.approx(np.log10(25 / 108))
        assert row.hu_7_log == pytest.approx(-np.log10(28 / 36905625))

    def test_prefix_and_families(self):
        row = measured(SQUARE, prefix="m_", families=("axes",)).iloc[0]
        assert [name for name in row.index if name.startswith("m_")] == [
            column.name for column in columns_for(MeasureOptions(prefix="m_", families=("axes",)))
        ]
        assert "m_area_m2" not in row.index

    def test_sampled_and_exact_spectra_agree(self):
        shape = affinity.scale(SQUARE, 2.0, 1.0)
        sampled, exact = measured(shape).iloc[0], measured(shape, spectrum="exact").iloc[0]
        assert sampled.fd_departure == pytest.approx(exact.fd_departure, abs=2e-4)
        assert sampled.fd_departure != exact.fd_departure

    def test_azimuth_is_from_true_north_on_every_ground(self):
        # A strip along a meridian, far from the grid's own.
        strip = box(25.0, 55.0, 25.001, 55.05)
        for ground in ("centred", "layer", "EPSG:3035"):
            azimuth = measured(strip, crs="EPSG:4326", ground=ground).axis_azimuth_deg.item()
            assert min(azimuth, 180.0 - azimuth) < 0.05, ground

    def test_height_and_measure_are_ignored_and_kept(self):
        high = shapely.force_3d(SQUARE, 12.0)
        row = measured(high)
        assert row.area_m2.item() == measured(SQUARE).area_m2.item()
        assert row.geometry.iloc[0].has_z


class TestTheFrameRoute:
    def test_a_layer_without_rows_gets_its_columns(self):
        empty = measured()
        assert len(empty) == 0
        assert [c.name for c in columns_for(MeasureOptions())] == list(empty.columns[1:])
        assert empty.part_count.dtype == "Int64"

    def test_index_attributes_and_geometry_are_kept(self):
        source = layer(SQUARE, SQUARE, site=["x", "y"]).set_index(pd.Index([7, 3], name="key")).rename_geometry("place")
        rows = geoshape.measure(source)
        assert rows.index.tolist() == [7, 3]
        assert rows.site.tolist() == ["x", "y"]
        assert rows.geometry.name == "place"
        assert rows.crs == source.crs

    def test_batches_do_not_show(self):
        many = layer(*[affinity.scale(SQUARE, i, 1.0) for i in range(1, 40)])
        whole = geoshape.measure(many)
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr("geoshape.frames.MAX_BATCH_VERTICES", 17)
            pieces = geoshape.measure(many)
        pd.testing.assert_frame_equal(
            pd.DataFrame(whole.drop(columns="geometry")), pd.DataFrame(pieces.drop(columns="geometry"))
        )

    def test_a_clash_names_the_columns_and_the_prefix(self):
        with pytest.raises(ColumnNameError, match=r"the layer already has area_m2; choose a prefix"):
            geoshape.measure(layer(SQUARE, AREA_M2=[1.0]))

    def test_no_crs_stops(self):
        with pytest.raises(GroundError, match="--assume-crs"):
            measured(SQUARE, crs=None)

    def test_an_ordinary_layer_warns_of_nothing(self):
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            measured(SQUARE, None, BOW_TIE)


def test_public_names_are_there():
    assert set(dir(geoshape)) == set(geoshape.__all__)
    for name in geoshape.__all__:
        assert getattr(geoshape, name) is not None
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = geoshape.nothing
