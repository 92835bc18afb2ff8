"""Headers of well-known binary against shapely, and batches cut by them."""

import numpy as np
import pyarrow as pa
import pytest
import shapely
from hypothesis import given
from hypothesis import strategies as st

from geoshape.layers.recut import recut
from geoshape.layers.wkb import GeometryType, headers, promoted, vertex_counts
from tests.layers import samples

TEXTS = [
    samples.POLYGON,
    samples.MULTI,
    samples.POLYGON_Z,
    samples.POLYGON_M,
    samples.POLYGON_ZM,
    samples.EMPTY,
    "POINT (1 2)",
    "MULTIPOINT Z ((1 2 3))",
    "LINESTRING (0 0, 1 1)",
    "GEOMETRYCOLLECTION (POINT (1 2), POLYGON ((0 0, 1 0, 1 1, 0 0)))",
]
CODES = {"Point": 1, "LineString": 2, "Polygon": 3, "MultiPoint": 4, "MultiPolygon": 6, "GeometryCollection": 7}


@pytest.mark.parametrize("flavor", ["iso", "extended"])
@pytest.mark.parametrize("byte_order", [0, 1])
def test_headers_say_what_shapely_says(flavor: str, byte_order: int) -> None:
    shapes = shapely.from_wkt(TEXTS)
    wkb = shapely.to_wkb(shapes, output_dimension=4, flavor=flavor, byte_order=byte_order)  # type: ignore[call-overload]
    head = headers(pa.array([None, *wkb, None], pa.binary()).slice(1, len(TEXTS)))
    assert head.code.tolist() == [CODES[shape.geom_type] for shape in shapes]
    assert head.has_z.tolist() == [bool(shape.has_z) for shape in shapes]
    assert head.has_m.tolist() == [bool(shape.has_m) for shape in shapes]
    assert head.is_swapped.tolist() == [byte_order == 0] * len(TEXTS)
    assert head.is_known.all()
    assert head.is_empty.tolist() == [bool(shape.is_empty) for shape in shapes]


def test_nulls_and_rubbish_have_no_header() -> None:
    head = headers(pa.array([None, b"", b"\1\3", b"\1\3\0\0\0"], pa.binary()))
    assert head.is_known.tolist() == [False, False, False, True]
    assert head.code.tolist() == [0, 0, 0, 3]
    assert head.byte_length.tolist() == [0, 0, 2, 5]
    assert len(headers(pa.array([], pa.binary())).code) == 0
    assert vertex_counts(pa.nulls(2, pa.binary())).tolist() == [0, 0]


def test_vertex_counts_are_near_the_truth() -> None:
    rng = np.random.default_rng(5)
    sizes = [3, 10, 100, 1000]
    for dimensions in (2, 3):
        shapes = shapely.polygons([shapely.linearrings(rng.random((size, dimensions))) for size in sizes])
        wkb = pa.array(shapely.to_wkb(shapes), pa.binary())
        assert vertex_counts(wkb).tolist() == shapely.get_num_coordinates(shapes).tolist()


@pytest.mark.parametrize("byte_order", [0, 1])
def test_promotion_is_what_shapely_makes(byte_order: int) -> None:
    texts = [
        samples.POLYGON,
        None,
        samples.MULTI,
        samples.POLYGON_Z,
        samples.POLYGON_M,
        samples.POLYGON_ZM,
        "POINT (1 2)",
    ]
    shapes = [None if text is None else shapely.from_wkt(text) for text in texts]
    options = {"output_dimension": 4, "flavor": "iso", "byte_order": byte_order}
    wkb = pa.array([None if s is None else shapely.to_wkb(s, **options) for s in shapes], pa.binary())  # type: ignore[call-overload]
    found = promoted(wkb, "MultiPolygon").to_pylist()
    assert [found[i] for i in (1, 2, 6)] == [wkb[i].as_py() for i in (1, 2, 6)]
    for i in (0, 3, 4, 5):
        shape = shapely.from_wkb(found[i])
        assert shape.geom_type == "MultiPolygon"
        assert (shape.has_z, shape.has_m) == (shapes[i].has_z, shapes[i].has_m)  # type: ignore[union-attr]
        # The polygon's own bytes are the end of the new ones.
        assert found[i].endswith(wkb[i].as_py())
        assert shapely.equals(shape, shapes[i])


def test_promotion_of_nothing_is_nothing() -> None:
    (found,) = promoted(samples.wkb(samples.EMPTY), "MultiPolygon").to_pylist()
    assert shapely.from_wkb(found).wkt == "MULTIPOLYGON EMPTY"
    assert promoted(samples.wkb("POINT (1 2)", None), "MultiPolygon").equals(samples.wkb("POINT (1 2)", None))


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("Polygon", GeometryType("Polygon")),
        ("2.5D MultiPolygon", GeometryType("MultiPolygon", has_z=True)),
        ("Measured 3D Polygon", GeometryType("Polygon", has_z=True, has_m=True)),
        ("Measured Polygon", GeometryType("Polygon", has_m=True)),
        ("Polygon ZM", GeometryType("Polygon", has_z=True, has_m=True)),
        ("Polygon M", GeometryType("Polygon", has_m=True)),
        ("Unknown", GeometryType("Unknown")),
        ("Geometry", GeometryType("Unknown")),
        ("", GeometryType("Unknown")),
    ],
)
def test_names_of_types(name: str, expected: GeometryType) -> None:
    assert GeometryType.parse(name) == expected
    assert GeometryType.parse(str(expected)) == expected


def test_what_may_be_polygons() -> None:
    assert [GeometryType(base).may_be_areal for base in ("Unknown", "Polygon", "MultiSurface", "Point")] == [
        True,
        True,
        True,
        False,
    ]


circles = st.lists(st.lists(st.one_of(st.none(), st.integers(3, 40)), max_size=6), max_size=6)


@given(circles, st.integers(1, 100))
def test_recut_loses_and_moves_nothing(sizes: list[list[int | None]], max_vertices: int) -> None:
    angle = [np.linspace(0, 2 * np.pi, size, endpoint=False) for size in range(41)]
    stream = []
    row = 0
    for batch in sizes:
        wkb = [
            None if size is None else shapely.to_wkb(shapely.polygons(np.column_stack([np.cos(a), np.sin(a)])))
            for size, a in ((size, angle[size or 0]) for size in batch)
        ]
        rows = pa.record_batch({"row": pa.array(range(row, row + len(batch)), pa.int64())})
        stream.append((rows, pa.array(wkb, pa.binary())))
        row += len(batch)
    batches = list(recut(stream, max_vertices))
    assert [value for batch in batches for value in batch.attributes.column(0).to_pylist()] == list(range(row))
    assert [value for batch in batches for value in batch.geometry.to_pylist()] == [
        value for _, geometry in stream for value in geometry.to_pylist()
    ]
    assert [batch.first_row for batch in batches] == np.cumsum([0, *(b.n_rows for b in batches)])[:-1].tolist()
    for batch in batches:
        cost = np.maximum(vertex_counts(batch.geometry), 1).sum()
        assert batch.n_rows == 1 or cost <= max_vertices
    # No two neighbours would have fitted together: batches are as large as may be.
    costs = [int(np.maximum(vertex_counts(batch.geometry), 1)[0]) for batch in batches[1:]]
    for batch, following in zip(batches, costs, strict=False):
        assert np.maximum(vertex_counts(batch.geometry), 1).sum() + following > max_vertices
