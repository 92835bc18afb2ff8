"""Put features on the ground's plane: where their coordinates come from, and what the plane does to them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray

from geoshape.ground import edges, seams
from geoshape.ground.equal_area import GroundKind, GroundPlan, angle_unit_deg, meridian_deg
from geoshape.ground.mapping import CentredMap, Globe, SharedMap
from geoshape.ground.plane import Centres, Ellipsoid, distortion_deg
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch, oriented

ObjectArray = NDArray[np.object_]

MAX_FACTOR_VERTICES = 64
"""Vertices of an outline at which the deformation of a shared projection is looked up; evenly spread over it."""

FAR_MERIDIAN_DEG = 180.0


@dataclass(frozen=True, eq=False)
class Placed:
    """Features on their plane.

    Attributes
    ----------
    batch : RingBatch
        In metres about each feature's centre; long edges cut into pieces.
    convergence_deg : (n_features,) float64
        What must be added to an azimuth on the plane to have it from true north.
    distortion_deg : (n_features,) float64
        Largest angular deformation over the feature's vertices; NaN where the plane has no place on the globe.
    is_placed : (n_features,) bool
        False where a coordinate has no place on the globe or the plane.
    centre_deg : (n_features, 2) float64
        Longitude and latitude of the centre; NaN where there is none.
    """

    batch: RingBatch
    convergence_deg: FloatArray
    distortion_deg: FloatArray
    is_placed: BoolArray
    centre_deg: FloatArray


def open_ground(plan: GroundPlan) -> Ground:
    """Lay the ground in this process; what PROJ needs is made once."""
    return Ground(plan)


@dataclass(frozen=True, eq=False)
class Ground:
    """A ground that features can be placed on.

    Attributes
    ----------
    plan : GroundPlan
    """

    plan: GroundPlan

    @cached_property
    def _crs(self) -> pyproj.CRS | None:
        return pyproj.CRS(self.plan.source_wkt) if self.plan.source_wkt else None

    @cached_property
    def _globe(self) -> Globe:
        crs = self._crs
        if crs is None or crs.ellipsoid is None:
            raise ValueError("a ground without a CRS has no globe")
        major, minor = crs.ellipsoid.semi_major_metre, crs.ellipsoid.semi_minor_metre
        inverse = None
        if not crs.is_geographic:
            inverse = pyproj.Transformer.from_crs(crs, crs.geodetic_crs, always_xy=True)
        return Globe(Ellipsoid(major, 1.0 - (minor / major) ** 2), inverse)

    @cached_property
    def _target(self) -> pyproj.Proj:
        return pyproj.Proj(self.plan.target_wkt)

    @cached_property
    def _target_crs(self) -> pyproj.CRS:
        return pyproj.CRS(self.plan.target_wkt)

    @cached_property
    def _own_projection(self) -> pyproj.Proj | None:
        """The layer's own projection, on the plane of its coordinates."""
        return pyproj.Proj(self._crs) if self._crs is not None and self._crs.is_projected else None

    def in_degrees(self, geometries: ObjectArray) -> ObjectArray:
        """Turn longitudes and latitudes that count in another unit into degrees."""
        if not self.plan.is_geographic or self._crs is None:
            return geometries
        factor = angle_unit_deg(self._crs)
        if factor == 1.0:
            return geometries
        return np.asarray(shapely.transform(geometries, lambda points: points * factor))

    def unwrap(self, geometries: ObjectArray) -> tuple[ObjectArray, IntArray, BoolArray]:
        """Make outlines whole that a seam of the globe tears; see `seams.unwrap`."""
        if not self.plan.is_geographic:
            n = len(geometries)
            return geometries, np.zeros(n, dtype=np.int64), np.zeros(n, dtype=np.bool_)
        return seams.unwrap(geometries, self._globe.ellipsoid, is_subdivided=self.plan.is_subdivided)

    def place(self, batch: RingBatch, frames: IntArray) -> Placed:
        """Put features on the plane.

        Parameters
        ----------
        batch : RingBatch
            In the layer's coordinates, unwrapped.
        frames : (n_features,) int64
            Frame of each feature's coordinates, from `unwrap`.

        Returns
        -------
        Placed
        """
        match self.plan.kind:
            case GroundKind.PLANE:
                return self._on_coordinates(batch)
            case GroundKind.CENTRED:
                return self._on_centred(batch, frames)
            case _:
                return self._on_shared(batch, frames)

    def _on_coordinates(self, batch: RingBatch) -> Placed:
        n = batch.n_features
        unit = self.plan.unit_m
        moved = batch.moved(unit * batch.x, unit * batch.y, batch.origin)
        centre = np.full((n, 2), np.nan)
        convergence, distortion = np.zeros(n), np.full(n, np.nan)
        if self._own_projection is not None:
            frames = np.zeros(n, dtype=np.int64)
            centre = self._centres_deg(batch, frames)
            convergence = _convergence(self._own_projection, centre)
            distortion = self._deformation(batch, frames, self._own_projection)
        return Placed(oriented(moved), convergence, distortion, np.ones(n, dtype=np.bool_), centre)

    def _on_centred(self, batch: RingBatch, frames: IntArray) -> Placed:
        middle = batch.origin + batch.planar_centroid
        sphere = self._globe.sphere(middle[:, 0], middle[:, 1], frames)
        with np.errstate(invalid="ignore", divide="ignore"):
            centres = Centres.at(sphere, self._globe.ellipsoid)
        to_plane = CentredMap(self._globe, batch.origin, frames, centres)
        placed, is_placed = self._mapped(batch, to_plane)
        distance = np.sqrt(placed.x**2 + placed.y**2)
        farthest = np.zeros(batch.n_features)
        if batch.n_rings:
            np.maximum.at(farthest, batch.ring_feature, np.maximum.reduceat(distance, placed.ring_start[:-1]))
        distortion = distortion_deg(farthest, self._globe.ellipsoid.authalic_radius_m)
        longitude, sine, cosine = sphere
        latitude = self._globe.ellipsoid.geographic_latitude(sine, cosine)
        centre = np.degrees(np.column_stack((longitude, latitude)))
        return Placed(placed, np.zeros(batch.n_features), distortion, is_placed, centre)

    def _on_shared(self, batch: RingBatch, frames: IntArray) -> Placed:
        centre = self._centres_deg(batch, frames)
        east, north = self._target(centre[:, 0], centre[:, 1])
        middle = np.column_stack((east, north))
        offset = meridian_deg(self._crs) if self._crs is not None else 0.0
        unit = self._target_crs.axis_info[0].unit_conversion_factor
        to_plane = SharedMap(self._globe, self._target, unit, offset, batch.origin, frames, middle)
        placed, is_placed = self._mapped(batch, to_plane)
        is_placed &= ~self._is_torn(batch, frames)
        distortion = self._deformation(batch, frames, self._target)
        return Placed(placed, _convergence(self._target, centre), distortion, is_placed, centre)

    def _mapped(self, batch: RingBatch, to_plane: edges.ToPlane) -> tuple[RingBatch, BoolArray]:
        if self.plan.is_subdivided:
            batch = edges.cut(batch, edges.pieces(batch, to_plane))
        x, y = to_plane(batch.x, batch.y, batch.vertex_feature)
        lost = ~(np.isfinite(x) & np.isfinite(y))
        is_placed = np.ones(batch.n_features, dtype=np.bool_)
        if lost.any():
            is_placed[batch.vertex_feature[lost]] = False
            x[lost], y[lost] = 0.0, 0.0
        return oriented(batch.moved(x, y, np.zeros_like(batch.origin))), is_placed

    def _centres_deg(self, batch: RingBatch, frames: IntArray) -> FloatArray:
        """Give centres by longitude and latitude from Greenwich."""
        middle = batch.origin + batch.planar_centroid
        longitude, latitude = self._globe.degrees(middle[:, 0], middle[:, 1], frames)
        offset = meridian_deg(self._crs) if self._crs is not None else 0.0
        return np.column_stack((np.asarray(longitude) + offset, latitude))

    def _is_torn(self, batch: RingBatch, frames: IntArray) -> BoolArray:
        """Tell which features cross the far meridian of a projection that folds longitudes there."""
        torn = np.zeros(batch.n_features, dtype=np.bool_)
        if not batch.n_rings or not self.plan.is_geographic or "+over" in (self.plan.target_wkt or ""):
            return torn
        meridian = _central_meridian(self._target_crs)
        if meridian is None:
            return torn
        longitude, _ = self._globe.degrees(*_absolute(batch), frames[batch.vertex_feature])
        turn = np.floor((longitude - meridian + FAR_MERIDIAN_DEG) / (2.0 * FAR_MERIDIAN_DEG))
        first = batch.ring_start[:-1]
        low, high = np.minimum.reduceat(turn, first), np.maximum.reduceat(turn, first)
        torn[batch.ring_feature[low != high]] = True
        return torn

    def _deformation(self, batch: RingBatch, frames: IntArray, projection: pyproj.Proj) -> FloatArray:
        """Look up the largest angular deformation over the vertices of each feature, or over 64 spread among them."""
        largest = np.full(batch.n_features, np.nan)
        if not batch.n_rings:
            return largest
        count = batch.sum_ring_values(batch.ring_size.astype(np.float64)).astype(np.int64)
        step = np.maximum(-(-count // MAX_FACTOR_VERTICES), 1)[batch.vertex_feature]
        first = np.cumsum(count) - count
        chosen = np.flatnonzero((np.arange(batch.n_vertices) - first[batch.vertex_feature]) % step == 0)
        x, y = _absolute(batch)
        owner = batch.vertex_feature[chosen]
        longitude, latitude = self._globe.degrees(x[chosen], y[chosen], frames[owner])
        offset = meridian_deg(self._crs) if self._crs is not None else 0.0
        factors = projection.get_factors(np.asarray(longitude) + offset, latitude, errcheck=False)
        deformation = np.asarray(factors.angular_distortion, dtype=np.float64)
        deformation[~np.isfinite(deformation) | (np.abs(deformation) > 180.0)] = np.nan
        np.fmax.at(largest, owner, deformation)
        return largest


def _central_meridian(crs: pyproj.CRS) -> float | None:
    """Find the meridian opposite to which a projection is cut; None where it is whole all round, or does not tell."""
    operation = crs.coordinate_operation
    if operation is None or "zimuthal" in operation.method_name or "tereographic" in operation.method_name:
        return None
    found = [float(parameter.value) for parameter in operation.params if parameter.name.startswith("Longitude of")]
    return found[0] if found else 0.0


def _absolute(batch: RingBatch) -> tuple[FloatArray, FloatArray]:
    by_vertex = batch.origin[batch.vertex_feature]
    return batch.x + by_vertex[:, 0], batch.y + by_vertex[:, 1]


def _convergence(projection: pyproj.Proj, centre_deg: FloatArray) -> FloatArray:
    """Give the azimuth of grid north; 0 where the projection does not tell."""
    factors = projection.get_factors(centre_deg[:, 0], centre_deg[:, 1], errcheck=False)
    convergence = np.asarray(factors.meridian_convergence, dtype=np.float64)
    return np.where(np.isfinite(convergence) & (np.abs(convergence) <= 360.0), convergence, 0.0)
