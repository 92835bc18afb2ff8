"""Random polygons for Hypothesis: simple, with holes and parts, valid by construction.

Coordinates are whole multiples of 1/1024 m and at most a few thousand metres from (0, 0), so that shifts by whole
metres up to 5 000 000 and mirroring are exact in float64: what differs afterwards was lost by the code under test.
"""

from math import cos, pi, sin

import numpy as np
from hypothesis import strategies as st
from shapely import MultiPolygon, Polygon, affinity, box, union_all

GRAIN = 1024.0
"""Coordinates are multiples of its inverse."""

LOW_SHARE, HIGH_SHARE = 0.55, 1.0
"""Radii of a star, relative to its size: between these, so that a hole fits in the middle."""

JITTER = 0.35
"""How far a corner's direction may leave its place in an even spacing, in steps."""


def _snapped(value):
    return round(value * GRAIN) / GRAIN


def _star(draw, size, centre, corners):
    """A ring that each ray from its centre meets once: corners in angular order, at random radii."""
    n = draw(st.integers(*corners))
    step = 2 * pi / n
    radii = draw(st.lists(st.integers(int(LOW_SHARE * 100), int(HIGH_SHARE * 100)), min_size=n, max_size=n))
    shifts = draw(st.lists(st.integers(-100, 100), min_size=n, max_size=n))
    turn = draw(st.integers(0, 359)) * pi / 180
    ring = []
    for i in range(n):
        angle = turn + step * (i + JITTER * shifts[i] / 100)
        radius = size * radii[i] / 100
        ring.append((_snapped(centre[0] + radius * cos(angle)), _snapped(centre[1] + radius * sin(angle))))
    return ring


def _free_radius(n_corners):
    """Radius of the disc that every star of at least so many corners contains, relative to its size.

    Two corners are at most (1 + 2 JITTER) steps apart; their chord is nearest to the centre when both are at the
    lowest radius.
    """
    return LOW_SHARE * cos(pi / n_corners * (1 + 2 * JITTER))


MIN_CORNERS = 5


@st.composite
def stars(draw, size=100.0, corners=(MIN_CORNERS, 24)):
    """Star-shaped polygons without holes."""
    return Polygon(_star(draw, size, (0.0, 0.0), corners))


def _part(draw, size, centre, max_holes):
    exterior = _star(draw, size, centre, (MIN_CORNERS, 18))
    free = 0.9 * size * _free_radius(MIN_CORNERS)
    n_holes = draw(st.integers(0, max_holes))
    holes = []
    for i in range(n_holes):
        # Holes stand round the centre, each in its own disc; a single one stands on it.
        hole_size = 0.8 * free / (1 if n_holes == 1 else 2.5)
        distance = 0.0 if n_holes == 1 else 0.55 * free
        angle = 2 * pi * i / n_holes
        at = (centre[0] + distance * cos(angle), centre[1] + distance * sin(angle))
        holes.append(_star(draw, hole_size, at, (3, 8))[:: draw(st.sampled_from((1, -1)))])
    return Polygon(exterior[:: draw(st.sampled_from((1, -1)))], holes)


@st.composite
def polygons(draw, max_parts=3, max_holes=2):
    """Polygons or multipolygons, with up to two holes a part, rings in either direction."""
    n_parts = draw(st.integers(1, max_parts))
    parts = []
    for i in range(n_parts):
        size = draw(st.sampled_from((8.0, 50.0, 100.0)))
        parts.append(_part(draw, size, (260.0 * i, 120.0 * draw(st.integers(-2, 2))), max_holes))
    return parts[0] if n_parts == 1 else MultiPolygon(parts)


@st.composite
def convex(draw):
    """Convex polygons: corners in order on an ellipse."""
    n = draw(st.integers(3, 16))
    places = sorted(draw(st.sets(st.integers(0, 71), min_size=n, max_size=n)))
    flatness = draw(st.sampled_from((1.0, 0.5, 0.1)))
    ring = [(_snapped(100 * cos(p * pi / 36)), _snapped(100 * flatness * sin(p * pi / 36))) for p in places]
    return Polygon(ring)


@st.composite
def thin(draw, flatness=(1e-2, 1e-3)):
    """Stars pressed flat and turned; their coordinates are not multiples of the grain."""
    star = draw(stars())
    flat = affinity.scale(star, yfact=draw(st.sampled_from(flatness)), origin=(0, 0))
    return affinity.rotate(flat, draw(st.integers(0, 179)), origin=(0, 0))


@st.composite
def lattice(draw):
    """Polygons of unit squares in a grid, some touching at corners: many collinear and equal points."""
    width, height = draw(st.integers(1, 6)), draw(st.integers(1, 6))
    filled = draw(st.lists(st.booleans(), min_size=width * height, max_size=width * height).filter(any))
    cells = np.flatnonzero(filled)

    return union_all([box(c % width, c // width, c % width + 1, c // width + 1) for c in cells])


def shifts():
    """Whole metres, as far as projected coordinates go."""
    return st.tuples(st.integers(-5_000_000, 5_000_000), st.integers(-5_000_000, 5_000_000))


def angles_deg():
    return st.integers(1, 359)
