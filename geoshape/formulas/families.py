"""The families of columns, computed from shapes on their plane.

A `Shapes` holds what several families need (moments, hulls, lengths), each computed once when first asked for.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property

import numpy as np

from geoshape.formulas import arclength, axes, calipers, compactness, fourier, hulls, moments
from geoshape.options import Family, MeasureOptions, Spectrum
from geoshape.rings import FloatArray, IntArray, RingBatch, outlines

Columns = dict[str, FloatArray]

THIN = 1e-3
"""Axis ratio below which moments are taken again along the shape's own axes."""


@dataclass(frozen=True, eq=False)
class Shapes:
    """Shapes of a batch of features, in metres.

    Attributes
    ----------
    batch : RingBatch
        Exteriors counter-clockwise, holes clockwise; a feature that is not to be measured has no rings.
    convergence_deg : (n_features,) float64
        What must be added to an azimuth on the plane to have it from true north.
    edge_count : (n_features,) int64
        Edges of the source outline, before any were subdivided.
    is_simple : bool
        Whether no ring crosses itself; hulls are quicker then.
    """

    batch: RingBatch
    convergence_deg: FloatArray
    edge_count: IntArray
    is_simple: bool = True

    @cached_property
    def edge_length(self) -> FloatArray:
        """(n_vertices,) length of each edge."""
        return arclength.edge_lengths(self.batch)

    @cached_property
    def ring_length(self) -> FloatArray:
        """(n_rings,) length of each ring."""
        return self.batch.sum_rings(self.edge_length)

    @cached_property
    def perimeter(self) -> FloatArray:
        """(n_features,) length of all rings; NaN without rings."""
        return _null_zero(self.batch.sum_ring_values(self.ring_length))

    @cached_property
    def raw(self) -> FloatArray:
        """(n_features, 10) raw moments about the local origin."""
        return moments.raw_moments(self.batch)

    @cached_property
    def central(self) -> FloatArray:
        """(n_features, 10) central moments; NaN without area."""
        return moments.central_moments(self.raw)

    @cached_property
    def aligned(self) -> FloatArray:
        """(n_features, 10) central moments, those of thin shapes along the shape's own axes.

        Whatever does not change by a turn may take them: the determinant of the moments of a thin shape that lies
        askew is a difference of near-equal products.
        """
        principal = self.principal_as_drawn
        thin = principal.ratio < THIN
        if not thin.any():
            return self.central
        centre = moments.centroids(self.raw)[self.batch.vertex_feature]
        angle = np.radians(90.0 - principal.azimuth_deg)[self.batch.vertex_feature]
        x, y = self.batch.x - centre[:, 0], self.batch.y - centre[:, 1]
        along = self.batch.moved(
            x * np.cos(angle) + y * np.sin(angle), y * np.cos(angle) - x * np.sin(angle), self.batch.origin
        )
        kept = along.take_rings(thin[along.ring_feature])
        return np.where(thin[:, None], moments.central_moments(moments.raw_moments(kept)), self.central)

    @cached_property
    def principal_as_drawn(self) -> axes.PrincipalAxes:
        """Principal axes from the moments in the plane's own directions."""
        return axes.principal_axes(self.central)

    @cached_property
    def area(self) -> FloatArray:
        """(n_features,) area, holes excluded; NaN without area."""
        return _null_zero(self.raw[:, 0])

    @cached_property
    def hulls(self) -> RingBatch:
        """Convex hull of each feature."""
        return hulls.convex_hulls(self.batch) if self.is_simple else hulls.point_hulls(self.batch)

    @cached_property
    def hull_area(self) -> FloatArray:
        """(n_features,) area of the convex hull."""
        return self.hulls.sum_ring_values(self.hulls.ring_signed_area)

    @cached_property
    def spans(self) -> calipers.Calipers:
        """Calliper spans and smallest rectangle."""
        return calipers.calipers(self.hulls)

    @cached_property
    def circles(self) -> calipers.Circles:
        """Smallest bounding circle."""
        return calipers.smallest_circle(self.hulls)

    @cached_property
    def outline(self) -> RingBatch:
        """Exterior of each feature's largest part."""
        return outlines(self.batch)

    def true_azimuth(self, azimuth_deg: FloatArray) -> FloatArray:
        """Turn azimuths on the plane into azimuths from true north, in [0, 180)."""
        return axes.axial(azimuth_deg + self.convergence_deg)


def _null_zero(value: FloatArray) -> FloatArray:
    return np.where(value > 0, value, np.nan)


def extent(shapes: Shapes, _: MeasureOptions) -> Columns:
    """Compute area, lengths, mean edge and calliper spans."""
    exterior_length = np.where(shapes.batch.ring_is_hole, 0.0, shapes.ring_length)
    return {
        "area_m2": shapes.area,
        "perimeter_m": shapes.perimeter,
        "outline_m": _null_zero(shapes.batch.sum_ring_values(exterior_length)),
        "edge_mean_m": shapes.perimeter / np.maximum(shapes.edge_count, 1),
        "feret_max_m": shapes.spans.longest,
        "feret_max_azimuth_deg": shapes.true_azimuth(shapes.spans.longest_azimuth_deg),
        "feret_min_m": shapes.spans.shortest,
    }


def compactness_family(shapes: Shapes, _: MeasureOptions) -> Columns:
    """Compute the compactness ratios."""
    return {
        "polsby_popper": compactness.polsby_popper(shapes.area, shapes.perimeter),
        "perimeter_ratio": compactness.perimeter_ratio(shapes.area, shapes.perimeter),
        "reock": compactness.reock(shapes.area, shapes.circles.radius),
        "convexity": compactness.convexity(shapes.area, shapes.hull_area),
        "rectangularity": compactness.rectangularity(shapes.area, shapes.spans.rectangle_area),
        "inertia_compactness": compactness.inertia_compactness(shapes.central),
    }


def axes_family(shapes: Shapes, _: MeasureOptions) -> Columns:
    """Compute principal axes and their direction."""
    principal = axes.principal_axes(shapes.aligned)
    return {
        "major_axis_m": principal.major_m,
        "minor_axis_m": principal.minor_m,
        "axis_ratio": principal.ratio,
        "axis_azimuth_deg": shapes.true_azimuth(shapes.principal_as_drawn.azimuth_deg),
        "axis_strength": principal.strength,
    }


def moments_family(shapes: Shapes, options: MeasureOptions) -> Columns:
    """Compute moment invariants."""
    normalised = moments.normalised_moments(shapes.aligned)
    hu = moments.hu_invariants(normalised)
    affine = moments.affine_invariants(normalised)
    ellipticity, triangularity = moments.rosin_measures(affine[:, 0])
    columns = {f"hu_{i + 1}": hu[:, i] for i in range(7)}
    columns |= {f"affine_{i + 1}": affine[:, i] for i in range(3)}
    columns |= {"ellipticity": ellipticity, "triangularity": triangularity}
    if options.log_moments:
        columns |= {f"hu_{i + 1}_log": moments.signed_log10(hu[:, i]) for i in range(7)}
    return columns


def spectrum(shapes: Shapes, options: MeasureOptions) -> Columns:
    """Compute the Fourier descriptors of the outline; NaN for a feature without rings."""
    rings = shapes.outline
    if options.spectrum is Spectrum.EXACT:
        coefficients = fourier.exact_coefficients(rings, max(fourier.SUM_HARMONICS, options.harmonics))
    else:
        highest = fourier.highest_harmonic(options.samples, options.harmonics)
        coefficients = fourier.sampled_coefficients(arclength.resample(rings, options.samples), highest)
    columns = {}
    for name, by_ring in fourier.spectrum_columns(coefficients, options.harmonics).items():
        columns[name] = np.full(rings.n_features, np.nan)
        columns[name][rings.ring_feature] = by_ring
    return columns


FAMILIES: dict[Family, Callable[[Shapes, MeasureOptions], Columns]] = {
    Family.EXTENT: extent,
    Family.COMPACTNESS: compactness_family,
    Family.AXES: axes_family,
    Family.MOMENTS: moments_family,
    Family.SPECTRUM: spectrum,
}
