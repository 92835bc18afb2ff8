"""Long edges: where an edge that is straight in the layer's coordinates bends on the plane, it is cut into pieces.

Most features need none, and a test that looks at a few sums over the edges and at seven points a feature tells so: it
takes the second derivatives of the map at the feature's middle, and with them the area between all edges and their
chords. The edges of the others are tried one by one.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

ToPlane = Callable[[FloatArray, FloatArray, IntArray], tuple[FloatArray, FloatArray]]
"""Maps source coordinates relative to the origin of a feature, and that feature's number, to metres on its plane."""

TOLERANCE = 7e-7
"""Error of area and perimeter, relative, up to which a feature is left alone; the promise is 1e-6."""

ALLOWANCE = 5e-7
"""The same for features whose edges are cut, summed over edges without regard to sign."""

CERTAIN = 40.0
"""Edges cut into no more times as many pieces lose error by the square of that, and need no second look."""

LOCAL_SIZE = 0.05
"""Largest half-width, as a share of the globe's radius, for which derivatives at the middle tell enough."""

DRIFT = 3.0
"""How many times faster than 1/R^2 + (curvature)^2 an edge's curvature may change along the plane."""

MIN_STEP = 1e-5
"""Least step of the differences, as a share of the globe's radius: 64 m, where rounding is no matter yet."""

FLAT = 1e-5
"""Area over squared perimeter of a strip a hundred thousand times as long as wide: thinner ones are cut as if they had
as much, or a strip of next to no area would be cut without end. Their two sides err alike, and together by nothing."""

MAX_ROUNDS = 6
MAX_GROWTH = 64
MAX_PIECES = 20_000


def pieces(batch: RingBatch, to_plane: ToPlane, radius_m: float, unit_m: FloatArray) -> IntArray:
    """Count the pieces that each edge must be cut into.

    Parameters
    ----------
    batch : RingBatch
        In the layer's coordinates.
    to_plane : callable
    radius_m : float
        Of the globe.
    unit_m : (n_features,) float64
        Metres in a unit of each feature's coordinates, roughly; the least step of differences is measured by it.

    Returns
    -------
    (n_vertices,) int64
        1 for an edge that stays as it is.
    """
    count = np.ones(batch.n_vertices, dtype=np.int64)
    if not batch.n_rings:
        return count
    with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
        bends = ~_is_fine(batch, to_plane, radius_m, MIN_STEP * radius_m / unit_m)[batch.ring_feature]
    if bends.any():
        some = batch.take_rings(bends)
        with np.errstate(invalid="ignore", divide="ignore", over="ignore"):
            count[np.repeat(bends, batch.ring_size)] = _pieces_by_trial(some, to_plane)
    return count


def cut(batch: RingBatch, count: IntArray) -> RingBatch:
    """Cut edges into equal pieces.

    Parameters
    ----------
    batch : RingBatch
    count : (n_vertices,) int64
        Pieces for the edge that starts at each vertex.

    Returns
    -------
    RingBatch
    """
    if (count == 1).all():
        return batch
    edge, share = _piece_starts(count)
    fine = batch.take_vertices(edge, np.add.reduceat(count, batch.ring_start[:-1]))
    new = np.flatnonzero(share)
    old, along = edge[new], share[new]
    # The gathered coordinates are the new batch's own.
    fine.x[new] += along * (batch.next_x[old] - batch.x[old])
    fine.y[new] += along * (batch.next_y[old] - batch.y[old])
    return fine


def _piece_starts(count: IntArray) -> tuple[IntArray, FloatArray]:
    edge = np.repeat(np.arange(len(count)), count)
    number = np.arange(len(edge)) - np.repeat(np.cumsum(count) - count, count)
    return edge, number / count[edge]


def _is_fine(batch: RingBatch, to_plane: ToPlane, radius_m: float, min_step: FloatArray) -> BoolArray:
    """Tell for each feature whether its edges are near enough to straight; NaN counts as not."""
    dx, dy = batch.next_x - batch.x, batch.next_y - batch.y
    xx, yy = dx * dx, dy * dy
    sums = [batch.sum_features(cubic) for cubic in (xx * dx, xx * dy, yy * dx, yy * dy)]
    squares_x, squares_y = batch.sum_features(xx), batch.sum_features(yy)
    longest_x, longest_y = np.sqrt(_largest(batch, xx)), np.sqrt(_largest(batch, yy))
    middle_x, width = _middle(batch, batch.x)
    middle_y, height = _middle(batch, batch.y)
    at = _derivatives(
        np.column_stack((middle_x, middle_y)), np.maximum(width, min_step), np.maximum(height, min_step), to_plane
    )
    scale_x, scale_y = np.hypot(*at.x), np.hypot(*at.y)
    longest = np.hypot(scale_x * longest_x, scale_y * longest_y)
    size = np.hypot(scale_x * width, scale_y * height)
    curvature = np.maximum(np.hypot(*at.xx) / scale_x**2, np.hypot(*at.yy) / scale_y**2)
    curvature = np.maximum(curvature, 2.0 * np.hypot(*at.xy) / (scale_x * scale_y))
    # What the derivatives leave out: the curvature changes from the middle to the farthest edge.
    drift = DRIFT * size * (curvature**2 + radius_m**-2)
    between = np.abs(_between(at, sums)) + drift * longest * (scale_x**2 * squares_x + scale_y**2 * squares_y) / 12.0
    area = np.abs(batch.sum_ring_values(batch.ring_signed_area) * _cross(at.x, at.y))
    area = np.maximum(area, FLAT * (4.0 * size) ** 2)
    return np.asarray(
        (between <= TOLERANCE * area)
        & ((curvature * longest) ** 2 <= 24.0 * TOLERANCE)
        & (size <= LOCAL_SIZE * radius_m)
    )


Vectors = tuple[FloatArray, FloatArray]


@dataclass(frozen=True, eq=False)
class _Derivatives:
    """First and second derivatives of the map, each an x and a y on the plane for every feature."""

    x: Vectors
    y: Vectors
    xx: Vectors
    xy: Vectors
    yy: Vectors


def _between(at: _Derivatives, sums: list[FloatArray]) -> FloatArray:
    """Take the area between edges and chords from the sums of dx^3, dx^2 dy, dx dy^2 and dy^3 over the edges."""
    return (
        _cross(at.x, at.xx) * sums[0]
        + (2.0 * _cross(at.x, at.xy) + _cross(at.y, at.xx)) * sums[1]
        + (_cross(at.x, at.yy) + 2.0 * _cross(at.y, at.xy)) * sums[2]
        + _cross(at.y, at.yy) * sums[3]
    ) / 12.0


def _cross(a: Vectors, b: Vectors) -> FloatArray:
    return a[0] * b[1] - a[1] * b[0]


def _largest(batch: RingBatch, values: FloatArray) -> FloatArray:
    largest = np.zeros(batch.n_features)
    np.maximum.at(largest, batch.ring_feature, np.maximum.reduceat(values, batch.ring_start[:-1]))
    return largest


def _middle(batch: RingBatch, values: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Take the middle and the half-width of each feature."""
    high, low = np.full(batch.n_features, -np.inf), np.full(batch.n_features, np.inf)
    np.maximum.at(high, batch.ring_feature, np.maximum.reduceat(values, batch.ring_start[:-1]))
    np.minimum.at(low, batch.ring_feature, np.minimum.reduceat(values, batch.ring_start[:-1]))
    return 0.5 * (high + low), 0.5 * (high - low)


def _derivatives(centre: FloatArray, width: FloatArray, height: FloatArray, to_plane: ToPlane) -> _Derivatives:
    """Take derivatives of the map by differences over the feature's own half-widths."""
    n = len(centre)
    feature = np.tile(np.arange(n), 7)
    step_x = np.concatenate([sign * width for sign in (0, 1, -1, 0, 0, 1, -1)])
    step_y = np.concatenate([sign * height for sign in (0, 0, 0, 1, -1, 1, -1)])
    mapped = to_plane(centre[feature, 0] + step_x, centre[feature, 1] + step_y, feature)
    found: list[list[FloatArray]] = [[], [], [], [], []]
    for values in mapped:
        middle, east, west, north, south, far, near = values.reshape(7, n)
        bend_x, bend_y = east + west - 2.0 * middle, north + south - 2.0 * middle
        found[0].append((east - west) / (2.0 * width))
        found[1].append((north - south) / (2.0 * height))
        found[2].append(bend_x / width**2)
        found[3].append((far + near - 2.0 * middle - bend_x - bend_y) / (2.0 * width * height))
        found[4].append(bend_y / height**2)
    return _Derivatives(*((along_x, along_y) for along_x, along_y in found))


def _pieces_by_trial(batch: RingBatch, to_plane: ToPlane) -> IntArray:
    """Cut edges until what lies between the pieces and their chords is small enough."""
    count = np.ones(batch.n_vertices, dtype=np.int64)
    for _ in range(MAX_ROUNDS):
        errors = _errors(batch, count, to_plane)
        is_fine = (np.abs(batch.sum_features(errors.between)) <= TOLERANCE * errors.area) & (
            batch.sum_features(errors.excess) <= TOLERANCE * errors.perimeter
        )
        wanted = np.fmax(
            _wanted(batch, count, np.abs(errors.between), ALLOWANCE * errors.area),
            _wanted(batch, count, errors.excess, ALLOWANCE * errors.perimeter),
        )
        grows = (wanted > count) & ~is_fine[batch.vertex_feature]
        if not grows.any():
            break
        growth = np.minimum(wanted[grows] / count[grows], MAX_GROWTH)
        count[grows] = np.minimum(np.ceil(growth * count[grows]), MAX_PIECES).astype(np.int64)
        if growth.max() <= CERTAIN:
            break
    return count


def _wanted(batch: RingBatch, count: IntArray, error: FloatArray, allowed: FloatArray) -> FloatArray:
    """Share out pieces so that few of them bring the errors of a feature's edges down to what is allowed.

    An error falls with the square of the pieces. For a given sum of errors the pieces are fewest where they are as the
    cube roots of what the edges would err in one piece.
    """
    root = np.cbrt(np.nan_to_num(error, nan=0.0, posinf=0.0) * count.astype(np.float64) ** 2)
    factor = np.sqrt(batch.sum_features(root) / allowed)
    small = factor[batch.vertex_feature] * root <= 1.0
    # Edges left whole take their own error out of the sum; what they leave is for the others.
    left = np.maximum(allowed - batch.sum_features(np.where(small, error, 0.0)), 0.3 * allowed)
    factor = np.sqrt(batch.sum_features(np.where(small, 0.0, root)) / left)
    wanted = np.ceil(factor[batch.vertex_feature] * root)
    return np.where(np.isfinite(wanted), np.maximum(wanted, 1.0), 1.0)


@dataclass(frozen=True, eq=False)
class _Errors:
    """What the pieces of edges leave out.

    Attributes
    ----------
    between : (n_vertices,) float64
        Area between each edge and its chords, with its sign.
    excess : (n_vertices,) float64
        Length of each edge beyond its chords.
    area, perimeter : (n_features,) float64
        On the plane; the area at least what `FLAT` says.
    """

    between: FloatArray
    excess: FloatArray
    area: FloatArray
    perimeter: FloatArray


def _errors(batch: RingBatch, count: IntArray, to_plane: ToPlane) -> _Errors:
    edge, share = _piece_starts(count)
    fine = cut(batch, count)
    x, y = to_plane(fine.x, fine.y, fine.vertex_feature)
    half = share + 0.5 / count[edge]
    middle_x = batch.x[edge] + half * (batch.next_x - batch.x)[edge]
    middle_y = batch.y[edge] + half * (batch.next_y - batch.y)[edge]
    mx, my = to_plane(middle_x, middle_y, fine.vertex_feature)
    next_x, next_y = fine.shift_back(x), fine.shift_back(y)
    ex, ey = next_x - x, next_y - y
    bow_x, bow_y = mx - 0.5 * (x + next_x), my - 0.5 * (y + next_y)
    length = np.hypot(ex, ey)
    # A parabola through ends and middle: two thirds of the parallelogram, and the excess of its length.
    between = 2.0 / 3.0 * (ex * bow_y - ey * bow_x)
    sagitta = 1.5 * np.abs(between) / length
    excess = np.where(length > 0, 8.0 / 3.0 * sagitta**2 / length, np.hypot(bow_x, bow_y))
    n = batch.n_vertices
    mapped = fine.moved(x, y, fine.origin)
    perimeter = fine.sum_features(length)
    return _Errors(
        between=np.asarray(np.bincount(edge, between, n), np.float64),
        excess=np.asarray(np.bincount(edge, excess, n), np.float64),
        area=np.maximum(np.abs(mapped.sum_ring_values(mapped.ring_signed_area)), FLAT * perimeter**2),
        perimeter=perimeter,
    )
