"""Outlines drawn again from their first harmonics: what a spectrum says, as a shape that can be seen."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import shapely
from numpy.typing import NDArray

from geoshape.errors import OptionError
from geoshape.formulas.arclength import ComplexArray
from geoshape.formulas.fourier import exact_coefficients
from geoshape.rings import FloatArray, RingBatch, oriented
from geoshape.rings import outlines as outlines_of

ObjectArray = NDArray[np.object_]

MAX_HARMONICS = 1024

POINTS_PER_HARMONIC = 16
"""Points on one wave of the highest harmonic, where their number is left open: chords then leave 2 % of its height."""

LEAST_POINTS = 64
"""Points of an outline where their number is left open: an ellipse loses 0.16 % of its area by its chords."""

NO_AREA = 1e-12
"""Area over squared extent below which a redrawn outline has folded to a line."""


@dataclass(frozen=True, kw_only=True)
class RedrawOptions:
    """How much of an outline is kept, and what else is drawn.

    Attributes
    ----------
    harmonics : int
        Harmonics |k| <= K that are kept, from 1 (an ellipse) to 1024.
    points : int or None
        Points of each redrawn ring, at least 2 K + 2; None gives 16 for each harmonic, and 64 at least.
    all_parts : bool
        Redraw every part, not only the largest.
    holes : bool
        Redraw the holes of the parts too.

    Raises
    ------
    OptionError
        A number is out of its range.
    """

    harmonics: int = 8
    points: int | None = None
    all_parts: bool = False
    holes: bool = False

    def __post_init__(self) -> None:
        if not 1 <= self.harmonics <= MAX_HARMONICS:
            raise OptionError(f"harmonics = {self.harmonics} cannot be drawn; give a number from 1 to {MAX_HARMONICS}")
        least = 2 * self.harmonics + 2
        if self.points is not None and self.points < least:
            raise OptionError(
                f"points = {self.points} are too few for {self.harmonics} harmonics; give {least} or more, or fewer "
                "harmonics"
            )

    @property
    def ring_points(self) -> int:
        """Points of each redrawn ring."""
        return self.points or max(LEAST_POINTS, POINTS_PER_HARMONIC * self.harmonics)


def rebuild(coefficients: ComplexArray, points: int) -> ComplexArray:
    """Draw outlines from their Fourier coefficients.

    Parameters
    ----------
    coefficients : (n, 2 * K + 1) complex128
        Z_k for k = -K ... K.
    points : int
        Points of each outline, more than 2 K.

    Returns
    -------
    (n, points) complex128
        x + iy at equal steps of the parameter, the first where the series begins; NaN where a coefficient is NaN.

    Notes
    -----
    The smooth outline encloses pi sum k |Z_k|^2 [1]_; the polygon through N of its points N / 2 sum sin(2 pi k / N)
    |Z_k|^2, which is a little less.

    References
    ----------
    .. [1] Kuhl, F. P., Giardina, C. R. (1982). Elliptic Fourier features of a closed contour.
           Computer Graphics and Image Processing 18, 236-258.

    Examples
    --------
    A circle of radius 2 about (1, 0):

    >>> rebuild(np.array([[0, 1, 2]], dtype=complex), 4).round(12)
    array([[ 3.+0.j,  1.+2.j, -1.+0.j,  1.-2.j]])
    """
    highest = coefficients.shape[1] // 2
    padded = np.zeros((len(coefficients), points), dtype=np.complex128)
    padded[:, : highest + 1] = coefficients[:, highest:]
    if highest:
        padded[:, -highest:] = coefficients[:, :highest]
    return np.fft.ifft(padded, axis=1, norm="forward")


@dataclass(frozen=True, eq=False)
class Redrawn:
    """Redrawn polygons of a batch.

    Attributes
    ----------
    batch : RingBatch
        Exteriors counter-clockwise, holes clockwise, about the same origins as before. A feature without rings has
        none here either.
    area_m2 : (n_features,) float64
        Area as redrawn: exteriors less holes. NaN for a feature without rings.
    area_error : (n_features,) float64
        ``area_m2`` over the area of the same rings before, less 1.
    note : (n_features,) object of str or None
        What is wrong with a redrawn polygon: it crosses itself, or has folded to a line.
    """

    batch: RingBatch
    area_m2: FloatArray
    area_error: FloatArray
    note: ObjectArray

    def columns(self) -> dict[str, FloatArray | ObjectArray]:
        """Give the numbers as columns by name."""
        return {
            "redraw_area_m2": self.area_m2,
            "redraw_area_error": self.area_error,
            "redraw_note": self.note,
        }


CROSSES = "the redrawn outline crosses itself; more harmonics follow the outline more closely"
RINGS_CROSS = "redrawn rings cross each other; more harmonics follow them more closely"
FOLDED = "the redrawn outline encloses no area; more harmonics follow the outline more closely"


def redraw_rings(batch: RingBatch, options: RedrawOptions) -> Redrawn:
    """Draw polygons again from the first harmonics of their rings.

    Parameters
    ----------
    batch : RingBatch
        In metres on an equal-area plane.
    options : RedrawOptions

    Returns
    -------
    Redrawn

    Notes
    -----
    Each ring is walked at unit speed from its first vertex, and its coefficients are exact; where the outline is drawn
    does not depend on the first vertex, only which of its points are.

    Examples
    --------
    >>> from geoshape.geometry import ring_batch
    >>> square = ring_batch([shapely.box(0, 0, 2, 2), None])
    >>> redrawn = redraw_rings(square, RedrawOptions(harmonics=1))
    >>> redrawn.area_m2.round(3), redrawn.area_error.round(3), redrawn.note.tolist()
    (array([4.122,   nan]), array([0.03,  nan]), [None, None])
    """
    rings = _chosen_rings(batch, options)
    n = options.ring_points
    points = rebuild(exact_coefficients(rings, options.harmonics), n)
    drawn = RingBatch(
        x=np.ascontiguousarray(points.real).ravel(),
        y=np.ascontiguousarray(points.imag).ravel(),
        ring_start=np.arange(rings.n_rings + 1) * n,
        ring_part=rings.ring_part,
        ring_is_hole=rings.ring_is_hole,
        part_feature=rings.part_feature,
        n_features=rings.n_features,
        origin=rings.origin,
    )
    drawn = oriented(drawn)
    has_rings = np.bincount(rings.ring_feature, minlength=rings.n_features) > 0
    area = np.where(has_rings, drawn.sum_ring_values(drawn.ring_signed_area), np.nan)
    before = rings.sum_ring_values(rings.ring_signed_area)
    error = np.divide(area, before, out=np.full_like(area, np.nan), where=before > 0) - 1.0
    return Redrawn(drawn, area, error, _notes(drawn))


def _chosen_rings(batch: RingBatch, options: RedrawOptions) -> RingBatch:
    """Leave out the parts and holes that are not to be drawn."""
    keep = options.holes | ~batch.ring_is_hole
    if not options.all_parts:
        largest = np.zeros(batch.n_parts, dtype=np.bool_)
        largest[outlines_of(batch).ring_part] = True
        keep &= largest[batch.ring_part]
    return batch.take_rings(keep)


def _notes(drawn: RingBatch) -> ObjectArray:
    notes = np.full(drawn.n_features, None, dtype=object)
    geometries = polygons_of(drawn)
    broken = np.flatnonzero(~shapely.is_valid(geometries) & ~shapely.is_missing(geometries))
    for row in broken.tolist():
        exteriors = shapely.get_exterior_ring(shapely.get_parts(geometries[row]))
        notes[row] = RINGS_CROSS if np.all(shapely.is_simple(exteriors)) else CROSSES
    if drawn.n_rings:
        first = drawn.ring_start[:-1]
        extent = [np.maximum.reduceat(v, first) - np.minimum.reduceat(v, first) for v in (drawn.x, drawn.y)]
        flat = np.abs(drawn.ring_signed_area) <= NO_AREA * np.maximum(*extent) ** 2
        notes[drawn.ring_feature[flat & ~drawn.ring_is_hole]] = FOLDED
    return notes


def polygons_of(batch: RingBatch) -> ObjectArray:
    """Make shapely geometries of rings.

    Parameters
    ----------
    batch : RingBatch

    Returns
    -------
    (n_features,) object of Polygon, MultiPolygon or None
        With the origins added; None for a feature without rings.

    Examples
    --------
    >>> from geoshape.geometry import ring_batch
    >>> polygons_of(ring_batch([None, shapely.box(7, 7, 9, 9)])).tolist()
    [None, <POLYGON ((9 7, 9 9, 7 9, 7 7, 9 7))>]
    """
    coordinates = np.column_stack((batch.x, batch.y)) + batch.origin[batch.vertex_feature]
    # Each ring is closed by its first vertex.
    closing = np.insert(np.arange(batch.n_vertices), batch.ring_start[1:], batch.ring_start[:-1])
    ring_end = np.concatenate(([0], np.cumsum(batch.ring_size + 1)))
    parts, rings_in_part = np.unique(batch.ring_part, return_counts=True)
    part_end = np.concatenate(([0], np.cumsum(rings_in_part)))
    parts_in_feature = np.bincount(batch.part_feature[parts], minlength=batch.n_features)
    feature_end = np.concatenate(([0], np.cumsum(parts_in_feature)))
    geometries = shapely.from_ragged_array(
        shapely.GeometryType.MULTIPOLYGON, coordinates[closing], (ring_end, part_end, feature_end)
    )
    single = parts_in_feature == 1
    geometries[single] = shapely.get_geometry(geometries[single], 0)
    geometries[parts_in_feature == 0] = None
    return np.asarray(geometries, dtype=object)
