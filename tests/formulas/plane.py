"""Every column of polygons on the plane they are drawn on, with no ground under them."""

import numpy as np

from geoshape.formulas import moments
from geoshape.formulas.families import FAMILIES, Shapes
from geoshape.geometry import ring_batch
from geoshape.options import Family, MeasureOptions
from geoshape.rings import RingBatch

DEFAULTS = MeasureOptions()
FAMILY_LIST = tuple(Family)

LENGTHS = ["perimeter_m", "outline_m", "edge_mean_m", "feret_max_m", "feret_min_m", "major_axis_m", "minor_axis_m"]
DIRECTIONS = ["feret_max_azimuth_deg", "axis_azimuth_deg"]


def zero_scales(row):
    """Size of the terms that cancel where symmetry makes an invariant vanish: rounding is relative to that."""
    second, third = row["hu_1"], max(row["hu_1"] ** 3, row["hu_3"], row["hu_4"])
    scales = {"hu_2": second**2, "hu_3": third, "hu_4": third, "hu_5": third**2, "hu_6": second * third}
    return scales | {"hu_7": third**2, "affine_2": third**2, "affine_3": second * third}


def objects(*items):
    array = np.empty(len(items), dtype=object)
    array[:] = items
    return array


def batch_of(*polygons, local_origin=True):
    return ring_batch(objects(*polygons), local_origin=local_origin)


def columns_of(*polygons, options=DEFAULTS, families=FAMILY_LIST):
    """Give each column as an array with an entry for each polygon."""
    batch = batch_of(*polygons)
    return columns_of_batch(batch, options, families)


def columns_of_batch(batch: RingBatch, options=DEFAULTS, families=FAMILY_LIST):
    edges = batch.sum_ring_values(batch.ring_size.astype(float)).astype(np.int64)
    shapes = Shapes(batch, np.zeros(batch.n_features), edges)
    columns = {}
    with np.errstate(divide="ignore", invalid="ignore", over="ignore"):
        for family in families:
            columns |= FAMILIES[family](shapes, options)
    return columns


def row_of(polygon, options=DEFAULTS, families=FAMILY_LIST):
    """Give the columns of one polygon as plain numbers."""
    return {name: float(value[0]) for name, value in columns_of(polygon, options=options, families=families).items()}


def central_of(*polygons):
    return moments.central_moments(moments.raw_moments(batch_of(*polygons)))


def tolerance(row, name, relative):
    """Largest difference that rounding explains: relative to the value, or to its scale where it vanishes."""
    scale = abs(row[name])
    if name.startswith(("hu_", "affine_")):
        scale = max(scale, 1e-3 * zero_scales(row).get(name, 0.0))
    if name == "axis_strength":
        scale = max(scale, 1e-5)
    if name.startswith("fd_"):
        # An amplitude may vanish; it is relative to |Z_1|, which is 1.
        scale = max(scale, 1e-3)
    return relative * scale


def angle_between(a, b):
    """Difference of two directions without a sense, in degrees."""
    return abs((a - b + 90.0) % 180.0 - 90.0)


def assert_same(left, right, *, names=None, relative=1e-9):
    """Hold two rows together, column by column."""
    for name in names or left:
        a, b = left[name], right[name]
        if np.isnan(a) or np.isnan(b):
            assert np.isnan(a) == np.isnan(b), f"{name}: {a} and {b}"
            continue
        if name in DIRECTIONS:
            # A shape without a strong direction turns its axis with the smallest change of its moments.
            slack = 1e-7 / left["axis_strength"] if name == "axis_azimuth_deg" else 1e-6
            assert angle_between(a, b) <= slack, f"{name}: {a} and {b}"
            continue
        assert abs(a - b) <= tolerance(left, name, relative), f"{name}: {a} and {b}"
