"""Outlines of pixels are told from outlines that only have right angles."""

import numpy as np
import pytest
from shapely import Polygon, affinity, box, union_all

from geoshape.formulas.staircase import is_staircase
from tests import shapes
from tests.formulas.plane import batch_of


def pixels(condition, n=20, size=30.0, corner=(0.0, 0.0)):
    """Union of the pixels of an n x n grid whose centres meet a condition."""
    at = np.arange(n) + 0.5
    column, row = np.meshgrid(at, at)
    chosen = np.argwhere(condition(column, row))
    x0, y0 = corner
    cells = [box(x0 + c * size, y0 + r * size, x0 + (c + 1) * size, y0 + (r + 1) * size) for r, c in chosen]
    return union_all(cells)


DISK = pixels(lambda x, y: (x - 10) ** 2 + (y - 10) ** 2 < 80)
STRIPE = pixels(lambda x, y: abs(x - y) < 1.5)

STAIRCASES = {
    "disk": DISK,
    "diagonal stripe": STRIPE,
    "far away": pixels(lambda x, y: abs(x - y) < 1.5, corner=(4_321_000.0, 3_210_000.0)),
    "pixels of a fraction of a degree": affinity.scale(DISK, 1e-5, 1e-5, origin=(0, 0)),
    "disk with vertices on its sides": DISK.segmentize(7.0),
    "smallest plus of pixels": shapes.PLUS.polygon,
}

OTHERS = {
    "square": shapes.SQUARE.polygon,
    "L": shapes.L_SHAPE.polygon,
    "circle": Polygon(shapes.regular(64)),
    "turned staircase": affinity.rotate(DISK, 10),
    "steps of any length": affinity.affine_transform(shapes.PLUS.polygon, (1, 0, 0, 1, 0, 0)).difference(
        box(2.59, 0.9, 4, 1.2)
    ),
    "nothing": None,
}


@pytest.mark.parametrize("name", STAIRCASES)
def test_pixels_are_recognised(name):
    assert is_staircase(batch_of(STAIRCASES[name])).tolist() == [True]


@pytest.mark.parametrize("name", OTHERS)
def test_others_are_not(name):
    assert is_staircase(batch_of(OTHERS[name])).tolist() == [False]


def test_together():
    batch = batch_of(*STAIRCASES.values(), *OTHERS.values())
    assert is_staircase(batch).tolist() == [True] * len(STAIRCASES) + [False] * len(OTHERS)


def test_holes_do_not_matter():
    holed = Polygon(shapes.regular(64, 100.0)).difference(
        affinity.translate(affinity.scale(DISK, 0.1, 0.1), -300, -300)
    )
    assert holed.interiors
    assert is_staircase(batch_of(holed)).tolist() == [False]


def test_nothing_at_all():
    assert is_staircase(batch_of()).tolist() == []
    assert is_staircase(batch_of(None, None)).tolist() == [False, False]
