"""Put features on the ground's plane: where their coordinates come from, and what the plane does to them."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyproj
import shapely
from numpy.typing import NDArray

from geoshape.ground import edges, seams
from geoshape.ground.crs_parts import angle_unit_deg, globe_of, length_unit_m, meridian_deg, to_lonlat, unfolded
from geoshape.ground.equal_area import GroundKind, GroundPlan
from geoshape.ground.mapping import CentredMap, Globe, SharedMap, is_polar
from geoshape.ground.plane import distortion_deg
from geoshape.ground.polar import FRAME_LAYER, FRAME_LONLAT
from geoshape.ground.wide import unwrap_wide
from geoshape.rings import BoolArray, FloatArray, IntArray, RingBatch, oriented

ObjectArray = NDArray[np.object_]

SAMPLE_M, MIN_SAMPLES, MAX_SAMPLES = 5_000.0, 4, 64
"""Deformation of a projection is looked up at a vertex for every so many metres that a feature is wide."""

TORN = 0.02
"""Share of a feature's area by which a shared projection may miss it; beyond, the projection tears the feature."""

FAR = 1.8
"""Distance on a centred plane, in radii of the globe, beyond which a feature may hold the opposite of its centre."""

MAX_LATITUDE_DEG = 90.0

NO_PLACE = "coordinates lie outside what the layer's CRS can hold"
NO_ROOM = "it reaches round the globe, where no plane can show it; split it into parts"
NO_PLANE = "the ground's projection has no place for it, or tears it; use --ground centred"


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
        Longitude, from the layer's own prime meridian, and latitude of the centre; NaN where there is none.
    faults : dict of int to str
        Why a feature could not be placed.
    """

    batch: RingBatch
    convergence_deg: FloatArray
    distortion_deg: FloatArray
    is_placed: BoolArray
    centre_deg: FloatArray
    faults: dict[int, str]


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
        if crs is None:
            raise ValueError("a ground without a CRS has no globe")
        ellipsoid = globe_of(crs)
        # Longitude and latitude in another unit are turned into degrees before anything else.
        return Globe(ellipsoid) if self.plan.is_geographic else Globe(ellipsoid, to_lonlat(crs), angle_unit_deg(crs))

    @cached_property
    def _meridian_deg(self) -> float:
        return meridian_deg(self._crs) if self._crs is not None else 0.0

    @cached_property
    def _target(self) -> pyproj.Proj:
        return unfolded(self.plan.target_wkt)

    @cached_property
    def _target_unit_m(self) -> float:
        return length_unit_m(pyproj.CRS(self.plan.target_wkt))

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
        """Make outlines whole that a seam of the globe or the edge of a map tears; see `seams.unwrap`."""
        is_subdivided = self.plan.is_subdivided
        if self.plan.is_geographic:
            return seams.unwrap(geometries, self._globe.ellipsoid, is_subdivided=is_subdivided)
        if self._crs is not None and self._crs.is_projected and self.plan.kind is not GroundKind.PLANE:
            return unwrap_wide(geometries, self._globe, length_unit_m(self._crs), is_subdivided=is_subdivided)
        n = len(geometries)
        return geometries, np.zeros(n, dtype=np.int64), np.zeros(n, dtype=np.bool_)

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

        Notes
        -----
        On a centred plane y points to true north, so that the convergence is 0. A centre exactly on a pole counts as
        reached along the meridian of 0: there y goes on from that meridian across the pole, in the south from the pole
        along it.
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
        moved = oriented(batch.moved(unit * batch.x, unit * batch.y, batch.origin))
        centre = np.full((n, 2), np.nan)
        convergence, distortion = np.zeros(n), np.full(n, np.nan)
        if self._own_projection is not None:
            frames = np.zeros(n, dtype=np.int64)
            centre = self._centres_deg(batch, frames)
            convergence = self._convergence(self._own_projection, centre)
            distortion = self._deformation(batch, frames, self._own_projection, _reach(moved))
        return Placed(moved, convergence, distortion, np.ones(n, dtype=np.bool_), centre, {})

    def _on_centred(self, batch: RingBatch, frames: IntArray) -> Placed:
        to_plane = self._centred_map(batch, frames)
        fine = self._cut(batch, frames, to_plane)
        placed, lost = _mapped(fine, to_plane)
        lost |= self._is_beyond_pole(batch, frames)
        reach = _reach(placed)
        torn = self._is_round_the_globe(fine, frames, placed, reach)
        distortion = distortion_deg(reach, self._globe.ellipsoid.authalic_radius_m)
        faults = dict.fromkeys(np.flatnonzero(torn).tolist(), NO_ROOM)
        faults |= dict.fromkeys(np.flatnonzero(lost).tolist(), NO_PLACE)
        return Placed(placed, np.zeros(batch.n_features), distortion, ~(lost | torn), to_plane.centre_deg, faults)

    def _on_shared(self, batch: RingBatch, frames: IntArray) -> Placed:
        centre = self._centres_deg(batch, frames)
        with np.errstate(invalid="ignore"):
            east, north = self._target(centre[:, 0] + self._meridian_deg, centre[:, 1])
        to_plane = SharedMap(
            self._globe,
            self._target,
            self._target_unit_m,
            self._meridian_deg,
            batch.origin,
            frames,
            np.column_stack((east, north)),
        )
        lost = self._is_beyond_pole(batch, frames)
        own_plane = self._centred_map(batch, frames)
        fine = self._cut(batch, frames, to_plane)
        placed, is_nowhere = _mapped(fine, to_plane)
        lost |= is_nowhere
        torn = _is_torn(fine, own_plane, placed) | ~np.isfinite(east)
        faults = dict.fromkeys(np.flatnonzero(lost | torn).tolist(), NO_PLANE)
        distortion = self._deformation(batch, frames, self._target, _reach(placed))
        return Placed(placed, self._convergence(self._target, centre), distortion, ~(lost | torn), centre, faults)

    def _centred_map(self, batch: RingBatch, frames: IntArray) -> CentredMap:
        middle = batch.planar_centroid
        keeps_pole = np.zeros(batch.n_features, dtype=np.bool_)
        polar = np.flatnonzero(is_polar(frames))
        if len(polar):
            keeps_pole[polar] = (
                _reach(batch, at_pole=True)[polar] > np.sqrt(2.0) * self._globe.ellipsoid.authalic_radius_m
            )
        return CentredMap(self._globe, batch.origin, middle, frames, keeps_pole)

    def _cut(self, batch: RingBatch, frames: IntArray, to_plane: edges.ToPlane) -> RingBatch:
        if not self.plan.is_subdivided:
            return batch
        radius_m = self._globe.ellipsoid.semi_major_m
        return edges.cut(batch, edges.pieces(batch, to_plane, radius_m, self._unit_m(frames)))

    def _unit_m(self, frames: IntArray) -> FloatArray:
        """Take metres in a unit of each feature's coordinates, roughly: a degree is one of latitude."""
        degree_m = np.radians(self._globe.ellipsoid.semi_major_m)
        crs = self._crs
        if self.plan.is_geographic or crs is None:
            own = degree_m
        elif crs.is_geographic:
            own = degree_m * angle_unit_deg(crs)
        else:
            own = length_unit_m(crs)
        return np.select([is_polar(frames), frames == FRAME_LONLAT], [1.0, degree_m], own)

    def _is_beyond_pole(self, batch: RingBatch, frames: IntArray) -> BoolArray:
        beyond = np.zeros(batch.n_features, dtype=np.bool_)
        in_degrees = frames == (FRAME_LAYER if self.plan.is_geographic else FRAME_LONLAT)
        if not batch.n_rings or not in_degrees.any():
            return beyond
        first = batch.ring_start[:-1]
        middle = batch.origin[batch.ring_feature, 1]
        highest = np.maximum(
            np.abs(np.maximum.reduceat(batch.y, first) + middle), np.abs(np.minimum.reduceat(batch.y, first) + middle)
        )
        is_outside = (highest > MAX_LATITUDE_DEG) & in_degrees[batch.ring_feature]
        beyond[batch.ring_feature[is_outside]] = True
        return beyond

    def _is_round_the_globe(
        self, batch: RingBatch, frames: IntArray, placed: RingBatch, reach_m: FloatArray
    ) -> BoolArray:
        """Tell which features hold the opposite of their centre: there the plane turns inside out."""
        globe = self._globe.ellipsoid
        far = (reach_m > FAR * globe.authalic_radius_m) & ~is_polar(frames)
        if not far.any():
            return far
        some = batch.take_rings(far[batch.ring_feature])
        turn = np.radians(some.next_x - some.x)
        sine, _ = globe.authalic(np.radians(some.y + some.origin[some.vertex_feature, 1]))
        area = globe.authalic_radius_m**2 * some.sum_features(-0.5 * turn * (sine + some.shift_back(sine)))
        drawn = placed.sum_ring_values(placed.ring_signed_area)
        return np.asarray(far & ~(np.abs(drawn - area) <= TORN * np.abs(area)))

    def _centres_deg(self, batch: RingBatch, frames: IntArray) -> FloatArray:
        middle = batch.origin + batch.planar_centroid
        return np.column_stack(self._globe.degrees(middle[:, 0], middle[:, 1], frames))

    def _convergence(self, projection: pyproj.Proj, centre_deg: FloatArray) -> FloatArray:
        """Give the azimuth of grid north; 0 where the projection does not tell."""
        if not len(centre_deg):
            return np.zeros(0)
        factors = projection.get_factors(centre_deg[:, 0] + self._meridian_deg, centre_deg[:, 1], errcheck=False)
        convergence = np.asarray(factors.meridian_convergence, dtype=np.float64)
        return np.where(np.isfinite(convergence) & (np.abs(convergence) <= 360.0), convergence, 0.0)

    def _deformation(
        self, batch: RingBatch, frames: IntArray, projection: pyproj.Proj, reach_m: FloatArray
    ) -> FloatArray:
        """Look up the largest angular deformation over vertices spread evenly along each feature's rings."""
        largest = np.full(batch.n_features, np.nan)
        if not batch.n_rings:
            return largest
        wanted = np.clip(np.nan_to_num(2.0 * reach_m / SAMPLE_M), MIN_SAMPLES, MAX_SAMPLES).astype(np.int64)
        count = batch.sum_ring_values(batch.ring_size.astype(np.float64)).astype(np.int64)
        step = np.maximum(-(-count // wanted), 1)[batch.vertex_feature]
        first = np.cumsum(count) - count
        chosen = np.flatnonzero((np.arange(batch.n_vertices) - first[batch.vertex_feature]) % step == 0)
        owner = batch.vertex_feature[chosen]
        longitude, latitude = self._globe.degrees(
            batch.x[chosen] + batch.origin[owner, 0], batch.y[chosen] + batch.origin[owner, 1], frames[owner]
        )
        factors = projection.get_factors(np.asarray(longitude) + self._meridian_deg, latitude, errcheck=False)
        deformation = np.asarray(factors.angular_distortion, dtype=np.float64)
        deformation[~np.isfinite(deformation) | (np.abs(deformation) > 180.0)] = np.nan
        np.fmax.at(largest, owner, deformation)
        return largest


def _mapped(batch: RingBatch, to_plane: edges.ToPlane) -> tuple[RingBatch, BoolArray]:
    """Map features, and tell which of them have a vertex without a place."""
    x, y = to_plane(batch.x, batch.y, batch.vertex_feature)
    nowhere = ~(np.isfinite(x) & np.isfinite(y))
    lost = np.zeros(batch.n_features, dtype=np.bool_)
    if nowhere.any():
        lost[batch.vertex_feature[nowhere]] = True
        x[nowhere], y[nowhere] = 0.0, 0.0
    return oriented(batch.moved(x, y, np.zeros_like(batch.origin))), lost


def _is_torn(batch: RingBatch, to_own: CentredMap, placed: RingBatch) -> BoolArray:
    """Tell which features have another area on the shared plane than on their own."""
    own, _ = _mapped(batch, to_own)
    area = own.sum_ring_values(own.ring_signed_area)
    drawn = placed.sum_ring_values(placed.ring_signed_area)
    return np.asarray(np.abs(drawn - area) > TORN * np.abs(area))


def _reach(batch: RingBatch, *, at_pole: bool = False) -> FloatArray:
    """Measure how far each feature reaches from its local origin, or from 0, the pole of a polar plane."""
    farthest = np.zeros(batch.n_features)
    if batch.n_rings:
        x, y = batch.x, batch.y
        if at_pole:
            x, y = x + batch.origin[batch.vertex_feature, 0], y + batch.origin[batch.vertex_feature, 1]
        square = np.maximum.reduceat(x * x + y * y, batch.ring_start[:-1])
        np.maximum.at(farthest, batch.ring_feature, square)
    return np.sqrt(farthest)
