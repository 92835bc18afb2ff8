"""Length along the boundary, and points at equal arc length."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from geoshape.rings import FloatArray, RingBatch

ComplexArray = NDArray[np.complex128]


def edge_lengths(batch: RingBatch) -> FloatArray:
    """Measure each edge, from its vertex to the next of the ring.

    Parameters
    ----------
    batch : RingBatch

    Returns
    -------
    (n_vertices,) float64
        Lengths in the unit of the coordinates.
    """
    dx = batch.next_x - batch.x
    dy = batch.next_y - batch.y
    return np.sqrt(dx * dx + dy * dy)


def arc_positions(rings: RingBatch, length: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Place each vertex on its ring's own arc-length scale.

    Parameters
    ----------
    rings : RingBatch
    length : (n_vertices,) float64
        Length of the edge that starts at each vertex.

    Returns
    -------
    position : (n_vertices,) float64
        Distance along the ring from its first vertex.
    total : (n_rings,) float64
        Length of each ring.
    """
    total = rings.sum_rings(length)
    steps = np.empty_like(length)
    steps[1:] = length[:-1]
    first = rings.ring_start[:-1]
    if rings.n_rings:
        # One running sum over all rings would lose digits: take the last ring's length off where a ring begins.
        steps[first[0]] = 0.0
        steps[first[1:]] -= total[:-1]
    position = np.cumsum(steps)
    position -= np.repeat(position[first], rings.ring_size)
    return position, total


def resample(rings: RingBatch, n: int) -> ComplexArray:
    """Put ``n`` points on each ring at equal arc length, the first at the ring's first vertex.

    Parameters
    ----------
    rings : RingBatch
    n : int
        Points a ring.

    Returns
    -------
    (n_rings, n) complex128
        Points x + iy on the edges of the polygon. A ring of no length gives its one point ``n`` times.

    Examples
    --------
    >>> from geoshape.geometry import ring_batch
    >>> import shapely
    >>> resample(ring_batch(shapely.box([0], 0, 2, 2), local_origin=False), 4)
    array([[2.+0.j, 2.+2.j, 0.+2.j, 0.+0.j]])
    """
    if not rings.n_rings:
        return np.zeros((0, n), dtype=np.complex128)
    position, total = arc_positions(rings, edge_lengths(rings))
    samples_per_length = np.divide(n, total, out=np.zeros_like(total), where=total > 0)
    position *= np.repeat(samples_per_length, rings.ring_size)
    position_end = rings.shift_back(position)
    position_end[rings.ring_start[1:] - 1] = n
    # Sample j lies on the edge whose ends enclose j: each edge takes a run of consecutive samples.
    first_sample = np.minimum(np.ceil(position).astype(np.int64), n)
    last_sample = rings.shift_back(first_sample.astype(np.float64)).astype(np.int64)
    last_sample[rings.ring_start[1:] - 1] = n
    count = last_sample - first_sample
    edge = np.repeat(np.arange(rings.n_vertices), count)
    sample = np.tile(np.arange(n, dtype=np.float64), rings.n_rings)
    span = position_end - position
    per_span = np.divide(1.0, span, out=np.zeros_like(span), where=count > 0)
    along = (sample - position[edge]) * per_span[edge]
    points = np.empty(len(edge), dtype=np.complex128)
    points.real = rings.x[edge] + along * (rings.next_x - rings.x)[edge]
    points.imag = rings.y[edge] + along * (rings.next_y - rings.y)[edge]
    return points.reshape(rings.n_rings, n)
