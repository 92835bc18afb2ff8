"""The registry of columns: names, limits, meanings, and that computing yields just what it lists."""

import re
from itertools import product

import numpy as np
import pytest

from geoshape.columns import MEASURED, SHORT_NAME_LENGTH, Kind, Status, amplitude_name, columns_for
from geoshape.formulas.families import FAMILIES
from geoshape.layers.names import RESERVED, short_names
from geoshape.options import Family, MeasureOptions, Parts
from tests import shapes
from tests.formulas.plane import columns_of

EVERYTHING = MeasureOptions(parts=Parts.SPLIT, log_moments=True, harmonics=127)

NAMES = [
    *("shape_status", "shape_note", "ground_distortion"),
    *("area_m2", "perimeter_m", "outline_m", "part_count", "hole_count", "vertex_count", "edge_mean_m"),
    *("feret_max_m", "feret_max_azimuth_deg", "feret_min_m"),
    *("polsby_popper", "perimeter_ratio", "reock", "convexity", "rectangularity", "inertia_compactness"),
    *("major_axis_m", "minor_axis_m", "axis_ratio", "axis_azimuth_deg", "axis_strength"),
    *("hu_1", "hu_2", "hu_3", "hu_4", "hu_5", "hu_6", "hu_7", "affine_1", "affine_2", "affine_3"),
    *("ellipticity", "triangularity"),
    *("fd_p02", "fd_p03", "fd_p04", "fd_p05", "fd_p06", "fd_p07", "fd_p08"),
    *("fd_n01", "fd_n02", "fd_n03", "fd_n04", "fd_n05", "fd_n06", "fd_n07", "fd_n08"),
    *("fd_departure", "fd_entropy", "fd_harmonics_95"),
]
"""Of METHODS.md, section 3, in its order."""

ELEMENTARY = {
    "shape_status",
    "shape_note",
    "part_number",
    "area_m2",
    "perimeter_m",
    "outline_m",
    "part_count",
    "hole_count",
    "vertex_count",
    "edge_mean_m",
    "feret_max_azimuth_deg",
    "convexity",
    "rectangularity",
    "major_axis_m",
    "minor_axis_m",
    "axis_ratio",
    "axis_azimuth_deg",
    "axis_strength",
}
"""Columns whose definition is their meaning; every other one names where it was published."""

UNIT_OF_ENDING = {"_m": "m", "_m2": "m2", "_deg": "deg", "_count": "1"}


def test_default_names_and_their_order():
    assert [column.name for column in columns_for(MeasureOptions())] == NAMES


@pytest.mark.parametrize("families", [(Family.AXES,), (Family.MOMENTS, Family.EXTENT), tuple(Family)])
@pytest.mark.parametrize("prefix", ["", "gs_"])
def test_families_stand_in_order_behind_the_record(families, prefix):
    columns = columns_for(MeasureOptions(families=families, prefix=prefix))
    order = [column.family for column in columns]
    assert order[:3] == ["record"] * 3
    wanted = [str(family) for family in Family if family in families]
    assert list(dict.fromkeys(order[3:])) == wanted
    assert [column.name for column in columns] == [
        prefix + column.name for column in columns_for(MeasureOptions()) if column.family in {"record", *wanted}
    ]


def test_parts_are_numbered_when_split():
    names = [column.name for column in columns_for(MeasureOptions(parts="split", families=("axes",)))]
    assert names[:4] == ["shape_status", "shape_note", "ground_distortion", "part_number"]


def test_logarithms_stand_behind_the_moments():
    names = [column.name for column in columns_for(MeasureOptions(log_moments=True, families=("moments",)))]
    assert names[-8:] == ["triangularity", *(f"hu_{i}_log" for i in range(1, 8))]


@pytest.mark.parametrize("options", [MeasureOptions(), EVERYTHING], ids=["default", "everything"])
class TestEveryColumn:
    def test_names_are_unlike_without_case(self, options):
        for attribute in ("name", "short_name"):
            names = [getattr(column, attribute).casefold() for column in columns_for(options)]
            assert len(set(names)) == len(names), attribute

    def test_names_are_plain_and_free(self, options):
        for column in columns_for(options):
            for name in (column.name, column.short_name):
                assert re.fullmatch(r"[a-z][a-z0-9_]*", name), name
                assert name not in RESERVED
            assert len(column.short_name) <= SHORT_NAME_LENGTH

    def test_units(self, options):
        for column in columns_for(options):
            assert bool(column.unit) == (column.kind is not Kind.TEXT), column.name
            for ending, unit in UNIT_OF_ENDING.items():
                if column.name.endswith(ending):
                    assert column.unit == unit, column.name
            assert column.unit in {"", "1", "m", "m2", "deg", "bit"}

    def test_meanings_are_one_plain_line(self, options):
        meanings = [column.meaning for column in columns_for(options)]
        assert len(set(meanings)) == len(meanings)
        for meaning in meanings:
            assert meaning.isascii()
            assert 8 <= len(meaning) <= 120
            assert "\n" not in meaning
            assert not meaning.endswith(".")

    def test_sources(self, options):
        for column in columns_for(options):
            if column.name in ELEMENTARY:
                assert not column.source, column.name
            else:
                assert re.search(r"[A-Z][a-z]+.*\b(1[89]|20)\d\d\b", column.source), column.name

    def test_kinds_and_bounds(self, options):
        for column in columns_for(options):
            counts = column.name.endswith("_count") or column.name in {"part_number", "fd_harmonics_95"}
            assert (column.kind is Kind.COUNT) == counts, column.name
            assert (column.kind is Kind.TEXT) == (column.name in {"shape_status", "shape_note"})
            if column.low is not None and column.high is not None:
                assert column.low < column.high


@pytest.mark.parametrize("prefix", ["s", "gs_", "site_", "long_prefix_"])
def test_a_prefix_keeps_short_names_short_and_unlike(prefix):
    """As they are written: the registry's short names, settled by the writer where the cut makes them alike."""
    columns = columns_for(MeasureOptions(prefix=prefix, parts="split", log_moments=True, harmonics=16))
    assert all(column.name.startswith(prefix) for column in columns)
    assert all(len(column.short_name) <= SHORT_NAME_LENGTH for column in columns)
    written = list(short_names([], columns).values())
    assert len({name.casefold() for name in written}) == len(columns)
    assert all(len(name) <= SHORT_NAME_LENGTH for name in written)


@pytest.mark.parametrize("prefix", ["s", "p_", "gs_"])
def test_registry_short_names_are_unlike_with_a_usual_prefix(prefix):
    columns = columns_for(MeasureOptions(prefix=prefix, parts="split", log_moments=True))
    names = [column.short_name.casefold() for column in columns]
    assert len(set(names)) == len(names)


@pytest.mark.parametrize(
    ("k", "name"), [(2, "fd_p02"), (-1, "fd_n01"), (10, "fd_p10"), (-99, "fd_n99"), (100, "fd_p100"), (-127, "fd_n127")]
)
def test_amplitude_names(k, name):
    assert amplitude_name(k) == name


def test_measured_statuses():
    assert {Status.OK, Status.REPAIRED} == MEASURED
    assert {str(status) for status in Status} == {
        "ok",
        "repaired",
        "empty",
        "missing",
        "not_polygon",
        "collapsed",
        "invalid",
    }


@pytest.mark.parametrize("family", list(Family))
def test_a_family_computes_what_the_registry_lists(family):
    """Counts of parts, holes and vertices come with the reading, not from the family."""
    options = MeasureOptions(families=(family,), log_moments=True, harmonics=20)
    listed = [column.name for column in columns_for(options) if column.family == family]
    computed = set(columns_of(shapes.QUAD.polygon, options=options, families=(family,)))
    assert computed == set(listed) - {"part_count", "hole_count", "vertex_count"}
    assert set(FAMILIES) == set(Family)


def test_values_stay_within_their_bounds():
    """Bounds hold to the last digit: for circles, squares, lines and all that rounding might push over them."""
    rings = [
        shapes.regular(n, radius, turn) for n, radius, turn in product((3, 4, 6, 64, 1000), (1.0, 1e4), (0, 7.3, 45))
    ]
    rings += [shapes.turned(shapes.rectangle(width, 1), turn) for width, turn in product((1, 2, 1e4), (0, 0.1, 45))]
    shape_list = [shapes.Shape("", [[ring]]) for ring in rings] + shapes.SHAPES
    columns = columns_of(*(shape.polygon for shape in shape_list), options=MeasureOptions(log_moments=True))
    for column in columns_for(MeasureOptions(log_moments=True)):
        if column.name not in columns:
            continue
        values = columns[column.name][~np.isnan(columns[column.name])]
        assert len(values), column.name
        if column.low is not None:
            assert values.min() >= column.low, column.name
        if column.high is not None:
            assert values.max() <= column.high, column.name
        if column.unit == "deg":
            assert values.max() < 180, column.name
