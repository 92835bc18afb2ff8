"""The registry of columns: the one place that says what each number is called, means and comes from.

Computation, command help, data dictionary, README table, writers, report and tests all read it.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from enum import StrEnum

from geoshape.options import Family, MeasureOptions, Parts

SHORT_NAME_LENGTH = 10


class Kind(StrEnum):
    """What a column holds."""

    NUMBER = "number"
    COUNT = "count"
    TEXT = "text"


class Status(StrEnum):
    """What became of a feature."""

    OK = "ok"
    REPAIRED = "repaired"
    EMPTY = "empty"
    MISSING = "missing"
    NOT_POLYGON = "not_polygon"
    COLLAPSED = "collapsed"
    INVALID = "invalid"


MEASURED = frozenset({Status.OK, Status.REPAIRED})


@dataclass(frozen=True)
class Column:
    """One column of the result.

    Attributes
    ----------
    name : str
        Full name, with its unit as a suffix.
    short_name : str
        At most ten characters, for formats that allow no more.
    kind : Kind
        Number (float64), count (int64) or text.
    unit : str
        Unit, or ``"1"`` for a pure number, or empty for text.
    low, high : float or None
        Least and greatest possible value; None where there is no bound.
    meaning : str
        Definition in a line.
    source : str
        Where the definition was published; empty where it is elementary.
    family : str
        Family that computes it; ``"record"`` for columns that are always there.
    """

    name: str
    short_name: str
    kind: Kind
    unit: str
    low: float | None
    high: float | None
    meaning: str
    source: str
    family: str


RECORD = "record"

_HU = "Hu 1962, IRE Trans. Inf. Theory 8"
_FLUSSER = "Flusser & Suk 1993, Pattern Recognition 26"
_ROSIN = "Rosin 2003, Machine Vision and Applications 14"
_FOURIER = "Kuhl & Giardina 1982, Computer Graphics and Image Processing 18"
_PREPARATA = "Preparata & Shamos 1985, Computational Geometry"


def _number(
    name: str, short: str, unit: str, bounds: tuple[float | None, float | None], meaning: str, source: str = ""
) -> Column:
    return Column(name, short, Kind.NUMBER, unit, *bounds, meaning, source, "")


def _count(name: str, short: str, low: float, meaning: str) -> Column:
    return Column(name, short, Kind.COUNT, "1", low, None, meaning, "", "")


_POSITIVE = (0.0, None)
_SHARE = (0.0, 1.0)
_AXIAL = (0.0, 180.0)
_ANY = (None, None)

_RECORD = (
    Column("shape_status", "shp_status", Kind.TEXT, "", None, None, "what became of the feature", "", ""),
    Column("shape_note", "shp_note", Kind.TEXT, "", None, None, "what was done, or why numbers are null", "", ""),
    _number(
        "ground_distortion",
        "grnd_dist",
        "deg",
        (0.0, 180.0),
        "largest angular deformation of the ground's plane over the vertices",
        "Snyder 1987, USGS Professional Paper 1395, eq. 4-9",
    ),
)

_PART_NUMBER = _count("part_number", "part_no", 1, "number of the part within its feature, from 1")

_EXTENT = (
    _number("area_m2", "area_m2", "m2", _POSITIVE, "area, holes excluded"),
    _number("perimeter_m", "perim_m", "m", _POSITIVE, "length of all rings"),
    _number("outline_m", "outline_m", "m", _POSITIVE, "length of the exterior rings"),
    _count("part_count", "n_parts", 0, "parts, as read"),
    _count("hole_count", "n_holes", 0, "holes, as read"),
    _count("vertex_count", "n_vertices", 0, "vertices as read, closing vertices not counted"),
    _number("edge_mean_m", "edge_mean", "m", _POSITIVE, "mean edge length: how finely the outline was digitised"),
    _number("feret_max_m", "feret_max", "m", _POSITIVE, "longest calliper span of the convex hull", _PREPARATA),
    _number(
        "feret_max_azimuth_deg", "feret_azim", "deg", _AXIAL, "direction of the longest span, clockwise from true north"
    ),
    _number("feret_min_m", "feret_min", "m", _POSITIVE, "shortest calliper span of the convex hull", _PREPARATA),
)

_COMPACTNESS = (
    _number(
        "polsby_popper",
        "polsby",
        "1",
        _SHARE,
        "4 pi A / P^2: area over that of the circle of equal perimeter",
        "Cox 1927, Journal of Paleontology 1; Polsby & Popper 1991, Yale Law & Policy Review 9",
    ),
    _number(
        "perimeter_ratio",
        "perim_rat",
        "1",
        (1.0, None),
        "P / (2 sqrt(pi A)): shoreline development, Gravelius coefficient",
        "Gravelius 1914; Hutchinson 1957, A Treatise on Limnology 1; Patton 1975, Wildlife Society Bulletin 3",
    ),
    _number(
        "reock",
        "reock",
        "1",
        _SHARE,
        "area over that of the minimum bounding circle",
        "Reock 1961, Midwest Journal of Political Science 5",
    ),
    _number("convexity", "convexity", "1", _SHARE, "area over that of the convex hull"),
    _number("rectangularity", "rectangul", "1", _SHARE, "area over that of the minimum-area bounding rectangle"),
    _number(
        "inertia_compactness",
        "inertia_c",
        "1",
        _SHARE,
        "A^2 / (2 pi (mu20 + mu02)): second moment of the circle of equal area over that of the shape",
        "Li, Goodchild & Church 2013, Int. J. Geographical Information Science 27",
    ),
)

_AXES = (
    _number("major_axis_m", "major_m", "m", _POSITIVE, "full major axis of the ellipse with the same second moments"),
    _number("minor_axis_m", "minor_m", "m", _POSITIVE, "full minor axis of the ellipse with the same second moments"),
    _number("axis_ratio", "axis_ratio", "1", _SHARE, "minor over major axis"),
    _number(
        "axis_azimuth_deg",
        "axis_azim",
        "deg",
        _AXIAL,
        "direction of the major axis, clockwise from true north; null when axis_strength < 1e-6",
    ),
    _number("axis_strength", "axis_stren", "1", _SHARE, "(l1 - l2) / (l1 + l2): 0 no preferred direction, 1 a line"),
)

_HU_FORMULAS = (
    "n20 + n02",
    "(n20 - n02)^2 + 4 n11^2",
    "(n30 - 3 n12)^2 + (3 n21 - n03)^2",
    "(n30 + n12)^2 + (n21 + n03)^2",
    "fifth invariant of Hu",
    "sixth invariant of Hu",
    "seventh invariant of Hu; its sign turns under reflection",
)
_HU_BOUNDS = (_POSITIVE, _POSITIVE, _POSITIVE, _POSITIVE, _ANY, _ANY, _ANY)
_HU_COLUMNS = tuple(
    _number(f"hu_{i}", f"hu_{i}", "1", bounds, f"moment invariant: {formula}", _HU)
    for i, (formula, bounds) in enumerate(zip(_HU_FORMULAS, _HU_BOUNDS, strict=True), start=1)
)
_HU_LOG_COLUMNS = tuple(
    _number(f"hu_{i}_log", f"hu_{i}_log", "1", _ANY, f"sign(hu_{i}) log10 |hu_{i}|; null where hu_{i} is 0", _HU)
    for i in range(1, 8)
)

_MOMENTS = (
    *_HU_COLUMNS,
    _number("affine_1", "affine_1", "1", _POSITIVE, "affine moment invariant I1, of second moments", _FLUSSER),
    _number("affine_2", "affine_2", "1", _ANY, "affine moment invariant I2, of third moments", _FLUSSER),
    _number("affine_3", "affine_3", "1", _ANY, "affine moment invariant I3, of second and third moments", _FLUSSER),
    _number("ellipticity", "ellipticit", "1", _SHARE, "16 pi^2 I1 or its inverse: 1 for an ellipse", _ROSIN),
    _number("triangularity", "triangular", "1", _SHARE, "108 I1 or its inverse: 1 for a triangle", _ROSIN),
)

_SPECTRUM_SUMS = (
    _number(
        "fd_departure",
        "fd_depart",
        "1",
        _POSITIVE,
        "sqrt(sum |Zk|^2, k other than 0 and 1) / |Z1|: departure from a circle",
        _FOURIER,
    ),
    _number(
        "fd_entropy",
        "fd_entropy",
        "bit",
        _POSITIVE,
        "Shannon entropy of |Zk|^2, k other than 0 and 1",
        "Shannon 1948, Bell System Technical Journal 27",
    ),
    Column(
        "fd_harmonics_95",
        "fd_harm_95",
        Kind.COUNT,
        "1",
        1.0,
        None,
        "fewest pairs +-k that carry 95 % of sum k^2 |Zk|^2",
        _FOURIER,
        "",
    ),
)


def _spectrum(harmonics: int) -> tuple[Column, ...]:
    orders = [*range(2, harmonics + 1), *range(-1, -harmonics - 1, -1)]
    return (*(_amplitude(k) for k in orders), *_SPECTRUM_SUMS)


def _amplitude(k: int) -> Column:
    name = amplitude_name(k)
    return _number(name, name, "1", _POSITIVE, f"amplitude |Z{k:+d}| / |Z+1| of the outline's spectrum", _FOURIER)


def amplitude_name(k: int) -> str:
    """Name the column of the amplitude of harmonic ``k``, with two digits or more.

    Examples
    --------
    >>> amplitude_name(2), amplitude_name(-11)
    ('fd_p02', 'fd_n11')
    """
    return f"fd_{'p' if k > 0 else 'n'}{abs(k):02d}"


def columns_for(options: MeasureOptions) -> tuple[Column, ...]:
    """List the columns that a measurement with these options yields, in their order.

    Parameters
    ----------
    options : MeasureOptions
        Families, harmonics, parts, log_moments and prefix decide.

    Returns
    -------
    tuple of Column
        Names and short names carry the prefix; a short name is cut to ten characters.
    """
    part_number = (_PART_NUMBER,) if options.parts is Parts.SPLIT else ()
    columns = list(_of_family(RECORD, (*_RECORD, *part_number)))
    for family in options.families:
        own = family_columns(family, options)
        columns += own
        if options.position_error_m is not None:
            columns += _error_columns(own)
    if not options.prefix and options.position_error_m is None:
        return tuple(columns)
    return tuple(_prefixed(columns, options.prefix))


def family_columns(family: Family, options: MeasureOptions) -> tuple[Column, ...]:
    """List the columns of one family, without prefix and without those of errors."""
    return _of_family(family, _family_columns(family, options))


ERROR_SUFFIX = "_se"
BIAS_SUFFIX = "_bias"

_SHIFTED = frozenset(
    {
        "perimeter_m",
        "outline_m",
        "edge_mean_m",
        "feret_max_m",
        "feret_min_m",
        "polsby_popper",
        "perimeter_ratio",
        "reock",
        "convexity",
        "rectangularity",
    }
)
"""Columns whose mean shifts under errors of position: those of perimeter, and of a hull that errors push outwards."""


def is_axial(column: Column) -> bool:
    """Tell whether a column holds directions without a sense."""
    return column.name.endswith("_azimuth_deg")


def has_error(column: Column) -> bool:
    """Tell whether a column has a standard error: every number that is measured."""
    return column.kind is Kind.NUMBER


def has_bias(column: Column) -> bool:
    """Tell whether the mean of a column shifts under errors of position."""
    return column.name in _SHIFTED or (column.family == Family.SPECTRUM and has_error(column))


def _error_columns(columns: Iterable[Column]) -> Iterable[Column]:
    for column in columns:
        if has_error(column):
            yield _derived(column, ERROR_SUFFIX, "se", f"standard error of {column.name} under the position error")
        if has_bias(column):
            shift = f"mean shift of {column.name} under the position error: take it off to correct"
            yield _derived(column, BIAS_SUFFIX, "bi", shift)


def _derived(column: Column, suffix: str, short_suffix: str, meaning: str) -> Column:
    return replace(
        column,
        name=column.name + suffix,
        short_name=column.short_name[: SHORT_NAME_LENGTH - len(short_suffix)] + short_suffix,
        low=0.0 if suffix == ERROR_SUFFIX else None,
        high=None,
        meaning=meaning,
        source="",
    )


def _family_columns(family: Family, options: MeasureOptions) -> tuple[Column, ...]:
    match family:
        case Family.EXTENT:
            return _EXTENT
        case Family.COMPACTNESS:
            return _COMPACTNESS
        case Family.AXES:
            return _AXES
        case Family.MOMENTS:
            return (*_MOMENTS, *(_HU_LOG_COLUMNS if options.log_moments else ()))
        case Family.SPECTRUM:
            return _spectrum(options.harmonics)


def _of_family(family: str, columns: Iterable[Column]) -> tuple[Column, ...]:
    return tuple(replace(column, family=str(family)) for column in columns)


def _prefixed(columns: Iterable[Column], prefix: str) -> Iterable[Column]:
    taken: set[str] = set()
    for column in columns:
        short = (prefix + column.short_name)[:SHORT_NAME_LENGTH]
        number = 1
        while short.casefold() in taken:
            # Cut names that became alike are told apart by a number at the end.
            ending = f"_{number}"
            short = (prefix + column.short_name)[: SHORT_NAME_LENGTH - len(ending)] + ending
            number += 1
        taken.add(short.casefold())
        yield replace(column, name=prefix + column.name, short_name=short)
