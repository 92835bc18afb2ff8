"""Outlines of pixels are told from outlines that only look like them."""

import numpy as np
import pytest
import shapely
from shapely import affinity

from geoshape.formulas.staircase import is_staircase
from geoshape.geometry import ring_batch


def pixels(rows, width=1.0, height=1.0):
    """Union of the pixels marked in rows of text."""
    boxes = [
        shapely.box(j * width, -i * height, (j + 1) * width, (1 - i) * height)
        for i, row in enumerate(rows)
        for j, sign in enumerate(row)
        if sign == "#"
    ]
    return shapely.union_all(boxes)


BLOB = pixels(["..##..", ".####.", "######", ".###..", "..#..."], 30.0, 30.0)
OBLONG = pixels(["..##..", ".####.", "######", ".###..", "..#..."], 30.0, 20.0)
HOUSE = shapely.Polygon(
    [(0, 0), (9.3, 0), (9.3, 4.1), (12.7, 4.1), (12.7, 8.8), (7.9, 8.8), (7.9, 6.6), (5.2, 6.6), (5.2, 11.3),
     (2.4, 11.3), (2.4, 7.7), (0, 7.7)]
)  # fmt: skip
CIRCLE = shapely.Point(0, 0).buffer(100.0)


@pytest.mark.parametrize(
    ("shape", "expected"),
    [
        (BLOB, True),
        (OBLONG, True),
        (affinity.translate(BLOB, 5e6, 4e6), True),
        (affinity.rotate(BLOB, 10), False),
        (HOUSE, False),
        (CIRCLE, False),
        (shapely.box(0, 0, 1, 1), False),
        (shapely.MultiPolygon([CIRCLE, affinity.translate(BLOB, 1000, 0)]), True),
    ],
)
def test_tells_pixels_from_the_rest(shape, expected):
    assert is_staircase(ring_batch(np.array([shape, None], dtype=object))).tolist() == [expected, False]


def test_nothing_in_nothing_out():
    assert is_staircase(ring_batch(np.array([], dtype=object))).tolist() == []
