"""Calliper spans, smallest rectangle and smallest circle of convex hulls, all features at once.

Edge directions of a hull grow along it, so the vertex farthest in a direction is where that direction falls into the
sorted edge directions: one binary search over all hulls.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from geoshape.formulas.axes import axial
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

TIE_TOLERANCE = 1e-9
"""Spans that differ by less, relative to the longest, are equally long; the smallest azimuth among them is given."""

CIRCLE_TOLERANCE = 1e-12
"""How far a point may lie outside the circle, relative to its radius."""

MAX_CIRCLE_STEPS = 1000
"""Far more steps than any circle takes: the radius grows with each, and few subsets of three exist."""

_FULL_TURN = 2.0 * np.pi


@dataclass(frozen=True, eq=False)
class Calipers:
    """Spans of hulls; NaN for a feature without a hull.

    Attributes
    ----------
    longest, shortest : (n_features,) float64
        Feret diameters.
    longest_azimuth_deg : (n_features,) float64
        Direction of the longest, clockwise from the plane's y axis, in [0, 180).
    rectangle_area : (n_features,) float64
        Area of the smallest bounding rectangle.
    """

    longest: FloatArray
    shortest: FloatArray
    longest_azimuth_deg: FloatArray
    rectangle_area: FloatArray


@dataclass(frozen=True, eq=False)
class Circles:
    """Smallest bounding circles; NaN for a feature without a hull.

    Attributes
    ----------
    x, y, radius : (n_features,) float64
        Centre relative to the local origin, and radius.
    """

    x: FloatArray
    y: FloatArray
    radius: FloatArray


def calipers(hull: RingBatch) -> Calipers:
    """Turn callipers and rectangles round each hull.

    Parameters
    ----------
    hull : RingBatch
        At most one convex, counter-clockwise ring a feature, as `hulls.convex_hulls` returns.

    Returns
    -------
    Calipers

    Notes
    -----
    The shortest span and the smallest rectangle each lie along an edge of the hull, the longest span between two
    vertices that face each other across parallel lines [1]_ [2]_.

    References
    ----------
    .. [1] Shamos, M. I. (1978). Computational geometry. Thesis, Yale University.
    .. [2] Freeman, H., Shapira, R. (1975). Determining the minimum-area encasing rectangle for an arbitrary closed
           curve. Communications of the ACM 18, 409-413.
    """
    n = hull.n_features
    nothing = np.full(n, np.nan)
    if not hull.n_rings:
        return Calipers(nothing, nothing, nothing, nothing)
    edges = _HullEdges.of(hull)
    height, facing = edges.farthest(quarter_turns=2)
    ahead, _ = edges.farthest(quarter_turns=1)
    behind, _ = edges.farthest(quarter_turns=3)
    longest, azimuth = _longest_span(hull, facing)
    rings = hull.ring_feature
    shortest, rectangle, by_longest, by_azimuth = (np.full(n, np.nan) for _ in range(4))
    first = hull.ring_start[:-1]
    shortest[rings] = np.minimum.reduceat(height, first)
    rectangle[rings] = np.minimum.reduceat(height * (ahead + behind), first)
    by_longest[rings], by_azimuth[rings] = longest, azimuth
    return Calipers(by_longest, shortest, by_azimuth, rectangle)


@dataclass(frozen=True, eq=False)
class _HullEdges:
    hull: RingBatch
    unit_x: FloatArray
    unit_y: FloatArray
    key: FloatArray
    angle: FloatArray

    @classmethod
    def of(cls, hull: RingBatch) -> _HullEdges:
        dx, dy = hull.next_x - hull.x, hull.next_y - hull.y
        length = np.sqrt(dx * dx + dy * dy)
        first, last = hull.ring_start[:-1], hull.ring_start[1:] - 1
        before_x, before_y = np.roll(dx, 1), np.roll(dy, 1)
        before_x[first], before_y[first] = dx[last], dy[last]
        # Turns of a convex ring go one way; what goes the other is rounding of edges in line.
        turn = np.maximum(np.arctan2(before_x * dy - before_y * dx, before_x * dx + before_y * dy), 0.0)
        turn[first] = 0.0
        angle = np.cumsum(turn)
        angle = np.minimum(angle - np.repeat(angle[first], hull.ring_size), _FULL_TURN)
        key = angle + 2.0 * _FULL_TURN * hull.vertex_ring
        per_length = np.divide(1.0, length, out=np.zeros_like(length), where=length > 0)
        return cls(hull, dx * per_length, dy * per_length, np.maximum.accumulate(key), angle)

    def farthest(self, *, quarter_turns: int) -> tuple[FloatArray, IntArray]:
        """Measure to the vertex farthest in the direction of each edge turned left by quarters.

        One quarter looks along the edge, two across it, three back: the extreme vertex there is where the edge
        direction has grown by as many quarters.
        """
        hull = self.hull
        target = np.mod(self.angle + quarter_turns * np.pi / 2.0, _FULL_TURN) + 2.0 * _FULL_TURN * hull.vertex_ring
        found = np.searchsorted(self.key, target)
        begin, size = hull.ring_start[:-1][hull.vertex_ring], hull.ring_size[hull.vertex_ring]
        along_x, along_y = _turned(self.unit_x, self.unit_y, quarter_turns - 1)
        best = np.full(hull.n_vertices, -np.inf)
        facing = np.zeros(hull.n_vertices, dtype=np.int64)
        # The neighbours settle what rounding of angles left open.
        for step in (-1, 0, 1):
            vertex = begin + np.mod(found - begin + step, size)
            reach = (hull.x[vertex] - hull.x) * along_x + (hull.y[vertex] - hull.y) * along_y
            better = reach > best
            best[better] = reach[better]
            facing[better] = vertex[better]
        return best, facing


def _turned(x: FloatArray, y: FloatArray, quarters: int) -> tuple[FloatArray, FloatArray]:
    match quarters:
        case 0:
            return x, y
        case 1:
            return -y, x
        case _:
            return -x, -y


def _longest_span(hull: RingBatch, facing: IntArray) -> tuple[FloatArray, FloatArray]:
    first = hull.ring_start[:-1]
    begin, size = first[hull.vertex_ring], hull.ring_size[hull.vertex_ring]
    own = np.arange(hull.n_vertices)
    pairs = []
    for end in (0, 1):
        here = begin + np.mod(own - begin + end, size)
        for step in (-1, 0, 1):
            there = begin + np.mod(facing - begin + step, size)
            pairs.append((hull.x[there] - hull.x[here], hull.y[there] - hull.y[here]))
    dx, dy = np.array(pairs).transpose(1, 0, 2)
    span = np.sqrt(dx * dx + dy * dy)
    longest = np.maximum.reduceat(span.max(axis=0), first)
    # Few pairs are the longest of their hull: only they need an angle.
    chosen = np.nonzero(span >= np.repeat(longest * (1.0 - TIE_TOLERANCE), hull.ring_size))
    azimuth = np.full(hull.n_rings, np.inf)
    np.minimum.at(azimuth, hull.vertex_ring[chosen[1]], axial(np.degrees(np.arctan2(dx[chosen], dy[chosen]))))
    return longest, azimuth


def smallest_circle(hull: RingBatch) -> Circles:
    """Find the smallest circle round each hull.

    Parameters
    ----------
    hull : RingBatch
        At most one ring a feature.

    Returns
    -------
    Circles

    Notes
    -----
    The circle of at most three support points is enlarged by the point farthest outside it until none is outside:
    the radius grows with every step, so the steps end at the smallest circle of all points.
    """
    n = hull.n_features
    circles = Circles(np.full(n, np.nan), np.full(n, np.nan), np.full(n, np.nan))
    if not hull.n_rings:
        return circles
    owner = hull.ring_feature
    x, y, radius, support = _first_circles(hull)
    active = np.arange(hull.n_rings)
    work = hull
    for _ in range(MAX_CIRCLE_STEPS):
        far, distance = _farthest_from(work, x[active], y[active])
        is_outside = distance > radius[active] * (1.0 + CIRCLE_TOLERANCE)
        if not is_outside.any():
            break
        keep = np.zeros(work.n_rings, dtype=np.bool_)
        keep[is_outside] = True
        grown = _grow(support[active[is_outside]], work.x[far[is_outside]], work.y[far[is_outside]])
        active = active[is_outside]
        x[active], y[active], radius[active], support[active] = grown
        work = work.take_rings(keep)
    circles.x[owner], circles.y[owner], circles.radius[owner] = x, y, radius
    return circles


def _first_circles(hull: RingBatch) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    first = hull.ring_start[:-1]
    a, _ = _farthest_from(hull, hull.x[first], hull.y[first])
    b, _ = _farthest_from(hull, hull.x[a], hull.y[a])
    ax, ay, bx, by = hull.x[a], hull.y[a], hull.x[b], hull.y[b]
    support = np.stack((np.stack((ax, bx, bx), axis=1), np.stack((ay, by, by), axis=1)), axis=2)
    return (ax + bx) / 2.0, (ay + by) / 2.0, np.hypot(ax - bx, ay - by) / 2.0, support


def _farthest_from(hull: RingBatch, x: FloatArray, y: FloatArray) -> tuple[IntArray, FloatArray]:
    dx, dy = hull.x - np.repeat(x, hull.ring_size), hull.y - np.repeat(y, hull.ring_size)
    square = dx * dx + dy * dy
    most = np.maximum.reduceat(square, hull.ring_start[:-1])
    at = np.flatnonzero(square == np.repeat(most, hull.ring_size))
    first = np.flatnonzero(np.diff(hull.vertex_ring[at], prepend=-1))
    return at[first], np.sqrt(most)


_PAIRS = ((0, 3), (1, 3), (2, 3))
_TRIPLES = ((0, 1, 3), (0, 2, 3), (1, 2, 3))


def _grow(
    support: FloatArray, new_x: FloatArray, new_y: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Take the smallest circle round three support points and a new one that lies outside theirs.

    The new point is on that circle, so only pairs and triples with it come into question.
    """
    points = np.concatenate((support, np.stack((new_x, new_y), axis=1)[:, None, :]), axis=1)
    best = np.full(len(points), np.inf)
    centre = np.zeros((len(points), 2))
    chosen = np.zeros((len(points), 3), dtype=np.int64)
    for subset in (*_PAIRS, *_TRIPLES):
        middle = _pair_centre(points, subset) if len(subset) == 2 else _circumcentre(points, subset)
        # The radius that holds all four points about this centre: of several centres the right one needs the least.
        radius = np.sqrt(((points - middle[:, None, :]) ** 2).sum(axis=2)).max(axis=1)
        better = radius < best
        best[better] = radius[better]
        centre[better] = middle[better]
        chosen[better] = (*subset, 3)[:3]
    rows = np.arange(len(points))[:, None]
    return centre[:, 0], centre[:, 1], best, points[rows, chosen]


def _pair_centre(points: FloatArray, pair: tuple[int, ...]) -> FloatArray:
    return 0.5 * (points[:, pair[0]] + points[:, pair[1]])


def _circumcentre(points: FloatArray, triple: tuple[int, ...]) -> FloatArray:
    a = points[:, triple[0]]
    b, c = points[:, triple[1]] - a, points[:, triple[2]] - a
    twice = 2.0 * (b[:, 0] * c[:, 1] - b[:, 1] * c[:, 0])
    bb, cc = (b * b).sum(axis=1), (c * c).sum(axis=1)
    has_circle: BoolArray = twice != 0
    per_twice = np.divide(1.0, twice, out=np.full_like(twice, np.nan), where=has_circle)
    offset = np.stack((c[:, 1] * bb - b[:, 1] * cc, b[:, 0] * cc - c[:, 0] * bb), axis=1)
    return np.asarray(a + offset * per_twice[:, None])
