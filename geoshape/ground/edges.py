"""Long edges: where an edge that is straight in the layer's coordinates bends on the plane, it is cut into pieces.

Most features need none, and a test that looks at each edge's three sums and at six points a feature tells so: it takes
the second derivatives of the map at the feature's centre, and with them the area between all edges and their chords.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch

ToPlane = Callable[[FloatArray, FloatArray, IntArray], tuple[FloatArray, FloatArray]]
"""Maps source coordinates relative to the origin of a feature, and that feature's number, to metres on its plane."""

TOLERANCE = 7e-7
"""Error of area and perimeter, relative, up to which a feature is left alone; the promise is 1e-6."""

ALLOWANCE = 4e-7
"""The same for features whose edges are cut, summed over edges without regard to sign."""

CERTAIN = 100.0
"""Errors that exceed their allowance by less than this fall with the square of the pieces, and need no second look."""

LOCAL_EDGE_M, LOCAL_SIZE_M = 10_000.0, 50_000.0
"""Longest edge and largest half-width for which second derivatives at the centre tell enough."""

MAX_ROUNDS = 8
MAX_GROWTH = 64.0
MAX_PIECES = 20_000


def pieces(batch: RingBatch, to_plane: ToPlane) -> IntArray:
    """Count the pieces that each edge must be cut into.

    Parameters
    ----------
    batch : RingBatch
        In the layer's coordinates.
    to_plane : callable

    Returns
    -------
    (n_vertices,) int64
        1 for an edge that stays as it is.
    """
    count = np.ones(batch.n_vertices, dtype=np.int64)
    if not batch.n_rings:
        return count
    bends = _bends(batch, to_plane)[batch.ring_feature]
    if bends.any():
        some = batch.take_rings(bends)
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
    x = batch.x[edge] + share * (batch.next_x - batch.x)[edge]
    y = batch.y[edge] + share * (batch.next_y - batch.y)[edge]
    size = np.add.reduceat(count, batch.ring_start[:-1])
    whole = batch.take_vertices(edge, size)
    return whole.moved(x, y, batch.origin)


def _piece_starts(count: IntArray) -> tuple[IntArray, FloatArray]:
    edge = np.repeat(np.arange(len(count)), count)
    number = np.arange(len(edge)) - np.repeat(np.cumsum(count) - count, count)
    return edge, number / count[edge]


def _bends(batch: RingBatch, to_plane: ToPlane) -> BoolArray:
    """Tell for each feature whether its edges may bend too much, from second derivatives at its centre."""
    dx, dy = batch.next_x - batch.x, batch.next_y - batch.y
    xx, yy = dx * dx, dy * dy
    sums = [batch.sum_features(cubic) for cubic in (xx * dx, xx * dy, yy * dx, yy * dy)]
    longest_x, longest_y = np.sqrt(_by_feature(batch, xx)), np.sqrt(_by_feature(batch, yy))
    width = _by_feature(batch, np.abs(batch.x - batch.planar_centroid[batch.vertex_feature, 0]))
    height = _by_feature(batch, np.abs(batch.y - batch.planar_centroid[batch.vertex_feature, 1]))
    area = np.abs(batch.sum_ring_values(batch.ring_signed_area))
    jx, jy, axx, axy, ayy = _derivatives(batch.planar_centroid, width, height, to_plane)
    with np.errstate(invalid="ignore", divide="ignore"):
        between = (
            _cross(jx, axx) * sums[0]
            + (2.0 * _cross(jx, axy) + _cross(jy, axx)) * sums[1]
            + (_cross(jx, ayy) + 2.0 * _cross(jy, axy)) * sums[2]
            + _cross(jy, ayy) * sums[3]
        ) / 12.0
        scale_x, scale_y = np.hypot(*jx), np.hypot(*jy)
        longest = np.hypot(scale_x * longest_x, scale_y * longest_y)
        curvature = np.maximum(np.hypot(*axx) / scale_x**2, np.hypot(*ayy) / scale_y**2)
        curvature = np.maximum(curvature, 2.0 * np.hypot(*axy) / (scale_x * scale_y))
        is_fine = (
            (np.abs(between) <= TOLERANCE * area * np.abs(_cross(jx, jy)))
            & ((curvature * longest) ** 2 <= 24.0 * TOLERANCE)
            & (longest <= LOCAL_EDGE_M)
            & (np.hypot(scale_x * width, scale_y * height) <= LOCAL_SIZE_M)
        )
    # NaN counts as bending: then the edges themselves are tried.
    return np.asarray(~is_fine)


Vectors = tuple[FloatArray, FloatArray]


def _cross(a: Vectors, b: Vectors) -> FloatArray:
    return a[0] * b[1] - a[1] * b[0]


def _by_feature(batch: RingBatch, values: FloatArray) -> FloatArray:
    largest = np.zeros(batch.n_features)
    np.maximum.at(largest, batch.ring_feature, np.maximum.reduceat(values, batch.ring_start[:-1]))
    return largest


def _derivatives(
    centre: FloatArray, width: FloatArray, height: FloatArray, to_plane: ToPlane
) -> tuple[Vectors, Vectors, Vectors, Vectors, Vectors]:
    """Take first and second derivatives of the map by differences over the feature's own half-widths."""
    n = len(centre)
    feature = np.tile(np.arange(n), 7)
    step_x = np.concatenate([sign * width for sign in (0, 1, -1, 0, 0, 1, -1)])
    step_y = np.concatenate([sign * height for sign in (0, 0, 0, 1, -1, 1, -1)])
    mapped = to_plane(centre[feature, 0] + step_x, centre[feature, 1] + step_y, feature)
    jx, jy, axx, axy, ayy = [], [], [], [], []
    with np.errstate(invalid="ignore", divide="ignore"):
        for values in mapped:
            middle, east, west, north, south, far, near = values.reshape(7, n)
            jx.append((east - west) / (2.0 * width))
            jy.append((north - south) / (2.0 * height))
            bend_x, bend_y = east + west - 2.0 * middle, north + south - 2.0 * middle
            axx.append(bend_x / width**2)
            ayy.append(bend_y / height**2)
            axy.append((far + near - 2.0 * middle - bend_x - bend_y) / (2.0 * width * height))
    return (jx[0], jx[1]), (jy[0], jy[1]), (axx[0], axx[1]), (axy[0], axy[1]), (ayy[0], ayy[1])


def _pieces_by_trial(batch: RingBatch, to_plane: ToPlane) -> IntArray:
    """Cut edges until what lies between the pieces and their chords is small enough."""
    count = np.ones(batch.n_vertices, dtype=np.int64)
    feature = batch.vertex_feature
    for _ in range(MAX_ROUNDS):
        between, excess, chord, area = _errors(batch, count, to_plane)
        perimeter = batch.sum_features(chord)
        with np.errstate(invalid="ignore", divide="ignore"):
            is_fine = (np.abs(batch.sum_features(between)) <= TOLERANCE * area) & (
                batch.sum_features(excess) <= TOLERANCE * perimeter
            )
            # Each edge may err in proportion to its length.
            too_much = np.fmax(
                np.abs(between) * perimeter[feature] / (ALLOWANCE * area[feature] * chord), excess / (ALLOWANCE * chord)
            )
        grows = np.isfinite(too_much) & (too_much > 1.0) & ~is_fine[feature]
        if not grows.any():
            break
        factor = np.minimum(np.ceil(np.sqrt(too_much[grows])), MAX_GROWTH).astype(np.int64)
        count[grows] = np.minimum(count[grows] * factor, MAX_PIECES)
        if too_much[grows].max() <= CERTAIN:
            break
    return count


def _errors(
    batch: RingBatch, count: IntArray, to_plane: ToPlane
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Estimate for each edge what its pieces leave out.

    Returns
    -------
    between : (n_vertices,) float64
        Area between edge and chords, with its sign.
    excess : (n_vertices,) float64
        Length of the edge beyond its chords.
    chord : (n_vertices,) float64
        Length of the chords.
    area : (n_features,) float64
        On the plane.
    """
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
    with np.errstate(invalid="ignore", divide="ignore"):
        sagitta = 1.5 * np.abs(between) / length
        excess = np.where(length > 0, 8.0 / 3.0 * sagitta**2 / length, np.hypot(bow_x, bow_y))
    n = batch.n_vertices
    by_edge = [np.asarray(np.bincount(edge, values, n), np.float64) for values in (between, excess, length)]
    mapped = fine.moved(x, y, fine.origin)
    area = np.abs(mapped.sum_ring_values(mapped.ring_signed_area))
    return by_edge[0], by_edge[1], by_edge[2], area
