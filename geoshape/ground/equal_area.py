"""Plan the ground: check the CRS that a user names, or choose one for the layer; say how far areas can be trusted."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from enum import StrEnum

import numpy as np
import pyproj
from pyproj.exceptions import CRSError

from geoshape.errors import GroundError, OptionError
from geoshape.ground.areal_scale import areal_scale, layer_grid, lonlat_grid
from geoshape.ground.choice import choose_projection
from geoshape.ground.crs_parts import globe_of, horizontal, is_lonlat, length_unit_m, on_globe
from geoshape.options import GROUND_CENTRED, GROUND_LAYER, GROUND_PLANE, Bounds, Edges, MeasureOptions
from geoshape.rings import FloatArray

__all__ = ["GroundKind", "GroundPlan", "areal_scale", "horizontal", "layer_grid", "plan_ground"]

AREAL_TOLERANCE = 1e-6
"""How far the areal scale of a named CRS may be from 1."""


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
    name = own.ellipsoid.name if own.ellipsoid is not None else "own"
    plan = GroundPlan(
        kind=GroundKind.CENTRED,
        source_wkt=own.to_wkt(),
        target_wkt=None,
        label=f"centred: Lambert azimuthal equal-area about each shape, {name} ellipsoid",
        is_geographic=is_lonlat(own),
        unit_m=1.0,
        is_subdivided=options.edges is Edges.SOURCE,
        warnings=(),
    )
    if options.ground == GROUND_CENTRED:
        return plan
    if options.ground == GROUND_LAYER:
        target = choose_projection(own, lonlat_grid(own, bounds))
        label = f"layer: {_described(target)}, {name} ellipsoid"
        return replace(plan, kind=GroundKind.SHARED, target_wkt=target.srs, label=label)
    target = _understood(options.ground)
    area = lonlat_grid(own if _is_known(bounds) else target, bounds)
    _check_equal_area(target, area)
    return replace(
        plan,
        kind=GroundKind.SHARED,
        target_wkt=target.to_wkt(),
        label=f"{target.name}: {_described(target)}",
        warnings=_datum_warnings(own, target, np.radians(area[1])),
    )


def _is_known(bounds: Bounds | None) -> bool:
    return bounds is not None and all(map(math.isfinite, bounds))


def _plan_plane(crs: pyproj.CRS | None, bounds: Bounds | None) -> GroundPlan:
    plan = GroundPlan(
        kind=GroundKind.PLANE,
        source_wkt=None,
        target_wkt=None,
        label="plane: coordinates as they are, taken for metres",
        is_geographic=False,
        unit_m=1.0,
        is_subdivided=False,
        warnings=(),
    )
    if crs is None:
        return plan
    own = on_globe(crs) or crs
    unit = own.axis_info[0].unit_name if own.axis_info else "metre"
    label = f"plane: coordinates as they are in {own.name}"
    if own.is_geographic:
        text = (
            f"the layer's CRS, {own.name}, counts in {unit}s, and the ground is the plane of its coordinates: "
            f"areas and lengths are in {unit}s, whatever their names say; leave out --ground plane to measure metres"
        )
        return replace(plan, source_wkt=own.to_wkt(), label=label, warnings=(text,))
    unit_m = length_unit_m(own)
    if unit_m != 1.0:
        label += f", {unit} converted to metres"
    warnings = _scale_warnings(own, bounds) if own.is_projected else ()
    return replace(plan, source_wkt=own.to_wkt(), label=label, unit_m=unit_m, warnings=warnings)


def _scale_warnings(own: pyproj.CRS, bounds: Bounds | None) -> tuple[str, ...]:
    scale = areal_scale(own, lonlat_grid(own, bounds))
    if scale is None or max(abs(scale[0] - 1.0), abs(scale[1] - 1.0)) <= AREAL_TOLERANCE:
        return ()
    text = (
        f"areas are as drawn in {own.name}: {_percent(scale)} of true area; "
        "leave out --ground plane to measure true areas"
    )
    return (text,)


def _percent(scale: tuple[float, float]) -> str:
    low, high = (100.0 * value for value in scale)
    return f"{low:.4g} %" if f"{low:.4g}" == f"{high:.4g}" else f"{low:.5g} to {high:.5g} %"


def _understood(text: str) -> pyproj.CRS:
    try:
        crs = pyproj.CRS.from_user_input(text)
    except CRSError as error:
        reason = str(error).splitlines()[0]
        raise OptionError(
            f"ground = {text!r} is no CRS that PROJ knows ({reason}); use centred, layer, plane, or a CRS"
        ) from None
    own = on_globe(crs)
    if own is None:
        raise GroundError(f"{crs.name} has no place for areas on the globe; name a projected, equal-area CRS")
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


def _described(crs: pyproj.CRS) -> str:
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


def _datum_warnings(own: pyproj.CRS, target: pyproj.CRS, latitude_rad: FloatArray) -> tuple[str, ...]:
    mine, theirs = own.ellipsoid, target.ellipsoid
    ratio = globe_of(target).area_element(latitude_rad) / globe_of(own).area_element(latitude_rad) - 1.0
    worst = float(ratio[np.argmax(np.abs(ratio))])
    if mine is None or theirs is None or abs(worst) <= AREAL_TOLERANCE:
        return ()
    text = (
        f"the layer is on the {mine.name} ellipsoid, {target.name} on {theirs.name}: longitudes and latitudes are "
        f"taken over as they are, and areas are up to {100.0 * worst:+.2g} % off"
    )
    return (text,)
