"""The way back from the ground: places on a plane as coordinates of the layer."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
import pyproj

from geoshape.ground.crs_parts import angle_unit_deg, globe_of, length_unit_m, meridian_deg, to_lonlat, unfolded
from geoshape.ground.equal_area import GroundKind, GroundPlan
from geoshape.ground.place import Placed
from geoshape.ground.plane import Centres, Ellipsoid
from geoshape.rings import FloatArray, IntArray, RingBatch


def unproject(
    x: FloatArray, y: FloatArray, feature: IntArray, centre_deg: FloatArray, ellipsoid: Ellipsoid
) -> tuple[FloatArray, FloatArray]:
    """Take longitude and latitude of places on centred planes.

    Parameters
    ----------
    x, y : (n,) float64
        Metres about the centre, y to true north.
    feature : (n,) int64
        Which centre each place belongs to.
    centre_deg : (n_features, 2) float64
        Longitude and geographic latitude of the centres.
    ellipsoid : Ellipsoid

    Returns
    -------
    longitude, latitude : (n,) float64
        Degrees; longitudes run on from the centre's, past 180 if need be. NaN beyond the plane's edge.

    References
    ----------
    .. [1] Snyder, J. P. (1987). Map Projections: A Working Manual. USGS Professional Paper 1395, eq. 24-26 ... 24-30,
       with the way from the centre as a vector, which keeps its digits where the way is short.

    Examples
    --------
    >>> sphere = Ellipsoid(1.0, 0.0)
    >>> quarter, zero = np.array([np.sqrt(2.0)]), np.zeros(1)
    >>> longitude, latitude = unproject(quarter, zero, np.zeros(1, dtype=np.int64), np.array([[10.0, 0.0]]), sphere)
    >>> round(float(longitude[0]), 9), float(latitude[0])
    (100.0, 0.0)
    """
    with np.errstate(invalid="ignore"):
        # Features that have no place on the globe have no vertices either.
        centres = Centres.at(centre_deg[:, 1], ellipsoid).take(feature)
    radius = ellipsoid.authalic_radius_m
    east, north = x / (centres.stretch * radius), y * centres.stretch / radius
    half2 = 0.25 * (east * east + north * north)
    with np.errstate(invalid="ignore"):
        shrink = np.sqrt(1.0 - half2)
    up = 1.0 - 2.0 * half2
    east, north = east * shrink, north * shrink
    outward = up * centres.cosine - north * centres.sine
    sine = up * centres.sine + north * centres.cosine
    latitude = ellipsoid.geographic_latitude(sine, np.hypot(outward, east))
    longitude = centre_deg[feature, 0] + np.degrees(np.arctan2(east, outward))
    return longitude, np.degrees(latitude)


@dataclass(frozen=True, eq=False)
class WayBack:
    """Brings places on a ground back to the layer's coordinates.

    Attributes
    ----------
    plan : GroundPlan
    """

    plan: GroundPlan

    @cached_property
    def _crs(self) -> pyproj.CRS:
        return pyproj.CRS(self.plan.source_wkt)

    @cached_property
    def _to_lonlat(self) -> pyproj.Transformer | None:
        return to_lonlat(self._crs)

    @cached_property
    def _target(self) -> pyproj.Proj:
        return unfolded(self.plan.target_wkt)

    def coordinates(self, batch: RingBatch, placed: Placed) -> tuple[FloatArray, FloatArray]:
        """Give vertices as coordinates of the layer.

        Parameters
        ----------
        batch : RingBatch
            On the plane, about the same centres as ``placed``.
        placed : Placed
            Features as the ground placed them, and where their centres are.

        Returns
        -------
        x, y : (n_vertices,) float64
            Not finite where the layer's CRS has no place. Longitudes run on past 180 in outlines that cross it.
        """
        feature = batch.vertex_feature
        if self.plan.kind is GroundKind.PLANE:
            x, y = batch.x / self.plan.unit_m, batch.y / self.plan.unit_m
            return x + batch.origin[feature, 0], y + batch.origin[feature, 1]
        if self.plan.kind is GroundKind.CENTRED:
            longitude, latitude = unproject(batch.x, batch.y, feature, placed.centre_deg, globe_of(self._crs))
        else:
            longitude, latitude = self._from_shared(batch, placed)
        unit = angle_unit_deg(self._crs)
        longitude, latitude = longitude / unit, latitude / unit
        if self._to_lonlat is None:
            return longitude, latitude
        x, y = self._to_lonlat.transform(longitude, latitude, direction=pyproj.enums.TransformDirection.INVERSE)
        return np.asarray(x), np.asarray(y)

    def _from_shared(self, batch: RingBatch, placed: Placed) -> tuple[FloatArray, FloatArray]:
        feature = batch.vertex_feature
        meridian, unit = meridian_deg(self._crs), length_unit_m(pyproj.CRS(self.plan.target_wkt))
        with np.errstate(invalid="ignore"):
            east, north = self._target(placed.centre_deg[:, 0] + meridian, placed.centre_deg[:, 1])
        longitude, latitude = self._target(
            batch.x / unit + np.asarray(east)[feature], batch.y / unit + np.asarray(north)[feature], inverse=True
        )
        return np.asarray(longitude) - meridian, np.asarray(latitude)
