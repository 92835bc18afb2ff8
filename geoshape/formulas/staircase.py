"""Outlines that come from pixels: all turns are right angles, all steps whole pixels."""

from __future__ import annotations

import numpy as np

from geoshape.rings import BoolArray, FloatArray, RingBatch

MIN_RIGHT_ANGLES = 12
"""Fewer right-angled turns are a house or a field as well as a few pixels."""

MIN_SHARE = 0.95
"""Share of an outline's edges that must follow the edges of pixels."""

STEP_TOLERANCE = 1e-3
"""How far a step may be from a whole number of pixels."""

ANGLE_TOLERANCE = 1e-6
"""How far an edge may lean from an axis, as the sine of the angle."""


def is_staircase(batch: RingBatch) -> BoolArray:
    """Tell which features have outlines that follow the edges of pixels.

    Parameters
    ----------
    batch : RingBatch
        In the layer's own coordinates, along whose axes pixels lie.

    Returns
    -------
    (n_features,) bool
        True where an exterior has at least 12 right angles, and 95 % of its edges lie along the axes and are a whole
        number of pixels long. The perimeter of such an outline is longer than that of the thing it stands for, by 4/pi
        on average over directions.
    """
    rings = batch.take_rings(~batch.ring_is_hole)
    found = np.zeros(batch.n_features, dtype=np.bool_)
    if not rings.n_rings:
        return found
    dx, dy = np.abs(rings.next_x - rings.x), np.abs(rings.next_y - rings.y)
    along_x = dy <= ANGLE_TOLERANCE * dx
    along_y = dx <= ANGLE_TOLERANCE * dy
    before_x = _before(rings, along_x)
    turns = (along_x & ~before_x) | (along_y & before_x)
    follows = (along_x | along_y) & _is_whole(rings, dx, along_x) & _is_whole(rings, dy, along_y)
    stepped = (rings.sum_rings(turns.astype(np.float64)) >= MIN_RIGHT_ANGLES) & (
        rings.sum_rings(follows.astype(np.float64)) >= MIN_SHARE * rings.ring_size
    )
    found[rings.ring_feature[stepped]] = True
    return found


def _before(rings: RingBatch, values: BoolArray) -> BoolArray:
    before = np.roll(values, 1)
    before[rings.ring_start[:-1]] = values[rings.ring_start[1:] - 1]
    return before


def _is_whole(rings: RingBatch, step: FloatArray, chosen: BoolArray) -> BoolArray:
    """Tell which chosen steps are whole multiples of the ring's shortest; the others are taken for granted."""
    shortest = np.minimum.reduceat(np.where(chosen, step, np.inf), rings.ring_start[:-1])
    pixels = step / np.repeat(shortest, rings.ring_size)
    return np.asarray(~chosen | (np.abs(pixels - np.round(pixels)) <= STEP_TOLERANCE))
