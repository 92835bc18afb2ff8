"""Plan the ground: check the CRS that a user names, or choose one for the layer; say how far areas can be trusted."""

from __future__ import annotations

import math
from dataclasses import dataclass
from enum import StrEnum

import numpy as np
import pyproj
from pyproj.exceptions import CRSError

from geoshape.errors import GroundError, OptionError
from geoshape.options import GROUND_CENTRED, GROUND_LAYER, GROUND_PLANE, Bounds, MeasureOptions
from geoshape.rings import FloatArray

AREAL_TOLERANCE = 1e-6
"""How far the areal scale of a named CRS may be from 1."""

STEP_RAD = 2e-4
"""Step of the differences that give an areal scale: small enough for 1e-8, large enough for rounding."""

FARTHEST_M = 1e9
"""Coordinates beyond this are PROJ's word for nowhere."""

GRID = 21
"""Points a side of the grid over the layer on which a CRS is tried."""

ROUND_ASPECT = 1.25
"""Width over height, or the inverse, up to which an extent counts as round."""

WORLD_WIDTH_DEG = 160.0
"""Extents wider than this get a cylinder: no cone or plane serves them."""

EQUATORIAL_LATITUDE_DEG = 15.0
POLAR_LATITUDE_DEG = 70.0
NEAR_POLE_DEG = 89.9


class GroundKind(StrEnum):
    """Which way leads from the layer's coordinates to a plane."""

    CENTRED = "centred"
    SHARED = "shared"
    PLANE = "plane"


@dataclass(frozen=True)
class GroundPlan:
    """All that a process needs to lay the ground.

    Attributes
    ----------
    kind : GroundKind
    source_wkt : str or None
        The layer's CRS.
    target_wkt : str or None
        The projection that all features share; None on centred planes and on the coordinates as they are.
    label : str
        What was chosen, in a line.
    is_geographic : bool
        Whether the layer's coordinates are longitude and latitude that are unwrapped and projected.
    unit_m : float
        Metres in a unit of the coordinates as they are.
    is_subdivided : bool
        Whether edges are straight in the layer's coordinates, and so curved on the plane.
    warnings : tuple of str
        What a reader of the numbers should know.
    """

    kind: GroundKind
    source_wkt: str | None
    target_wkt: str | None
    label: str
    is_geographic: bool
    unit_m: float
    is_subdivided: bool
    warnings: tuple[str, ...]


def plan_ground(crs: pyproj.CRS | None, bounds: Bounds | None, options: MeasureOptions) -> GroundPlan:
    """Plan where a layer is measured.

    Parameters
    ----------
    crs : pyproj.CRS or None
        The layer's CRS.
    bounds : (west, south, east, north) or None
        Its extent, in its CRS; None where it has none or is not known.
    options : MeasureOptions
        ``ground`` and ``edges`` decide.

    Returns
    -------
    GroundPlan

    Raises
    ------
    GroundError
        The layer has no CRS and the ground needs one; its CRS has no place on the globe; the CRS named is not
        equal-area.
    OptionError
        PROJ does not understand the CRS named.
    """
    if options.ground == GROUND_PLANE:
        return _plan_plane(crs, bounds)
    if crs is None:
        raise GroundError(
            "the layer has no CRS, so it has no place on the globe; say which with --assume-crs, "
            "or measure the coordinates as they are with --ground plane"
        )
    own = horizontal(crs)
    is_subdivided = options.edges == "source"
    name = own.ellipsoid.name if own.ellipsoid is not None else "own"
    if options.ground == GROUND_CENTRED:
        label = f"centred: Lambert azimuthal equal-area about each shape, {name} ellipsoid"
        return GroundPlan(GroundKind.CENTRED, own.to_wkt(), None, label, own.is_geographic, 1.0, is_subdivided, ())
    warnings: tuple[str, ...] = ()
    area = _lonlat_grid(own, bounds)
    if options.ground == GROUND_LAYER:
        target = _chosen(own, area)
        label = f"layer: {_named(target)}, {name} ellipsoid"
    else:
        target = _understood(options.ground)
        _check_equal_area(target, area)
        label = f"{target.name}: {_named(target)}"
        warnings = _datum_warnings(own, target)
    return GroundPlan(
        GroundKind.SHARED,
        own.to_wkt(),
        _definition(target),
        label,
        own.is_geographic,
        1.0,
        is_subdivided,
        warnings,
    )


def horizontal(crs: pyproj.CRS) -> pyproj.CRS:
    """Take the part of a CRS that lies on the globe.

    Raises
    ------
    GroundError
        There is none.
    """
    own = crs
    while own.is_bound and own.source_crs is not None:
        own = own.source_crs
    if own.is_compound:
        own = horizontal(own.sub_crs_list[0])
    if not (own.is_geographic or own.is_projected):
        raise GroundError(
            f"the layer's CRS, {crs.name}, is neither geographic nor projected; reproject the layer, "
            "or measure the coordinates as they are with --ground plane"
        )
    return own


def _plan_plane(crs: pyproj.CRS | None, bounds: Bounds | None) -> GroundPlan:
    if crs is None:
        label = "plane: coordinates as they are, taken for metres"
        return GroundPlan(GroundKind.PLANE, None, None, label, False, 1.0, False, ())  # noqa: FBT003
    try:
        own = horizontal(crs)
    except GroundError:
        own = crs
    unit_m = _unit_m(own)
    warnings: tuple[str, ...] = ()
    if own.is_geographic:
        unit_m = 1.0
        text = (
            f"the layer's CRS, {own.name}, counts in degrees, and the ground is the plane of its coordinates: "
            "areas and lengths are in degrees, whatever their names say"
        )
        warnings = (text,)
    elif own.is_projected:
        scale = areal_scale(own, _lonlat_grid(own, bounds))
        if scale is not None and max(abs(scale[0] - 1.0), abs(scale[1] - 1.0)) > AREAL_TOLERANCE:
            text = (
                f"areas are as drawn in {own.name}: {_percent(scale)} of true area; "
                "leave out --ground plane to measure true areas"
            )
            warnings = (text,)
    label = f"plane: coordinates as they are in {own.name}"
    wkt = own.to_wkt()
    return GroundPlan(GroundKind.PLANE, wkt, None, label, False, unit_m, False, warnings)  # noqa: FBT003


def _percent(scale: tuple[float, float]) -> str:
    low, high = (100.0 * value for value in scale)
    return f"{low:.4g} %" if f"{low:.4g}" == f"{high:.4g}" else f"{low:.5g} to {high:.5g} %"


def _unit_m(crs: pyproj.CRS) -> float:
    factor = crs.axis_info[0].unit_conversion_factor if crs.axis_info else 1.0
    return factor if crs.is_projected or not crs.is_geographic else 1.0


def _understood(text: str) -> pyproj.CRS:
    try:
        crs = pyproj.CRS.from_user_input(text)
    except CRSError as error:
        reason = str(error).splitlines()[0]
        raise OptionError(
            f"ground = {text!r} is no CRS that PROJ knows ({reason}); use centred, layer, plane, or a CRS"
        ) from None
    own = horizontal(crs) if not crs.is_geographic else crs
    if own.is_geographic:
        raise GroundError(
            f"{own.name} counts in degrees, and areas are not measured in degrees; name an equal-area CRS"
        )
    return own


def _check_equal_area(target: pyproj.CRS, area: tuple[FloatArray, FloatArray]) -> None:
    scale = areal_scale(target, area)
    if scale is None:
        raise GroundError(f"{target.name} does not reach the layer; name an equal-area CRS that does")
    worst = max(scale, key=lambda value: abs(value - 1.0))
    if abs(worst - 1.0) > AREAL_TOLERANCE:
        raise GroundError(
            f"{target.name} is not equal-area: its areal scale over the layer is {scale[0]:.6g} to {scale[1]:.6g}; "
            "use --ground centred or layer, or name an equal-area CRS"
        )


def areal_scale(crs: pyproj.CRS, area: tuple[FloatArray, FloatArray]) -> tuple[float, float] | None:
    """Find the least and the largest areal scale of a projected CRS.

    Parameters
    ----------
    crs : pyproj.CRS
    area : two (n,) float64
        Longitudes and latitudes, from Greenwich, in degrees.

    Returns
    -------
    (float, float) or None
        None where the CRS has no place for any of the points.

    Notes
    -----
    Taken from the projection itself by differences: what PROJ says of its factors is true to the form it has, and of
    some projections it has only the sphere's.
    """
    shape = crs.ellipsoid
    if shape is None or not len(area[0]):
        return None
    projection = unfolded(crs)
    unit_m = crs.axis_info[0].unit_conversion_factor
    longitude, latitude = (np.radians(values) for values in area)
    east, west = (
        _projected(projection, longitude + STEP_RAD, latitude),
        _projected(projection, longitude - STEP_RAD, latitude),
    )
    north, south = (
        _projected(projection, longitude, latitude + STEP_RAD),
        _projected(projection, longitude, latitude - STEP_RAD),
    )
    with np.errstate(invalid="ignore"):
        drawn = (east[0] - west[0]) * (north[1] - south[1]) - (east[1] - west[1]) * (north[0] - south[0])
        e2 = 1.0 - (shape.semi_minor_metre / shape.semi_major_metre) ** 2
        flatter = 1.0 - e2 * np.sin(latitude) ** 2
        true = (2.0 * STEP_RAD * shape.semi_major_metre) ** 2 * (1.0 - e2) * np.cos(latitude) / flatter**2
        scale = np.abs(drawn) * unit_m**2 / true
    scale = scale[np.isfinite(scale)]
    return (float(scale.min()), float(scale.max())) if len(scale) else None


def unfolded(definition: pyproj.CRS | str | None) -> pyproj.Proj:
    """Give a projection whose longitudes run on beyond its far meridian, so that what crosses it stays whole."""
    text = pyproj.Proj(definition).srs
    return pyproj.Proj(text if "+over" in text else f"{text} +over")


def _projected(projection: pyproj.Proj, longitude: FloatArray, latitude: FloatArray) -> tuple[FloatArray, FloatArray]:
    x, y = projection(longitude, latitude, radians=True)
    return np.where(np.abs(x) < FARTHEST_M, x, np.nan), np.where(np.abs(y) < FARTHEST_M, y, np.nan)


def layer_grid(crs: pyproj.CRS, bounds: Bounds | None) -> tuple[FloatArray, FloatArray]:
    """Lay a grid of longitudes and latitudes over a layer's extent."""
    return _lonlat_grid(horizontal(crs), bounds)


def _lonlat_grid(own: pyproj.CRS, bounds: Bounds | None) -> tuple[FloatArray, FloatArray]:
    """Lay a grid over the extent, in longitudes and latitudes; over where the CRS is used if there is no extent."""
    if bounds is None or not all(map(math.isfinite, bounds)):
        use = own.area_of_use
        west, south, east, north = use.bounds if use is not None else (-180.0, -80.0, 180.0, 80.0)
        east += 360.0 if east < west else 0.0
        world = np.meshgrid(np.linspace(west, east, GRID), np.linspace(south, north, GRID))
        return world[0].ravel(), np.clip(world[1].ravel(), -NEAR_POLE_DEG, NEAR_POLE_DEG)
    west, south, east, north = bounds
    grid = np.meshgrid(np.linspace(west, east, GRID), np.linspace(south, north, GRID))
    x: FloatArray = grid[0].ravel()
    y: FloatArray = grid[1].ravel()
    if own.is_projected:
        x, y = _to_lonlat(own, x, y)
    degrees = angle_unit_deg(own)
    return x * degrees + meridian_deg(own), np.clip(y * degrees, -NEAR_POLE_DEG, NEAR_POLE_DEG)


def _to_lonlat(own: pyproj.CRS, x: FloatArray, y: FloatArray) -> tuple[FloatArray, FloatArray]:
    transformer = pyproj.Transformer.from_crs(own, own.geodetic_crs, always_xy=True)
    longitude, latitude = transformer.transform(x, y)
    good = np.isfinite(longitude) & np.isfinite(latitude)
    return longitude[good], latitude[good]


def angle_unit_deg(crs: pyproj.CRS) -> float:
    """Give the degrees in a unit of a CRS's longitudes and latitudes."""
    geodetic = crs if crs.is_geographic else crs.geodetic_crs
    if geodetic is None or not geodetic.axis_info:
        return 1.0
    return float(np.round(math.degrees(geodetic.axis_info[0].unit_conversion_factor), 12))


def meridian_deg(crs: pyproj.CRS) -> float:
    """Give the longitude, from Greenwich, of the meridian that a CRS counts from."""
    prime = crs.prime_meridian
    return 0.0 if prime is None else math.degrees(float(prime.longitude) * float(prime.unit_conversion_factor))


def _chosen(own: pyproj.CRS, area: tuple[FloatArray, FloatArray]) -> pyproj.CRS:
    """Choose an equal-area projection by the shape of the extent, on the layer's own ellipsoid.

    Snyder 1987, USGS Professional Paper 1395, p. 34: azimuthal for round and polar regions, conic for wide ones in
    middle latitudes, cylindrical along the equator and for the world.
    """
    longitude, latitude = area
    if not len(longitude):
        raise GroundError("no corner of the layer's extent has a place on the globe; check the layer's CRS")
    # The shorter way round: an extent that crosses the antimeridian is not the whole world.
    start = longitude[0]
    unwrapped = start + np.mod(longitude - start + 180.0, 360.0) - 180.0 if own.is_projected else longitude
    west, east = float(unwrapped.min()), float(unwrapped.max())
    south, north = float(latitude.min()), float(latitude.max())
    middle = (west + east) / 2.0, (south + north) / 2.0
    width = (east - west) * math.cos(math.radians(middle[1]))
    height = max(north - south, 1e-9)
    projection = _projection(width, height, (west, south, east, north), middle)
    # PROJ would fold longitudes at the far meridian: outlines that cross it stay whole with +over.
    text = f"{projection} +x_0=0 +y_0=0 {_ellipsoid_text(own)} +units=m +no_defs +over"
    return pyproj.CRS.from_proj4(text)


def _projection(width: float, height: float, extent: Bounds, middle: tuple[float, float]) -> str:
    west, south, east, north = extent
    longitude, latitude = middle
    farthest = max(abs(south), abs(north))
    if east - west > WORLD_WIDTH_DEG and min(abs(south), abs(north)) < POLAR_LATITUDE_DEG - EQUATORIAL_LATITUDE_DEG:
        true_at = 30.0 if farthest > 30.0 else farthest / 2.0
        return f"+proj=cea +lat_ts={true_at:.6f} +lon_0={longitude:.6f}"
    if abs(latitude) > POLAR_LATITUDE_DEG:
        return f"+proj=laea +lat_0={math.copysign(90.0, latitude):.0f} +lon_0={longitude:.6f}"
    if width / height <= ROUND_ASPECT:
        return f"+proj=laea +lat_0={latitude:.6f} +lon_0={longitude:.6f}"
    if abs(latitude) < EQUATORIAL_LATITUDE_DEG:
        return f"+proj=cea +lat_ts={abs(latitude):.6f} +lon_0={longitude:.6f}"
    sixth = height / 6.0
    return (
        f"+proj=aea +lat_1={south + sixth:.6f} +lat_2={north - sixth:.6f} +lat_0={latitude:.6f} +lon_0={longitude:.6f}"
    )


def _ellipsoid_text(own: pyproj.CRS) -> str:
    shape = own.ellipsoid
    if shape is None:
        raise GroundError(f"{own.name} names no ellipsoid; reproject the layer")
    return f"+a={shape.semi_major_metre!r} +b={shape.semi_minor_metre!r}"


def _named(crs: pyproj.CRS) -> str:
    operation = crs.coordinate_operation
    if operation is None:
        return crs.name
    chosen = {
        parameter.name: parameter.value
        for parameter in operation.params
        if parameter.value and ("atitude" in parameter.name or "ongitude" in parameter.name)
    }
    places = ", ".join(f"{name.lower()} {value:g}" for name, value in chosen.items())
    return f"{operation.method_name} ({places})" if places else operation.method_name


def _definition(target: pyproj.CRS) -> str:
    # WKT has no word for +over.
    text = target.to_wkt()
    return target.srs if "+over" in target.srs else text


def _datum_warnings(own: pyproj.CRS, target: pyproj.CRS) -> tuple[str, ...]:
    mine, theirs = own.ellipsoid, target.ellipsoid
    if mine is None or theirs is None or mine.semi_major_metre != theirs.semi_major_metre:
        text = (
            f"the layer is on the {mine.name if mine else 'unknown'} ellipsoid, {target.name} on "
            f"{theirs.name if theirs else 'another'}; longitudes and latitudes are taken over as they are"
        )
        return (text,)
    return ()
