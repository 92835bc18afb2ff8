"""Named shapes and the exact values of their columns.

A shape is given by its parts: lists of rings, the exterior first and counter-clockwise, without closing vertices.
Ratios are written as the formulas that yield them; rational values are ``Fraction``. Unless a source is named, values
are derived: ratios by plane geometry, moments with rational arithmetic.
"""

from dataclasses import dataclass, field
from fractions import Fraction
from math import atan2, cos, degrees, pi, sin, sqrt

from shapely import MultiPolygon, Polygon

Ring = list[tuple[float, float]]


@dataclass(frozen=True)
class Shape:
    """A polygon by its parts, and what its columns must hold."""

    name: str
    parts: list[list[Ring]]
    columns: dict[str, float | Fraction] = field(default_factory=dict)

    @property
    def polygon(self):
        pieces = [Polygon(exterior, holes) for exterior, *holes in self.parts]
        return pieces[0] if len(pieces) == 1 else MultiPolygon(pieces)

    @property
    def mirrored(self):
        """The same shape with x turned into -x, exteriors counter-clockwise again."""
        parts = [[[(-x, y) for x, y in reversed(ring)] for ring in part] for part in self.parts]
        return Shape(f"{self.name}, mirrored", parts, self.columns)


def regular(n, radius=1.0, turn_deg=0.0):
    """Corners of a regular n-gon."""
    start = turn_deg * pi / 180.0
    return [(radius * cos(start + 2 * pi * i / n), radius * sin(start + 2 * pi * i / n)) for i in range(n)]


def ellipse(ratio, n, radius=1.0):
    """Points on an ellipse with axes ratio : 1, at equal steps of its parameter."""
    return [(ratio * x, y) for x, y in regular(n, radius)]


def rectangle(width, height):
    return [(0, 0), (width, 0), (width, height), (0, height)]


def turned(ring, angle_deg):
    """Turn counter-clockwise about (0, 0)."""
    c, s = cos(angle_deg * pi / 180.0), sin(angle_deg * pi / 180.0)
    return [(c * x - s * y, s * x + c * y) for x, y in ring]


def koch(level):
    """Snowflake curve of Koch on an equilateral triangle, teeth outwards, counter-clockwise."""
    points = [complex(x, y) for x, y in regular(3)]
    for _ in range(level):
        finer = []
        for a, b in zip(points, [*points[1:], points[0]], strict=True):
            third = (b - a) / 3
            finer += [a, a + third, a + third + third * complex(0.5, -sqrt(3) / 2), a + 2 * third]
        points = finer
    return [(z.real, z.imag) for z in points]


def koch_area(level):
    """Area of the snowflake on a triangle of circumradius 1: each level adds 4/9 of what the one before added."""
    triangle = 3 * sqrt(3) / 4
    return triangle * (1 + sum(Fraction(1, 3) * Fraction(4, 9) ** i for i in range(level)))


def koch_perimeter(level):
    return 3 * sqrt(3) * float(Fraction(4, 3) ** level)


L_RING = [(0, 0), (2, 0), (2, 1), (1, 1), (1, 2), (0, 2)]
PLUS_RING = [(1, 0), (2, 0), (2, 1), (3, 1), (3, 2), (2, 2), (2, 3), (1, 3), (1, 2), (0, 2), (0, 1), (1, 1)]
HOLE = [(1, 1), (1, 2), (2, 2), (2, 1)]


def _rectangle_values(r):
    r = Fraction(r)
    return {
        "polsby_popper": pi * r / (1 + r) ** 2,
        "perimeter_ratio": (1 + r) / sqrt(pi * r),
        "reock": 4 * r / (pi * (1 + r * r)),
        "convexity": Fraction(1),
        "rectangularity": Fraction(1),
        "inertia_compactness": 6 / (pi * (r + 1 / r)),
        "hu_1": (r + 1 / r) / 12,
        "hu_2": (r - 1 / r) ** 2 / 144,
        **{f"hu_{i}": Fraction(0) for i in range(3, 8)},
        "affine_1": Fraction(1, 144),
        "affine_2": Fraction(0),
        "affine_3": Fraction(0),
        "ellipticity": 9 / pi**2,  # 16 pi^2 / 144 is above 1: its inverse
        "triangularity": Fraction(3, 4),
        "area_m2": r,
        "perimeter_m": 2 * (r + 1),
        "feret_max_m": sqrt(1 + r * r),
        "feret_min_m": min(r, Fraction(1)),
        "major_axis_m": max(r, Fraction(1)) * 2 / sqrt(3),
        "minor_axis_m": min(r, Fraction(1)) * 2 / sqrt(3),
        "axis_ratio": min(r, 1 / r),
        "axis_strength": abs(r * r - 1) / (r * r + 1),
    }


def _rectangle(r):
    return Shape(f"{r} : 1 rectangle", [[rectangle(r, 1)]], _rectangle_values(r))


SQUARE = Shape(
    "square",
    [[rectangle(1, 1)]],
    {
        **_rectangle(1).columns,
        "polsby_popper": pi / 4,
        "perimeter_ratio": 2 / sqrt(pi),
        "reock": 2 / pi,
        "inertia_compactness": 3 / pi,
    },
)

RECTANGLES = [_rectangle(r) for r in (2, 4, 10)]

EQUILATERAL = Shape(
    "equilateral triangle",
    [[regular(3)]],
    {
        "polsby_popper": pi / (3 * sqrt(3)),
        "reock": 3 * sqrt(3) / (4 * pi),
        "convexity": 1,
        "rectangularity": 0.5,
        "inertia_compactness": 3 * sqrt(3) / (2 * pi),
        "triangularity": 1,
        "affine_1": Fraction(1, 108),
        "affine_2": Fraction(4, 12301875),
        "affine_3": Fraction(-1, 18225),
        "feret_max_m": sqrt(3),
        "feret_min_m": 1.5,
    },
)

TRIANGLE_MOMENTS = {
    "hu_1": Fraction(25, 108),
    "hu_2": Fraction(193, 11664),
    "hu_3": Fraction(949, 157464),
    "hu_4": Fraction(85, 157464),
    "hu_5": Fraction(9456409, 15496819560000),
    "hu_6": Fraction(11437, 425152800),
    "hu_7": Fraction(-28, 36905625),
    "affine_1": Fraction(1, 108),
    "affine_2": Fraction(4, 12301875),
    "affine_3": Fraction(-1, 18225),
    "triangularity": Fraction(1),
    "ellipticity": 27 / (4 * pi**2),
}

TRIANGLE = Shape(
    "3-4-5 triangle",
    [[[(0, 0), (4, 0), (0, 3)]]],
    {
        **TRIANGLE_MOMENTS,
        "area_m2": 6,
        "perimeter_m": 12,
        "edge_mean_m": 4,
        "polsby_popper": pi / 6,
        "perimeter_ratio": sqrt(6 / pi),
        "reock": 24 / (25 * pi),
        "convexity": 1,
        "rectangularity": Fraction(1, 2),
        "inertia_compactness": 54 / (25 * pi),
        "feret_max_m": 5,
        "feret_max_azimuth_deg": degrees(atan2(-4, 3)) + 180,
        "feret_min_m": Fraction(12, 5),
    },
)

HEXAGON = Shape(
    "hexagon",
    [[regular(6)]],
    {
        "area_m2": 3 * sqrt(3) / 2,
        "perimeter_m": 6,
        "polsby_popper": pi * sqrt(3) / 6,
        "reock": 3 * sqrt(3) / (2 * pi),
        "convexity": 1,
        "rectangularity": 0.75,
        "inertia_compactness": 9 * sqrt(3) / (5 * pi),
        "feret_max_m": 2,
        "feret_min_m": sqrt(3),
    },
)

L_SHAPE = Shape(
    "L of 3 unit squares",
    [[L_RING]],
    {
        "area_m2": 3,
        "perimeter_m": 8,
        "polsby_popper": 12 * pi / 64,
        "reock": 3 / (2 * pi),
        "convexity": Fraction(6, 7),
        "rectangularity": Fraction(3, 4),
        "inertia_compactness": 27 / (11 * pi),
        "hu_1": Fraction(11, 54),
        "hu_2": Fraction(4, 729),
        "hu_3": Fraction(50, 19683),
        "hu_4": Fraction(2, 19683),
        "hu_5": Fraction(-20, 387420489),
        "hu_6": Fraction(-4, 531441),
        "hu_7": Fraction(0),
        "affine_1": Fraction(35, 3888),
        "affine_2": Fraction(1, 14348907),
        "affine_3": Fraction(-1, 39366),
        "feret_max_m": 2 * sqrt(2),
        "feret_max_azimuth_deg": 135,
    },
)

PLUS = Shape(
    "plus of 5 unit squares",
    [[PLUS_RING]],
    {
        "area_m2": 5,
        "perimeter_m": 12,
        "polsby_popper": 20 * pi / 144,
        "reock": 2 / pi,
        "convexity": Fraction(5, 7),
        "inertia_compactness": 75 / (29 * pi),
        "rectangularity": Fraction(5, 8),
        "hu_2": Fraction(0),
        "feret_max_m": sqrt(10),
        "feret_min_m": 2 * sqrt(2),
    },
)

RING = Shape(
    "3 x 3 ring with a 1 x 1 hole",
    [[rectangle(3, 3), HOLE]],
    {
        "area_m2": 8,
        "perimeter_m": 16,
        "outline_m": 12,
        "edge_mean_m": 2,
        "polsby_popper": pi / 8,
        "reock": 16 / (9 * pi),
        "convexity": Fraction(8, 9),
        "rectangularity": Fraction(8, 9),
        "inertia_compactness": 12 / (5 * pi),
        "hu_2": Fraction(0),
    },
)

QUAD = Shape(
    "quad",
    [[[(0, 0), (5, 0), (4, 3), (1, 2)]]],
    {
        "area_m2": 10,
        "hu_1": Fraction(7, 36),
        "hu_2": Fraction(5, 648),
        "hu_3": Fraction(2621, 1866240),
        "hu_4": Fraction(25, 373248),
        "hu_5": Fraction(60941, 17414258688000),
        "hu_6": Fraction(481, 335923200),
        "hu_7": Fraction(-17, 839808000),
        "affine_1": Fraction(13, 1728),
        "affine_2": Fraction(7, 314928000),
        "affine_3": Fraction(-61, 4665600),
    },
)

TWO_SQUARES = Shape(
    "two unit squares, 3 apart between their centres",
    [[rectangle(1, 1)], [[(3, 0), (4, 0), (4, 1), (3, 1)]]],
    {
        "area_m2": 2,
        "perimeter_m": 8,
        "outline_m": 8,
        "polsby_popper": pi / 8,
        "reock": 8 / (17 * pi),
        "convexity": Fraction(1, 2),
        "rectangularity": Fraction(1, 2),
        # mu20 = 2 (1/12 + 9/4), mu02 = 2/12
        "inertia_compactness": 4 / (2 * pi * float(Fraction(29, 6))),
        "feret_max_m": sqrt(17),
        "feret_min_m": 1,
        "axis_azimuth_deg": 90,
        "axis_ratio": sqrt(1 / 28),
    },
)

TURNED_RECTANGLE = Shape(
    "4 x 1 rectangle turned by 30 degrees",
    [[turned(rectangle(4, 1), 30)]],
    {"axis_azimuth_deg": 60, "axis_ratio": Fraction(1, 4), "area_m2": 4},
)

SHAPES = [
    SQUARE,
    *RECTANGLES,
    EQUILATERAL,
    TRIANGLE,
    HEXAGON,
    L_SHAPE,
    PLUS,
    RING,
    QUAD,
    TWO_SQUARES,
    TURNED_RECTANGLE,
]

CHIRAL = [TRIANGLE, QUAD]
"""Shapes that differ from their mirror images: hu_7 is not 0."""

PUBLISHED = [
    # (shape, column, value to the digits printed in METHODS.md, section 4)
    (TRIANGLE, "reock", 0.305577),
    (TRIANGLE, "inertia_compactness", 0.687549),
    (HEXAGON, "polsby_popper", 0.906900),
    (HEXAGON, "reock", 0.826993),
    (HEXAGON, "inertia_compactness", 0.992392),
    (L_SHAPE, "polsby_popper", 0.589049),
    (L_SHAPE, "reock", 0.477465),
    (L_SHAPE, "inertia_compactness", 0.781306),
    (PLUS, "polsby_popper", 0.436332),
    (PLUS, "reock", 0.636620),
    (PLUS, "inertia_compactness", 0.823215),
    (RING, "polsby_popper", 0.392699),
    (RING, "reock", 0.565884),
    (RING, "inertia_compactness", 0.763944),
]

AXES = [
    # (shape, azimuth in degrees, major over minor axis) of METHODS.md, section 4
    (TURNED_RECTANGLE, 60.0, 4.0),
    (TRIANGLE, 119.871781418, 1.871213584),
    (L_SHAPE, 135.0, 1.463850109),
]

LIMITS = [
    # (name, ring of many points, columns in the limit) of METHODS.md, section 4
    (
        "circle",
        regular,
        {
            "polsby_popper": 1,
            "perimeter_ratio": 1,
            "reock": 1,
            "convexity": 1,
            "rectangularity": pi / 4,
            "inertia_compactness": 1,
            "ellipticity": 1,
            "hu_1": 1 / (2 * pi),
            "affine_1": 1 / (16 * pi**2),
        },
    ),
    (
        "ellipse 2 : 1",
        lambda n: ellipse(2, n),
        {
            "polsby_popper": 0.841165,
            "reock": 0.5,
            "convexity": 1,
            "rectangularity": pi / 4,
            "inertia_compactness": 0.8,
            "ellipticity": 1,
            "hu_1": 2.5 / (4 * pi),
            "hu_2": 1.5**2 / (16 * pi**2),
            "affine_1": 1 / (16 * pi**2),
            "axis_ratio": 0.5,
            "axis_azimuth_deg": 90,
        },
    ),
]
